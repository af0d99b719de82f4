"""Readings at the end of the converter's range, or piled up at the extreme of the log."""

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray
from stillbench.foundation.suggestions import plural
from stillbench.logs.runs import sample_times
from stillbench.screening.outcome import Outcome, nothing
from stillbench.screening.view import CONTINUOUS_SHARE, RecordView
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.record import Record

FEWEST_EQUAL = 3


def _piled_up(levels: FloatArray, counts: FloatArray, n_samples: int, sigma: float) -> bool:
    """Whether the last of the sorted ``levels`` holds more samples than the tail before it explains."""
    if levels.size > n_samples / CONTINUOUS_SHARE:
        return bool(counts[-1] >= FEWEST_EQUAL)
    if levels.size < 4:  # noqa: PLR2004  too few levels to know a tail
        return False
    step = float(np.median(np.diff(levels)))
    if sigma < step:
        return False  # below one step the tail of the counts is not known well enough
    second, third = float(counts[-2]), float(counts[-3])
    expected = second**2 / third * np.exp(-((step / sigma) ** 2))
    spread = expected * np.sqrt(4.0 / second + 1.0 / third + 0.03**2)
    return bool(counts[-1] > expected + 5.0 * np.sqrt(expected) + 5.0 * spread + 5.0)


def find_saturation(view: RecordView) -> Outcome:
    """Find readings at the declared limits, or an extreme value that is taken too often.

    Saturated samples stay in: leaving out one side would bias the rest. The finding says that the noise is clipped.
    """
    record = view.record
    values = record.present()
    findings = []
    if record.limits is not None:
        low, high = record.limits
        at = (values <= low) | (values >= high)
        if at.any():
            findings.append(
                _finding(_times(record, at), int(np.count_nonzero(at)), values.size, "at the end of the declared range")
            )
    # Fewer than three samples at an extreme are never piled up, whatever the tail before it.
    if max(np.count_nonzero(values == values.min()), np.count_nonzero(values == values.max())) < FEWEST_EQUAL:
        return Outcome(tuple(findings), nothing(record).marked)
    levels, counts = np.unique(values, return_counts=True)
    sigma = float(np.std(values))
    for side, sign in (("highest", 1), ("lowest", -1)):
        ordered, how_often = (levels, counts) if sign > 0 else (-levels[::-1], counts[::-1])
        if _piled_up(ordered, how_often.astype(float), values.size, sigma):
            at = values == sign * ordered[-1]
            findings.append(
                _finding(
                    _times(record, at),
                    int(how_often[-1]),
                    values.size,
                    f"at the {side} value, more than its tail explains",
                )
            )
    return Outcome(tuple(findings), nothing(record).marked)


def _times(record: Record, at: BoolArray) -> FloatArray:
    return sample_times(record)[~record.missing][at]


def _finding(times: FloatArray, count: int, n_samples: int, where: str) -> Finding:
    return Finding(
        "saturation",
        float(times[0]),
        float(times[-1]),
        100.0 * count / n_samples,
        "%",
        excluded=False,
        because=f"{plural(count, 'sample')} ({100.0 * count / n_samples:.2g} %) {where}",
        disposition="left in: the noise is clipped there, white noise reads low and the mean is drawn inwards",
    )
