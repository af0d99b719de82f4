"""Flicker noise in the rate, band-limited at half the sampling rate: bias instability."""

import functools

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.terms.base import Fluctuation

FLOOR = 2.0 * np.log(2.0) / np.pi
"""Allan variance of unit flicker noise at long averaging times: the floor lies at 0.6643 B."""

SAMPLED_FACTORS = 64
"""Up to this averaging factor the band limit is felt and the variance is integrated."""

SINGLE_COEFFICIENTS = 32
"""Up to this cosine coefficient the exact mean correction alternates between odd and even; beyond, its smooth course is used."""


def mean_correction(k: FloatArray) -> FloatArray:
    """Return the power of cosine coefficient ``k`` of flicker noise over the spectrum at its frequency.

    The cosine vectors of a log with unknown mean are not exact eigenvectors of flicker noise. With W_k the transform of
    sqrt(2) cos(pi k t) on (0, 1), the expected power is the integral of |W_k(f)|^2 / (2 pi |f|), which in closed form is
    (2/pi) [Si(pi k) - (1 - (-1)^k)/(pi k)] times 1/(2 pi f_k), f_k = k/2. Derived here by partial fractions; the tests
    integrate it numerically. For large k it tends to 1 - 2/(pi^2 k).
    """
    from scipy.special import sici  # noqa: PLC0415  heavy imports stay inside functions

    k = np.asarray(k, dtype=float)
    whole = np.clip(np.rint(k), 1.0, SINGLE_COEFFICIENTS)
    exact = 2.0 / np.pi * (sici(np.pi * whole)[0] - (1.0 - (-1.0) ** whole) / (np.pi * whole))
    return np.where(k < SINGLE_COEFFICIENTS + 0.5, exact, 1.0 - 2.0 / (np.pi**2 * np.maximum(k, 1.0)))


@functools.lru_cache(maxsize=SAMPLED_FACTORS)
def _sampled_variance(factor: int) -> float:
    """Allan variance of averages of ``factor`` samples with spectrum 1/(2 pi f) up to f = 1/2.

    4 integral_0^(1/2) S(f) sin^4(pi f m) / (m sin(pi f))^2 df, by Gauss-Legendre quadrature on each lobe.
    """
    nodes, weights = np.polynomial.legendre.leggauss(24)
    edges = np.linspace(0.0, 0.5, factor + 1)
    half = np.diff(edges)[:, None] / 2.0
    frequency = edges[:-1, None] + half * (nodes + 1.0)
    integrand = np.sin(np.pi * frequency * factor) ** 4 / (factor * np.sin(np.pi * frequency)) ** 2 / frequency
    return float(4.0 / (2.0 * np.pi) * np.sum(integrand * weights * half))


class FlickerNoise(Fluctuation):
    """Noise of spectrum B^2/(2 pi f); coefficient B, the floor of the Allan deviation lies at 0.6643 B.

    References
    ----------
    IEEE Std 952-1997, annex C (from memory): S(f) = B^2/(2 pi f), Allan variance (2 ln 2/pi) B^2. Spectrum of generated
    noise: N. J. Kasdin, Proc. IEEE 83 (1995) 802, fractional integration of white noise.
    """

    role = "flicker"
    symbol = "B"
    time_power = 0.0

    def spectrum(self, frequency: FloatArray) -> FloatArray:
        return 1.0 / (2.0 * np.pi * frequency)

    def cosine_power(self, k: FloatArray, n_samples: int) -> FloatArray:
        return mean_correction(k) * n_samples / (np.pi * k)

    def allan_variance(self, factor: FloatArray) -> FloatArray:
        factor = np.asarray(factor, dtype=float)
        variance = np.full(factor.shape, FLOOR)
        for i in np.flatnonzero(factor.ravel() <= SAMPLED_FACTORS):
            variance.flat[i] = _sampled_variance(round(float(factor.flat[i])))
        return variance

    def covariance(self, lag: FloatArray) -> FloatArray:
        size = np.abs(lag)
        return size**2 * np.log(np.where(size > 0, size, 1.0)) / (2.0 * np.pi)

    def generate(self, n_samples: int, generator: np.random.Generator) -> FloatArray:
        """Draw by synthesis in the frequency domain over four times the length, so that it does not close on itself."""
        from scipy import fft  # noqa: PLC0415  wanted only when noise is made

        length = fft.next_fast_len(4 * n_samples, real=True)
        bins = length // 2 + 1
        amplitude = np.zeros(bins)
        amplitude[1:] = np.sqrt(length / (2.0 * np.pi * (np.arange(1, bins) / length)) / 2.0)
        spectrum = amplitude * (generator.standard_normal(bins) + 1j * generator.standard_normal(bins))
        if length % 2 == 0:
            spectrum[-1] = spectrum[-1].real * np.sqrt(2.0)
        return np.asarray(fft.irfft(spectrum, length)[:n_samples])
