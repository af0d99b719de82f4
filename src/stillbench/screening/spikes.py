"""Isolated gross spikes: single samples far outside the noise."""

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray, IntArray
from stillbench.foundation.scratch import blocks, spread
from stillbench.logs.runs import sample_times
from stillbench.screening.level import row_medians
from stillbench.screening.outcome import Outcome, nothing
from stillbench.screening.view import MOST_COMPARED, RecordView
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.record import Record

FALSE_ALARM = 1e-3
MARGIN = 0.5
SHOULDER = 0.75
LARGEST_SHARE = 0.01
LISTED = 20
NEIGHBOURS = 16
FEWEST_NEIGHBOURS = 3
SCALE_SAMPLE = 4_000
LONGEST_SPIKE = 2
"""Samples; longer ones are bursts."""


def threshold_of(n_samples: int) -> float:
    """Return how many standard deviations chance reaches once in a thousand logs, and half a one more."""
    from scipy.special import ndtri  # noqa: PLC0415  heavy imports stay inside functions

    return float(-ndtri(FALSE_ALARM / (2.0 * n_samples))) + MARGIN


def _contrast(values: FloatArray, places: IntArray) -> FloatArray:
    """Return each sample at ``places`` less the median of its neighbours, 16 on each side; slow courses drop out."""
    around = np.append(np.arange(-NEIGHBOURS, 0), np.arange(1, NEIGHBOURS + 1))
    inner = (places >= NEIGHBOURS) & (places < values.size - NEIGHBOURS)
    course = np.empty(places.size)
    course[inner] = row_medians(values[places[inner][:, None] + around])
    for i in np.flatnonzero(~inner):
        place = int(places[i])
        half = min(place, values.size - 1 - place)
        if half >= FEWEST_NEIGHBOURS:
            near = np.concatenate([values[place - half : place], values[place + 1 : place + half + 1]])
        else:  # at an end of the run there is one side only
            near = values[1 : 2 * FEWEST_NEIGHBOURS] if place < half + 1 else values[-2 * FEWEST_NEIGHBOURS : -1]
        course[i] = row_medians(near[None, :])[0]
    return np.asarray(values[places] - course)


def _local_scale(record: Record) -> float:
    """Robust standard deviation of the contrast over the record, from some thousand samples spread evenly."""
    sizes = []
    for piece in record.pieces():
        count = max(1, round(SCALE_SAMPLE * piece.size / record.values.size))
        places = np.unique(np.linspace(0, piece.size - 1, count).astype(np.int64))
        sizes.append(np.abs(_contrast(piece, places)))
    return _robust(np.concatenate(sizes))


def _robust(sizes: FloatArray) -> float:
    known = sizes[~np.isnan(sizes)]
    scale = 1.4826 * float(np.median(known, overwrite_input=True))
    return scale if scale > 0 else 1.2533 * float(np.mean(known))


def find_spikes(view: RecordView) -> Outcome:
    """Mark samples far from the slow course and from their neighbours, unless the noise as a whole has heavy tails."""
    record, residual = view.record, view.residual
    # Readings in coarse steps have no spread of their own below a step.
    step = view.step or 0.0
    scale = max(_robust(np.abs(spread(residual, MOST_COMPARED))), step)
    if scale == 0:
        return nothing(record)
    threshold = threshold_of(record.values.size)
    limit = SHOULDER * threshold * scale
    off = np.concatenate(
        [part.start + np.flatnonzero(np.abs(residual[part]) > limit) for part in blocks(residual.size)]
    )
    if not off.size:
        return nothing(record)
    local = max(_local_scale(record), step)
    contrast = np.empty(off.size)
    for run in record.runs:
        own = (off >= run.first) & (off < run.last)
        contrast[own] = _contrast(record.values[run.first : run.last], off[own] - run.first)
    gross = (np.abs(contrast) > threshold * local) & (np.abs(residual[off]) > threshold * scale)
    count = int(np.count_nonzero(gross))
    if not count:
        return nothing(record)
    size_at = dict(zip(off[gross].tolist(), contrast[gross].tolist(), strict=True))
    marked = np.zeros(record.values.size, dtype=bool)
    marked[off[gross]] = True
    groups = _groups(marked)
    shoulder = int(np.count_nonzero(np.abs(contrast) > SHOULDER * threshold * local)) - count
    if count > LARGEST_SHARE * record.values.size or shoulder > max(3, count):
        finding = Finding(
            "heavy_tails",
            None,
            None,
            float(count),
            "samples",
            excluded=False,
            because=f"{count} samples lie beyond {threshold:.1f} standard deviations and {shoulder} just below: the noise"
            " itself has heavy tails",
            disposition="nothing is left out; the interval of the white noise is widened by the kurtosis",
        )
        return Outcome((finding,), nothing(record).marked)
    times = sample_times(record)
    peaks = [max(range(first, last), key=lambda place: abs(size_at[place])) for first, last in groups]
    order = sorted(range(len(groups)), key=lambda i: -abs(size_at[peaks[i]]))
    findings = []
    for i in sorted(order[:LISTED]):
        first, last = groups[i]
        deviations = size_at[peaks[i]] / local
        many = f"{last - first} samples in a row, the largest" if last - first > 1 else "one sample"
        findings.append(
            Finding(
                "spike" if last - first <= LONGEST_SPIKE else "burst",
                float(times[first]),
                float(times[last - 1]),
                float(deviations),
                "standard deviations",
                excluded=True,
                because=f"{many} {deviations:+.1f} standard deviations off; chance reaches {threshold - MARGIN:.1f}"
                " once in a thousand logs",
                disposition="left out, treated as missing",
            )
        )
    if len(groups) > LISTED:
        findings.append(
            Finding(
                "spike",
                float(times[groups[0][0]]),
                float(times[groups[-1][1] - 1]),
                float(count),
                "samples",
                excluded=True,
                because=f"{len(groups)} spikes and bursts in all, {count} samples; the {LISTED} largest are listed",
                disposition="left out, treated as missing",
            )
        )
    return Outcome(tuple(findings), marked)


def _groups(marked: BoolArray) -> list[tuple[int, int]]:
    """Stretches of marked samples, those next to each other taken together."""
    padded = np.concatenate([[False], marked, [False]])
    edges = np.flatnonzero(padded[1:] != padded[:-1])
    return list(zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True))
