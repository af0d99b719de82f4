"""Random walk of the rate: rate (or acceleration) random walk."""

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.terms.base import Fluctuation


class RandomWalk(Fluctuation):
    """Running sum of independent steps; coefficient K is the standard deviation of one step in unit samples.

    References
    ----------
    IEEE Std 952-1997, annex C (from memory): S(f) = (K/(2 pi f))^2, Allan variance K^2 tau/3; the sampled walk has
    K^2 tau/3 (1 + 1/(2 m^2)). The cosine vectors diagonalise the second difference with free ends, hence
    1/(4 sin^2(pi k/2n)): G. Strang, SIAM Review 41 (1999) 135.
    """

    role = "walk"
    symbol = "K"
    time_power = -0.5

    def spectrum(self, frequency: FloatArray) -> FloatArray:
        return 1.0 / (4.0 * np.sin(np.pi * frequency) ** 2)

    def cosine_power(self, k: FloatArray, n_samples: int) -> FloatArray:
        return 1.0 / (4.0 * np.sin(np.pi * k / (2 * n_samples)) ** 2)

    def allan_variance(self, factor: FloatArray) -> FloatArray:
        return factor / 3.0 * (1.0 + 0.5 / factor**2)

    def covariance(self, lag: FloatArray) -> FloatArray:
        size = np.abs(lag)
        return (size**3 - size) / 12.0

    def generate(self, n_samples: int, generator: np.random.Generator) -> FloatArray:
        return np.cumsum(generator.standard_normal(n_samples))
