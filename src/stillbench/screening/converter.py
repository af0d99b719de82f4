"""The step of the converter against the noise."""

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.screening.level import level_of
from stillbench.screening.outcome import Outcome, nothing
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.record import Record

CONTINUOUS_SHARE = 8
FINE = 0.6
REFUSED = 0.4
UNSEEN = 0.2


def converter_step(values: FloatArray) -> float | None:
    """Return the step between neighbouring codes, or None when the readings look continuous.

    The smallest gaps between distinct values, the mean of those below one and a half of the smallest.
    """
    levels = np.unique(values)
    if levels.size > values.size / CONTINUOUS_SHARE or levels.size < 2:  # noqa: PLR2004  one level has no gap
        return None
    gaps = np.diff(levels)
    gaps = gaps[gaps > 1e-9 * float(np.ptp(levels))]
    return float(np.mean(gaps[gaps < 1.5 * gaps.min()]))


def sample_noise(record: Record) -> float:
    """Return the standard deviation of the samples about the course of some hundred of them.

    What dithers a converter is all noise that is fast against the averages taken of it, filtered or not.
    """
    squares = np.concatenate([(piece - level_of(piece)) ** 2 for piece in record.pieces()])
    return float(np.sqrt(np.nanmean(squares)))


def check_converter(record: Record) -> Outcome:
    """Find out whether the noise is resolved by the converter.

    White rounding noise of step^2/12 adds to the white noise; below 0.6 steps it is no longer white, below 0.4 the white
    noise cannot be told (W. R. Bennett, Bell Syst. Tech. J. 27 (1948) 446; figures by simulation).
    """
    step = converter_step(record.present())
    if step is None:
        return nothing(record)
    noise = np.sqrt(max(0.0, sample_noise(record) ** 2 - step**2 / 12.0))
    ratio = float(noise / step)
    if ratio >= FINE:
        return nothing(record)
    refused = ratio < REFUSED
    finding = Finding(
        "coarse_converter",
        None,
        None,
        ratio,
        "steps",
        excluded=False,
        because="the noise of single samples is "
        + (f"{ratio:.2g} steps" if ratio > UNSEEN else f"below {UNSEEN:g} steps")
        + " of the converter",
        disposition="the white noise is not resolved: no figure is given for it"
        if refused
        else "the rounding is no longer quite white: the white noise may be off by some percent",
    )
    return Outcome((finding,), nothing(record).marked)
