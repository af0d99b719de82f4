"""White noise in the rate: angle (or velocity) random walk."""

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.terms.base import Fluctuation


class WhiteNoise(Fluctuation):
    """Independent samples; coefficient N is the standard deviation of one sample in unit samples.

    References
    ----------
    IEEE Std 952-1997, annex C (from memory): S(f) = N^2, Allan variance N^2/tau.
    """

    role = "white"
    symbol = "N"
    time_power = 0.5

    def spectrum(self, frequency: FloatArray) -> FloatArray:
        return np.ones_like(frequency)

    def cosine_power(self, k: FloatArray, n_samples: int) -> FloatArray:  # noqa: ARG002  the same at any length
        return np.ones_like(k, dtype=float)

    def allan_variance(self, factor: FloatArray) -> FloatArray:
        return 1.0 / factor

    def covariance(self, lag: FloatArray) -> FloatArray:
        return -np.abs(lag) / 2.0

    def generate(self, n_samples: int, generator: np.random.Generator) -> FloatArray:
        return generator.standard_normal(n_samples)
