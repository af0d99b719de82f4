"""The low-pass of a sensor, fitted with its noise: S = H^2 (N^2 + B^2 g_B + K^2 g_K) + q.

q is white noise added behind the filter (the rounding of the output). N^2 and q cannot be told apart when the corner nears
half the sampling rate, so the white level that is reported is sqrt(N^2 + q).
"""

from abc import ABC, abstractmethod
from dataclasses import dataclass, replace
from typing import ClassVar

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray
from stillbench.likelihood.bins import BinnedPowers
from stillbench.likelihood.fit import Fit, maximise
from stillbench.terms.catalogue import BY_ROLE

OUTPUT = "output"
"""Role of the white noise behind the filter."""
LOWEST_CORNER = 1.0 / 260.0
HIGHEST_CORNER = 0.48
PER_DECADE = 16
GOLDEN_STEPS = 8
NODES = 64
LONGEST_AVERAGE = 400
FOLDS = 3


class LowPass(ABC):
    """A shape of low-pass with one parameter, its corner in cycles per sample (the length in samples for an average)."""

    words: ClassVar[str]

    @abstractmethod
    def gain(self, frequency: FloatArray, corner: float) -> FloatArray:
        """Return the squared magnitude at ``frequency`` (cycles per sample)."""


class OnePole(LowPass):
    """(1-a)^2/(1 + a^2 - 2 a cos 2 pi f), a = exp(-2 pi fc): a first-order digital filter."""

    words = "one pole"

    def gain(self, frequency: FloatArray, corner: float) -> FloatArray:
        """Return the squared magnitude."""
        a = np.exp(-2.0 * np.pi * corner)
        return np.asarray((1.0 - a) ** 2 / ((1.0 - a) ** 2 + 4.0 * a * np.sin(np.pi * frequency) ** 2))


class TwoPoles(LowPass):
    """1/(1 + (tan pi f/tan pi fc)^4): a second-order Butterworth filter in its digital form."""

    words = "two poles"

    def gain(self, frequency: FloatArray, corner: float) -> FloatArray:
        """Return the squared magnitude."""
        ratio = np.tan(np.pi * np.minimum(frequency, 0.5 - 1e-9)) / np.tan(np.pi * corner)
        return np.asarray(1.0 / (1.0 + ratio**4))


class TwoPolesAnalogue(LowPass):
    """sum_j 1/(1 + (abs(f + j)/fc)^4): second-order Butterworth ahead of the sampler, with what it folds back."""

    words = "two poles before sampling"

    def gain(self, frequency: FloatArray, corner: float) -> FloatArray:
        """Return the squared magnitude, aliases included."""
        total = np.zeros_like(frequency)
        for fold in range(-FOLDS, FOLDS + 1):
            total += 1.0 / (1.0 + (np.abs(frequency + fold) / corner) ** 4)
        return total


class MovingAverage(LowPass):
    """(sin pi f m/(m sin pi f))^2: the mean of the last m samples, overlapping; its parameter is m."""

    words = "moving average"

    def gain(self, frequency: FloatArray, corner: float) -> FloatArray:
        """Return the squared magnitude."""
        below = np.sin(np.pi * frequency)
        safe = np.where(below > 0, below, 1.0)
        return np.where(below > 0, (np.sin(np.pi * frequency * corner) / (corner * safe)) ** 2, 1.0)


POLES: tuple[LowPass, ...] = (OnePole(), TwoPoles(), TwoPolesAnalogue())
AVERAGE = MovingAverage()
HALF_POWER_OF_AVERAGE = 0.443
"""Corner (half power) of an average of m samples, times m: from sinc^2 = 1/2."""


@dataclass(frozen=True)
class FilterFit:
    """A low-pass fitted with its noise.

    Attributes
    ----------
    shape : LowPass
    parameter : float
        Corner in cycles per sample, or samples averaged.
    bins : BinnedPowers
        With the filtered basis and the role ``output``.
    fit : Fit
    """

    shape: LowPass
    parameter: float
    bins: BinnedPowers
    fit: Fit

    @property
    def corner(self) -> float:
        """Half-power frequency, cycles per sample."""
        return HALF_POWER_OF_AVERAGE / self.parameter if self.shape is AVERAGE else self.parameter

    def gain(self) -> FloatArray:
        """Return the squared magnitude at each bin."""
        return self.shape.gain(self.bins.frequency, self.parameter)


def filtered(bins: BinnedPowers, shape: LowPass, parameter: float) -> BinnedPowers:
    """Return the bins with the basis behind a low-pass, and white noise added after it."""
    columns = []
    for role in bins.roles:
        term = BY_ROLE[role]
        columns.append(
            bins.means_of(
                lambda k, n, term=term: term.cosine_power(k, n) * shape.gain(k / (2.0 * n), parameter),  # type: ignore[misc]
                NODES,
            )
        )
    behind = replace(bins, basis=np.column_stack(columns))
    return behind.with_column(OUTPUT, np.ones(bins.first.size))


def fit_low_pass(bins: BinnedPowers, shapes: BoolArray) -> FilterFit:
    """Return the low-pass shape and corner of largest likelihood, with the noise behind it.

    Parameters
    ----------
    bins : BinnedPowers
        The whole band, unfiltered basis.
    shapes : (r,) bool array
        Mean shapes in the model.
    """

    def tried(shape: LowPass, parameter: float) -> FilterFit:
        own = filtered(bins, shape, parameter)
        return FilterFit(shape, parameter, own, maximise(own, shapes=shapes))

    decades = np.log10(HIGHEST_CORNER / LOWEST_CORNER)
    grid = np.geomspace(LOWEST_CORNER, HIGHEST_CORNER, round(PER_DECADE * decades) + 1)
    best: FilterFit | None = None
    for shape in POLES:
        coarse = [tried(shape, float(corner)) for corner in grid]
        middle = int(np.argmin([one.fit.objective for one in coarse]))
        found = coarse[middle]
        low, high = np.log(grid[max(0, middle - 1)]), np.log(grid[min(grid.size - 1, middle + 1)])
        section = (np.sqrt(5.0) - 1.0) / 2.0
        for _ in range(GOLDEN_STEPS):
            inner = (high - section * (high - low), low + section * (high - low))
            left, right = (tried(shape, float(np.exp(point))) for point in inner)
            if left.fit.objective <= right.fit.objective:
                high, found = inner[1], min(found, left, key=_objective)
            else:
                low, found = inner[0], min(found, right, key=_objective)
        best = found if best is None else min(best, found, key=_objective)
    lengths = sorted({*range(2, 24), *(int(m) for m in np.geomspace(24, LONGEST_AVERAGE, 48))})
    averages = [tried(AVERAGE, float(m)) for m in lengths if m < bins.length.max() / 8]
    if averages:
        found = min(averages, key=_objective)
        at = lengths.index(int(found.parameter))
        between = range(lengths[max(0, at - 1)] + 1, lengths[min(len(lengths) - 1, at + 1)])
        found = min([found, *(tried(AVERAGE, float(m)) for m in between)], key=_objective)
        best = found if best is None else min(best, found, key=_objective)
    if best is None:
        raise ValueError(bins)
    return best


def _objective(found: FilterFit) -> float:
    return found.fit.objective
