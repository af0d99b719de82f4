"""What a noise term must be able to say of itself."""

from abc import ABC, abstractmethod
from typing import ClassVar

import numpy as np

from stillbench.foundation.arrays import FloatArray


class Fluctuation(ABC):
    """A random noise term, seen four ways: spectrum, cosine-transform power, Allan variance, covariance of the angle.

    All methods return the figure for a coefficient of one; it scales with the coefficient squared.

    Attributes
    ----------
    role : str
        As in ``vocabulary.quantity.ROLES``.
    symbol : str
        As in IEEE Std 952.
    time_power : float
        Coefficient in SI = unit-sample coefficient * sample_interval ** time_power.
    """

    role: ClassVar[str]
    symbol: ClassVar[str]
    time_power: ClassVar[float]

    @abstractmethod
    def spectrum(self, frequency: FloatArray) -> FloatArray:
        """Return the two-sided spectral density of the rate at ``frequency`` (cycles per sample, above 0 to 1/2)."""

    @abstractmethod
    def cosine_power(self, k: FloatArray, n_samples: int) -> FloatArray:
        """Return the mean square of coefficient ``k`` (1 to n-1, may be fractional) of the orthonormal DCT-II of ``n_samples`` rates."""

    @abstractmethod
    def allan_variance(self, factor: FloatArray) -> FloatArray:
        """Return the Allan variance at averaging factors ``factor`` (samples, from 1)."""

    @abstractmethod
    def covariance(self, lag: FloatArray) -> FloatArray:
        """Return the generalized covariance of the angle (the running sum of the rate) at ``lag`` samples."""

    @abstractmethod
    def generate(self, n_samples: int, generator: np.random.Generator) -> FloatArray:
        """Draw ``n_samples`` rates of unit coefficient."""


class MeanShape(ABC):
    """A term in the mean of the log: never a variance, always a regressor.

    Attributes
    ----------
    role, symbol, time_power
        As for Fluctuation.
    """

    role: ClassVar[str]
    symbol: ClassVar[str]
    time_power: ClassVar[float]

    @abstractmethod
    def shape(self, n_samples: int) -> FloatArray:
        """Return the shape in the rates, unit coefficient, shape (n_samples,)."""

    @abstractmethod
    def cosine(self, k: FloatArray, n_samples: int) -> FloatArray:
        """Return coefficient ``k`` of the orthonormal DCT-II of the shape."""

    @abstractmethod
    def allan_variance(self, factor: FloatArray) -> FloatArray:
        """Return the footprint in the Allan variance at averaging factors ``factor``."""
