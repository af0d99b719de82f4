"""Noise that changes its strength during the log: a cumulative sum of squares.

References
----------
C. Inclan and G. C. Tiao, J. Am. Stat. Assoc. 89 (1994) 913; scaled by the kurtosis, so that heavy tails raise no alarm.
"""

import numpy as np

from stillbench.foundation.arrays import FloatArray, IntArray
from stillbench.foundation.scratch import BLOCK, blocks
from stillbench.screening.outcome import Outcome, nothing
from stillbench.screening.view import MOST_COMPARED, RecordView
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.record import Record

THRESHOLD = 1.75
"""Of max |C_t/C_n - t/n| sqrt(n/(kurtosis - 1)); under constant noise 1.63 is passed once in a hundred logs (Kolmogorov)."""
FEWEST = 256
MATTERS = 0.05
"""Relative change of the noise below which it is of no concern."""


def find_variance_change(view: RecordView) -> Outcome:
    """Find whether the noise of single samples changes during the log, from differences of separate pairs of samples."""
    record = view.record
    group = max(1, record.values.size // MOST_COMPARED)
    square, fourth, places = _squares(record, group)
    known = np.isfinite(square)
    if not known.all():
        square, fourth, places = square[known], fourth[known], places[known]
    n = square.size
    if n < FEWEST or square.sum() == 0:
        return nothing(record)
    kurtosis = float(np.mean(fourth) / np.mean(square) ** 2)
    course = np.cumsum(square)
    course /= course[-1]
    course -= np.arange(1, n + 1) / n
    at = int(np.argmax(np.abs(course)))
    statistic = float(np.abs(course[at])) * np.sqrt(n * group / max(kurtosis - 1.0, 0.1))
    before, after = (
        np.sqrt(square[: at + 1].mean() / 2.0),
        np.sqrt(square[at + 1 :].mean() / 2.0) if at + 1 < n else 0.0,
    )
    if statistic <= THRESHOLD or before == 0 or abs(after / before - 1.0) < MATTERS:
        return nothing(record)
    when = float(_time_of(record, int(places[at])))
    finding = Finding(
        "variance_change",
        when,
        None,
        float(after / before),
        "times the noise before",
        excluded=False,
        because=f"the noise of single samples is {after / before:.3g} times as strong after this time as before it",
        disposition="left in: the white noise given is the root mean square of both, its interval holds for neither",
    )
    return Outcome((finding,), nothing(record).marked)


def _squares(record: Record, group: int) -> tuple[FloatArray, FloatArray, IntArray]:
    """Mean second and fourth powers of differences of separate pairs of samples, in groups of pairs, and their places."""
    squares, fourths, places = [], [], []
    for run in record.runs:
        for part in blocks(run.n_samples // (2 * group) * 2 * group, 2 * group * max(1, BLOCK // (2 * group))):
            piece = record.values[run.first + part.start : run.first + part.stop]
            square = (piece[1::2] - piece[::2]) ** 2
            squares.append(square.reshape(-1, group).mean(axis=1))
            fourths.append((square**2).reshape(-1, group).mean(axis=1))
            places.append(run.first + part.start + 2 * group * np.arange(square.size // group))
    return np.concatenate(squares), np.concatenate(fourths), np.concatenate(places)


def _time_of(record: Record, place: int) -> float:
    run = next(run for run in record.runs if run.first <= place < run.last)
    return run.start + (place - run.first) * record.sample_interval
