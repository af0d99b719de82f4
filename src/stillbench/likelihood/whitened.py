"""The log whitened by its own smoothed spectrum, for the kurtosis of its noise."""

from collections.abc import Sequence

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.likelihood.bins import bin_starts, cosine_transform

LONGEST = 1 << 20
"""Samples looked at in each run; the kurtosis of a million Gaussian samples has a standard error of 0.005."""
SHORTEST = 256
SMOOTHING = 2


def smooth_spectrum(transform: FloatArray, n_samples: int) -> FloatArray:
    """Return the course of the powers of coefficients 1 to n-1: bins of 24 a decade, each averaged with its neighbours."""
    starts = bin_starts(n_samples)
    width = np.diff(starts).astype(float)
    sums = np.add.reduceat(transform**2, starts[:-1] - 1)
    reach = np.ones(2 * SMOOTHING + 1)
    course = np.convolve(sums, reach, mode="same") / np.convolve(width, reach, mode="same")
    middle = np.log((starts[:-1] + starts[1:] - 1) / 2.0)
    logs = np.log(np.maximum(course, np.finfo(float).tiny))
    return np.asarray(np.exp(np.interp(np.log(np.arange(1.0, n_samples)), middle, logs)))


def whitened_kurtosis(pieces: Sequence[FloatArray]) -> float:
    """Return the kurtosis of the whitened log, pooled over runs; 3 for Gaussian noise, and where no run is long enough.

    The spectrum is that of the log itself, so that neither a trend nor a filter of the sensor hides the tails.

    Parameters
    ----------
    pieces : sequence of (n,) float arrays
    """
    from scipy import fft  # noqa: PLC0415  heavy imports stay inside functions

    second = fourth = count = 0.0
    for piece in pieces:
        part = piece[:LONGEST]
        if part.size < SHORTEST:
            continue
        transform = cosine_transform(part)
        white = transform / np.sqrt(smooth_spectrum(transform, part.size))
        square = fft.idct(np.concatenate([[0.0], white]), type=2, norm="ortho") ** 2
        second += float(square.sum())
        fourth += float((square**2).sum())
        count += part.size
    return fourth * count / second**2 if second > 0 else 3.0
