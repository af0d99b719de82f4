"""The log whitened by its fitted spectrum, for tests of its distribution."""

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.likelihood.bins import cosine_transform
from stillbench.terms.mixture import Mixture

LONGEST = 1 << 20
"""Samples looked at; the kurtosis of a million Gaussian samples has a standard error of 0.005."""


def whitened_kurtosis(values: FloatArray, mixture: Mixture) -> float:
    """Return the kurtosis of one run (its first million samples) whitened by the model; 3 for Gaussian noise.

    Parameters
    ----------
    values : (n,) float array
    mixture : Mixture
    """
    from scipy import fft  # noqa: PLC0415  heavy imports stay inside functions

    part = values[:LONGEST]
    transform = cosine_transform(part)
    k = np.arange(1, part.size, dtype=float)
    spectrum = mixture.cosine_power(k, part.size)
    if not np.all(spectrum > 0):
        return 3.0
    white = fft.idct(np.concatenate([[0.0], transform / np.sqrt(spectrum)]), type=2, norm="ortho")
    square = white**2
    return float(np.mean(square**2) / np.mean(square) ** 2)
