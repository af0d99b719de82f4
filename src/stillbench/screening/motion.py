"""Gross motion: stretches in which the sensor was handled, and turns that leave it at another level."""

import itertools

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray
from stillbench.foundation.errors import NothingToMeasureError
from stillbench.foundation.rounding import significant
from stillbench.foundation.units import parse_unit
from stillbench.logs.runs import sample_times
from stillbench.screening.outcome import Outcome, nothing
from stillbench.screening.view import RecordView
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.record import Record

BLOCKS = 400
SHORTEST_BLOCK = 32
FEWEST_BLOCKS = 8
RESTLESS = 8.0
"""A block moves when its quartile spread is this many times the still one; a pure random walk reaches five."""
MOST_LOOKED_AT = 1_024
"""Samples of a block, spread evenly: they tell its spread to some percent."""
LEVEL_JUMP = 30.0
SHORTEST_REST = 4
"""Blocks."""
STILL_QUANTILE = 0.25
LEAST_STILL = 0.1
QUARTILES = 1.349
"""Distance of the quartiles of a unit normal distribution."""


def _block_statistics(record: Record) -> tuple[FloatArray, FloatArray, list[tuple[int, int]]]:
    """Median and quartile spread of blocks within runs, and their bounds."""
    length = max(SHORTEST_BLOCK, record.values.size // BLOCKS)
    bounds = []
    for run in record.runs:
        count = max(1, run.n_samples // length)
        edges = np.linspace(run.first, run.last, count + 1).astype(int)
        bounds += list(zip(edges[:-1].tolist(), edges[1:].tolist(), strict=True))
    medians = np.empty(len(bounds))
    spreads = np.empty(len(bounds))
    for i, (first, last) in enumerate(bounds):
        block = record.values[first : last : max(1, (last - first) // MOST_LOOKED_AT)]
        block = block[~np.isnan(block)]
        if not block.size:
            medians[i] = spreads[i] = np.nan
            continue
        # A slow drift (a warm-up) is no motion: the straight course between the ends of the block is taken off.
        third = max(1, block.size // 3)
        slope = (np.median(block[-third:]) - np.median(block[:third])) / max(1, block.size - third)
        low, high = np.percentile(block - slope * np.arange(block.size), (25.0, 75.0))
        medians[i], spreads[i] = np.median(block), (high - low) / QUARTILES
    return medians, spreads, bounds


def find_motion(view: RecordView) -> Outcome:
    """Mark blocks that move, with one block on each side.

    Raises
    ------
    NothingToMeasureError
        When less than a tenth of the log is at rest.
    """
    record = view.record
    medians, spreads, bounds = _block_statistics(record)
    positive = spreads[spreads > 0]
    if len(bounds) < FEWEST_BLOCKS or positive.size < FEWEST_BLOCKS:
        return nothing(record)
    still = float(np.quantile(positive, STILL_QUANTILE))
    moved = spreads > RESTLESS * still
    jumped = np.zeros(len(bounds), dtype=bool)
    for apart in (1, 2):
        jump = np.abs(medians[apart:] - medians[:-apart]) > LEVEL_JUMP * still
        for i in np.flatnonzero(jump):
            jumped[i + 1 : i + apart] = True
            jumped[i] |= apart == 1
            jumped[i + apart] |= apart == 1
    if not (moved | jumped).any():
        return nothing(record)
    wide = (moved | jumped).copy()
    wide[1:] |= moved[:-1]
    wide[:-1] |= moved[1:]
    _close_short_rests(wide)
    marked = np.zeros(record.values.size, dtype=bool)
    for i in np.flatnonzero(wide):
        marked[bounds[i][0] : bounds[i][1]] = True
    share = float(marked.mean())
    if share > 1.0 - LEAST_STILL:
        raise NothingToMeasureError(
            f"channel {record.label!r} is at rest for {100 * (1 - share):.0f} % of the log only",
            "a log taken at rest",
            "choose the still part with --from and --to",
        )
    times = sample_times(record)
    unit = parse_unit(record.unit_text)
    findings = []
    for first, last in _stretches(wide):
        before = medians[first - 1] if first > 0 else np.nan
        after = medians[last] if last < wide.size else np.nan
        size = float(np.max(spreads[first:last]) / still)
        level = float(after - before)
        turned = np.isfinite(level) and abs(level) > LEVEL_JUMP * still
        shown = f"{significant(level / unit.factor)} {unit.text}"
        words = f"; the level afterwards differs by {shown}" if turned else ""
        findings.append(
            Finding(
                "motion",
                float(times[bounds[first][0]]),
                float(times[bounds[last - 1][1] - 1]),
                abs(level) / still if turned else size,
                "times the still spread",
                excluded=True,
                because=f"the spread of the readings is up to {significant(size, 2)} times that at rest{words}",
                disposition="left out; the record is split there"
                + (", each part has its own mean, and the bias is that of the longest part" if turned else ""),
            )
        )
    return Outcome(tuple(findings), marked)


def _close_short_rests(flags: BoolArray) -> None:
    """Between two motions a rest of a few blocks is handling too, in place."""
    moving = _stretches(flags)
    for (_, stop), (start, _) in itertools.pairwise(moving):
        if start - stop <= SHORTEST_REST:
            flags[stop:start] = True


def _stretches(flags: BoolArray) -> list[tuple[int, int]]:
    padded = np.concatenate([[False], flags, [False]])
    edges = np.flatnonzero(padded[1:] != padded[:-1])
    return list(zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True))
