"""Rate ramp: a straight trend in the mean of the log."""

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.terms.base import MeanShape


class Ramp(MeanShape):
    """A straight line; coefficient R is the change per sample in unit samples, signed.

    References
    ----------
    IEEE Std 952-1997, annex C (from memory): Allan variance R^2 tau^2/2, exact for a deterministic ramp. The cosine
    transform of a straight line is a geometric sum (derived here, checked against a numerical transform in the tests).
    """

    role = "ramp"
    symbol = "R"
    time_power = -1.0

    def shape(self, n_samples: int) -> FloatArray:
        return np.arange(n_samples, dtype=np.float64) - (n_samples - 1) / 2.0

    def cosine(self, k: FloatArray, n_samples: int) -> FloatArray:
        phase = np.pi * np.asarray(k, dtype=float) / (2 * n_samples)
        odd = np.asarray(k) % 2 == 1
        return np.where(odd, -np.sqrt(2.0 / n_samples) * np.cos(phase) / (2.0 * np.sin(phase) ** 2), 0.0)

    def allan_variance(self, factor: FloatArray) -> FloatArray:
        return factor**2 / 2.0
