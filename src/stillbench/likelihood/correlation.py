"""The exponentially correlated term: its time is found on a grid, then refined; intervals leave it free."""

from dataclasses import dataclass

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray
from stillbench.likelihood.bins import BinnedPowers
from stillbench.likelihood.fit import Fit, maximise
from stillbench.terms.correlated import CorrelatedNoise

SHORTEST = 4.0
LONGEST_SHARE = 4.0
"""Times from 4 samples to a quarter of the longest run."""
GOLDEN_STEPS = 8
FAMILY_RATIO = 12.0
FAMILY_STEPS = 24
FAMILY_PER_OCTAVE = 4


@dataclass(frozen=True)
class CorrelationFit:
    """The best correlated term with all others.

    Attributes
    ----------
    time : float
        Tc, samples.
    lower, upper : float
        Ends of its likelihood interval, samples; infinite where the log sets none.
    bins : BinnedPowers
        With the column of the term.
    fit : Fit
    ratio : float
        Likelihood ratio against the model without it.
    family : tuple of BinnedPowers
        With times near the best one.
    """

    time: float
    lower: float
    upper: float
    bins: BinnedPowers
    fit: Fit
    ratio: float
    family: tuple[BinnedPowers, ...]


def with_correlation(bins: BinnedPowers, time: float) -> BinnedPowers:
    """Return the bins with a correlated term of correlation time ``time`` samples."""
    return bins.with_column(CorrelatedNoise.role, bins.means_of(CorrelatedNoise(time).cosine_power))


def fit_correlation(
    bins: BinnedPowers, without: Fit, shapes: BoolArray, *, enough: float, threshold: float
) -> CorrelationFit | None:
    """Search the correlation time over a half-octave grid; None when the likelihood ratio stays below ``enough``.

    Parameters
    ----------
    bins : BinnedPowers
    without : Fit
        The full model without the term.
    shapes : (r,) bool array
    enough : float
        Likelihood ratio from which the term is taken.
    threshold : float
        Of the interval of the time.
    """

    def objective(time: float) -> float:
        return maximise(with_correlation(bins, time), shapes=shapes).objective

    longest = float(bins.length.max()) / LONGEST_SHARE
    if longest < 2.0 * SHORTEST:
        return None
    grid = SHORTEST * 2.0 ** np.arange(0.0, np.log2(longest / SHORTEST) + 1e-9, 0.5)
    values = [objective(float(time)) for time in grid]
    best = int(np.argmin(values))
    if 2.0 * (without.objective - values[best]) < enough:
        return None
    time = _golden(objective, float(np.log(grid[max(0, best - 1)])), float(np.log(grid[min(grid.size - 1, best + 1)])))
    chosen = with_correlation(bins, time)
    fit = maximise(chosen, shapes=shapes)
    near, rises = _family(bins, time, fit, shapes)
    lower, upper = _time_limits(time, rises, threshold)
    ratio = 2.0 * (without.objective - fit.objective)
    family = tuple(one for one, rise in zip(near, rises.values(), strict=True) if rise < FAMILY_RATIO)
    return CorrelationFit(time, lower, upper, chosen, fit, ratio, family)


def _golden(objective, low: float, high: float) -> float:  # type: ignore[no-untyped-def]  # noqa: ANN001
    section = (np.sqrt(5.0) - 1.0) / 2.0
    left, right = high - section * (high - low), low + section * (high - low)
    at_left, at_right = objective(float(np.exp(left))), objective(float(np.exp(right)))
    for _ in range(GOLDEN_STEPS):
        if at_left <= at_right:
            high, right, at_right = right, left, at_left
            left = high - section * (high - low)
            at_left = objective(float(np.exp(left)))
        else:
            low, left, at_left = left, right, at_right
            right = low + section * (high - low)
            at_right = objective(float(np.exp(right)))
    return float(np.exp(left if at_left <= at_right else right))


def _family(
    bins: BinnedPowers, time: float, fit: Fit, shapes: BoolArray
) -> tuple[list[BinnedPowers], dict[float, float]]:
    """Bins and rises of the likelihood at times around the best, outwards on both sides until it has risen enough."""
    near, rises = [], {}
    for direction in (-1, 1):
        for step in range(1, FAMILY_STEPS + 1):
            other = time * 2.0 ** (direction * step / FAMILY_PER_OCTAVE)
            one = with_correlation(bins, other)
            rise = 2.0 * (maximise(one, shapes=shapes).objective - fit.objective)
            near.append(one)
            rises[other] = rise
            if rise > FAMILY_RATIO:
                break
    return near, rises


def _time_limits(time: float, rises: dict[float, float], threshold: float) -> tuple[float, float]:
    """Cross the threshold on the signed root of the rises, which is near a straight line in ln Tc."""
    ends = []
    for sign in (-1, 1):
        points = sorted((t for t in rises if (t - time) * sign > 0), key=lambda t: abs(np.log(t / time)))
        logs: FloatArray = np.log(np.array([time, *points]))
        roots = np.sqrt(np.maximum(0.0, np.array([0.0, *(rises[t] for t in points)])))
        beyond = np.flatnonzero(roots >= np.sqrt(threshold))
        if not beyond.size:
            ends.append(0.0 if sign < 0 else np.inf)
            continue
        i = int(beyond[0])
        share = (np.sqrt(threshold) - roots[i - 1]) / (roots[i] - roots[i - 1])
        ends.append(float(np.exp(logs[i - 1] + share * (logs[i] - logs[i - 1]))))
    return ends[0], ends[1]
