"""Exponentially correlated noise in the rate, of a given correlation time."""

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.terms.base import Fluctuation

SERIES_BELOW = 1e-2
"""Lag over correlation time below which differences of exponentials are taken from their series."""


class CorrelatedNoise(Fluctuation):
    """First-order autoregressive samples; coefficient sigma is their standard deviation.

    Parameters
    ----------
    correlation_time : float
        Tc in samples.

    References
    ----------
    IEEE Std 952-1997, annex C (from memory): S(f) = (qc Tc)^2/(1 + (2 pi f Tc)^2) with sigma^2 = qc^2 Tc/2; here its sampled
    form. ``cosine_power`` is exact at every coefficient (derived: the sums over the covariance p^|i-j| are geometric).
    """

    role = "correlated"
    symbol = "G"
    time_power = 0.0

    def __init__(self, correlation_time: float) -> None:
        self.correlation_time = correlation_time
        self._p = float(np.exp(-1.0 / correlation_time))
        self._q = float(-np.expm1(-1.0 / correlation_time))  # 1 - p

    def _denominator(self, angle: FloatArray) -> FloatArray:
        """1 + p^2 - 2 p cos(angle), without cancellation."""
        return self._q**2 + 4.0 * self._p * np.sin(angle / 2.0) ** 2

    def spectrum(self, frequency: FloatArray) -> FloatArray:
        return np.asarray(self._q * (1.0 + self._p) / self._denominator(2.0 * np.pi * frequency))

    def cosine_power(self, k: FloatArray, n_samples: int) -> FloatArray:
        angle = np.pi * np.asarray(k, dtype=float) / n_samples
        denominator = self._denominator(angle)
        edge = np.cos(angle / 2.0) * self._q / denominator
        sign = np.where(np.rint(k) % 2 == 0, 1.0, -1.0)
        ends = 4.0 * self._p / n_samples * edge**2 * (1.0 - sign * np.exp(-n_samples / self.correlation_time))
        return np.asarray(self._q * (1.0 + self._p) / denominator - ends)

    def _sum_variance(self, count: FloatArray) -> FloatArray:
        """Variance of the sum of ``count`` samples."""
        count = np.asarray(count, dtype=float)
        decay = -np.expm1(-count / self.correlation_time)  # 1 - p^count
        return count * (1.0 + self._p) / self._q - 2.0 * self._p * decay / self._q**2

    def allan_variance(self, factor: FloatArray) -> FloatArray:
        factor = np.asarray(factor, dtype=float)
        ratio = factor / self.correlation_time
        closed = (4.0 * self._sum_variance(factor) - self._sum_variance(2.0 * factor)) / (2.0 * factor**2)
        # For averaging times far below Tc the closed form cancels: it is a walk of step variance 2/Tc.
        early = factor / 3.0 * (1.0 + 0.5 / factor**2) * 2.0 * self._q * (1.0 - 0.75 * ratio)
        return np.where(ratio < SERIES_BELOW / 10.0, early, closed)

    def covariance(self, lag: FloatArray) -> FloatArray:
        return -self._sum_variance(np.abs(lag)) / 2.0

    def generate(self, n_samples: int, generator: np.random.Generator) -> FloatArray:
        from scipy.signal import lfilter  # noqa: PLC0415  wanted only when noise is made

        innovations = generator.standard_normal(n_samples)
        innovations[1:] *= np.sqrt(self._q * (1.0 + self._p))
        return np.asarray(lfilter([1.0], [1.0, -self._p], innovations))
