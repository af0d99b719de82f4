"""Quantization noise: white noise in the angle, seen in angle or velocity increments only."""

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.terms.base import Fluctuation


class QuantizationNoise(Fluctuation):
    """Differenced white noise; coefficient Q is the standard deviation of one angle reading.

    The steps of a converter that samples a voltage are not this term: they are white in the rate.

    References
    ----------
    IEEE Std 952-1997, annex C (from memory): S(f) = (4 Q^2/dt) sin^2(pi f dt), Allan variance 3 Q^2/tau^2. The end
    effect in ``cosine_power`` is derived here: n differences have n+1 readings, so two half-terms at the ends remain.
    """

    role = "quantization"
    symbol = "Q"
    time_power = 1.0

    def spectrum(self, frequency: FloatArray) -> FloatArray:
        return 4.0 * np.sin(np.pi * frequency) ** 2

    def cosine_power(self, k: FloatArray, n_samples: int) -> FloatArray:
        phase = np.pi * k / (2 * n_samples)
        return 4.0 * np.sin(phase) ** 2 + 4.0 / n_samples * np.cos(phase) ** 2

    def allan_variance(self, factor: FloatArray) -> FloatArray:
        return 3.0 / factor**2

    def covariance(self, lag: FloatArray) -> FloatArray:
        return np.where(np.rint(lag) == 0, 1.0, 0.0)

    def generate(self, n_samples: int, generator: np.random.Generator) -> FloatArray:
        return np.diff(generator.standard_normal(n_samples + 1))
