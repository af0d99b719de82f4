"""A sum of noise terms of given strengths, unit samples."""

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from stillbench.foundation.arrays import FloatArray, IntArray
from stillbench.terms.base import Fluctuation
from stillbench.terms.catalogue import BY_ROLE, SHAPE_BY_ROLE
from stillbench.terms.correlated import CorrelatedNoise


@dataclass(frozen=True)
class Mixture:
    """Independent terms that add.

    Attributes
    ----------
    theta : mapping of role to squared unit-sample coefficient
    slope : float
        Ramp per sample.
    correlation_time : float or None
        Of the role ``correlated``, samples.
    """

    theta: Mapping[str, float]
    slope: float = 0.0
    correlation_time: float | None = None
    parts: tuple[tuple[float, Fluctuation], ...] = field(init=False, repr=False)

    def __post_init__(self) -> None:
        made = []
        for role, square in self.theta.items():
            if square > 0:
                made.append((square, term_of(role, self.correlation_time)))
        object.__setattr__(self, "parts", tuple(made))

    def allan_variance(self, factors: IntArray) -> FloatArray:
        """Return the Allan variance at averaging factors (k,), the ramp included."""
        samples = factors.astype(np.float64)
        total = self.slope**2 * SHAPE_BY_ROLE["ramp"].allan_variance(samples)
        for square, term in self.parts:
            total = total + square * term.allan_variance(samples)
        return np.asarray(total)

    def cosine_power(self, k: FloatArray, n_samples: int) -> FloatArray:
        """Return the expected power of cosine coefficients, the ramp left out."""
        total = np.zeros(np.shape(k))
        for square, term in self.parts:
            total = total + square * term.cosine_power(k, n_samples)
        return total


def term_of(role: str, correlation_time: float | None = None) -> Fluctuation:
    """Return the fluctuation of a role; the correlated one needs its time, samples."""
    if role == CorrelatedNoise.role:
        if correlation_time is None:
            raise ValueError(role)
        return CorrelatedNoise(correlation_time)
    return BY_ROLE[role]
