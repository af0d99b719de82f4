"""Noise that changes its strength during the log: a cumulative sum of squares.

References
----------
C. Inclan and G. C. Tiao, J. Am. Stat. Assoc. 89 (1994) 913; scaled by the kurtosis, so that heavy tails raise no alarm.
"""

import numpy as np

from stillbench.logs.runs import sample_times
from stillbench.screening.outcome import Outcome, nothing
from stillbench.screening.view import RecordView
from stillbench.vocabulary.finding import Finding

THRESHOLD = 1.75
"""Of max |C_t/C_n - t/n| sqrt(n/(kurtosis - 1)); under constant noise 1.63 is passed once in a hundred logs (Kolmogorov)."""
FEWEST = 256
MATTERS = 0.05
"""Relative change of the noise below which it is of no concern."""


def find_variance_change(view: RecordView) -> Outcome:
    """Find whether the noise of single samples changes during the log, from differences of separate pairs of samples."""
    record = view.record
    square = np.concatenate([(piece[1::2] - piece[: piece.size // 2 * 2 : 2]) ** 2 for piece in record.pieces()])
    known = np.isfinite(square)
    square = square if known.all() else square[known]
    n = square.size
    if n < FEWEST or square.sum() == 0:
        return nothing(record)
    kurtosis = float(square @ square / n / np.mean(square) ** 2)
    course = np.cumsum(square)
    course /= course[-1]
    course -= np.arange(1, n + 1) / n
    at = int(np.argmax(np.abs(course)))
    statistic = float(np.abs(course[at])) * np.sqrt(n / max(kurtosis - 1.0, 0.1))
    before, after = (
        np.sqrt(square[: at + 1].mean() / 2.0),
        np.sqrt(square[at + 1 :].mean() / 2.0) if at + 1 < n else 0.0,
    )
    if statistic <= THRESHOLD or before == 0 or abs(after / before - 1.0) < MATTERS:
        return nothing(record)
    places = np.concatenate([run.first + 2 * np.arange(run.n_samples // 2) for run in record.runs])
    when = float(sample_times(record)[places[known][at]])
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
