"""The log whitened by its fitted spectrum, for tests of its distribution."""

from collections.abc import Mapping

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.likelihood.bins import cosine_transform
from stillbench.terms.catalogue import BY_ROLE

LONGEST = 1 << 20
"""Samples looked at; the kurtosis of a million Gaussian samples has a standard error of 0.005."""


def whitened_kurtosis(values: FloatArray, theta: Mapping[str, float]) -> float:
    """Return the kurtosis of one run (its first million samples) whitened by the model; 3 for Gaussian noise.

    Parameters
    ----------
    values : (n,) float array
    theta : mapping of role to squared unit-sample coefficient
    """
    from scipy import fft  # noqa: PLC0415  heavy imports stay inside functions

    part = values[:LONGEST]
    transform = cosine_transform(part)
    k = np.arange(1, part.size, dtype=float)
    spectrum = sum(
        (square * BY_ROLE[role].cosine_power(k, part.size) for role, square in theta.items()), np.zeros(k.size)
    )
    if not np.all(spectrum > 0):
        return 3.0
    white = fft.idct(np.concatenate([[0.0], transform / np.sqrt(spectrum)]), type=2, norm="ortho")
    square = white**2
    return float(np.mean(square**2) / np.mean(square) ** 2)
