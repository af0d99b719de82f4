"""A channel that does not move, and stretches in which it is stuck."""

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray, IntArray
from stillbench.foundation.errors import NothingToMeasureError
from stillbench.logs.runs import sample_times
from stillbench.screening.outcome import Outcome, nothing
from stillbench.screening.view import RecordView
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.record import Record

BLOCK = 1_024
FALSE_ALARM = 0.01
LISTED = 20
MOST_BLOCKS = 512


def require_movement(record: Record) -> None:
    """Refuse a record all of whose values are equal.

    Raises
    ------
    NothingToMeasureError
    """
    values = record.present()
    if values.size and np.ptp(values) == 0:
        raise NothingToMeasureError(
            f"all {values.size} values of channel {record.label!r} are equal ({values[0]:.9g} in SI)",
            "a signal with noise in it",
            "check the wiring and the resolution of the converter; a dead channel cannot be characterized",
        )


def equal_runs(equal: BoolArray) -> tuple[IntArray, IntArray]:
    """Return start and length of every stretch of two or more equal values, from which samples equal the one before."""
    places = np.flatnonzero(equal)
    starts = np.flatnonzero(np.diff(places, prepend=-2) != 1)
    return places[starts] - 1, np.diff(np.append(starts, places.size)) + 1


def _commonest_share(block: FloatArray) -> float:
    """Return the share of the commonest value in a block."""
    ordered = np.sort(block)
    edges = np.flatnonzero(ordered[1:] != ordered[:-1])
    return float(np.diff(edges, prepend=-1, append=block.size - 1).max() / block.size)


def longest_chance_run(values: FloatArray, ties: float) -> float:
    """Return the length of a stretch of equal values that chance exceeds once in a hundred logs.

    With p the share of the commonest value in a block of 1024 samples (nine in ten of some hundred blocks have no more), or
    of equal neighbours if that is more, 1 + ln(0.01/(n (1-p)))/ln p: run lengths of a repeated independent trial are geometric.
    """
    count = max(1, values.size // BLOCK)
    chosen = np.unique(np.linspace(0, count - 1, min(count, MOST_BLOCKS)).astype(int))
    shares = [_commonest_share(values[BLOCK * i : BLOCK * (i + 1)]) for i in chosen]
    # A filtered sensor repeats a value oftener than its commonest value would by itself.
    p = min(max(float(np.quantile(shares, 0.9)), ties), 1.0 - 1e-6)
    return 1.0 + float(np.log(FALSE_ALARM / (values.size * (1.0 - p))) / np.log(p))


def find_stuck(view: RecordView) -> Outcome:
    """Mark stretches of equal values too long for chance."""
    record = view.record
    values = record.present()
    equal = np.zeros(values.size, dtype=bool)
    np.equal(values[1:], values[:-1], out=equal[1:])
    threshold = max(4.0, longest_chance_run(values, np.count_nonzero(equal) / max(1, values.size - 1)))
    starts, lengths = equal_runs(equal)
    stuck = np.flatnonzero(lengths >= threshold)
    if not stuck.size:
        return nothing(record)
    use = ~record.missing
    times = sample_times(record)[use]
    inside = np.zeros(values.size, dtype=bool)
    findings = []
    for i in stuck:
        inside[starts[i] : starts[i] + lengths[i]] = True
    for i in stuck[np.argsort(-lengths[stuck], kind="stable")][:LISTED]:
        first, last = int(starts[i]), int(starts[i] + lengths[i]) - 1
        findings.append(
            Finding(
                "stuck",
                float(times[first]),
                float(times[last]),
                float(lengths[i]),
                "samples",
                excluded=True,
                because=f"{int(lengths[i])} equal values in a row; chance gives {threshold:.0f} once in a hundred logs",
                disposition="left out",
            )
        )
    if stuck.size > LISTED:
        findings.append(
            Finding(
                "stuck",
                None,
                None,
                float(stuck.size),
                "stretches",
                excluded=True,
                because=f"{stuck.size} stuck stretches in all; the {LISTED} longest are listed",
                disposition="left out",
            )
        )
    marked = np.zeros(record.values.size, dtype=bool)
    marked[np.flatnonzero(use)[inside]] = True
    return Outcome(tuple(sorted(findings, key=lambda f: f.start if f.start is not None else np.inf)), marked)
