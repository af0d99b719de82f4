"""Which model: full band or not, filter of the sensor or not, correlated term or not.

The chain, each link only when the one before did not explain the spectrum: all terms in the full band; a correlated term
beside them; a low-pass of the sensor fitted by shape; the same on the band it lets through; the largest band that fits.
"""

from dataclasses import dataclass, replace

import numpy as np

from stillbench.foundation.arrays import BoolArray
from stillbench.identification.band import LARGEST_MISFIT, NYQUIST, Band, largest_band
from stillbench.likelihood.bins import BinnedPowers
from stillbench.likelihood.correlation import CorrelationFit, fit_correlation
from stillbench.likelihood.fit import Fit, maximise
from stillbench.likelihood.goodness import droop_score, goodness_of_fit
from stillbench.likelihood.profile import likelihood_threshold, shape_limits
from stillbench.likelihood.response import FilterFit, fit_low_pass

RAMP_RATIO = 9.0
"""Likelihood ratio from which a ramp is accepted; a Wald ratio is not safe, a random walk looks like a trend."""
CORRELATED_RATIO = 11.0
FILTER_RATIO = 15.0
FULL_SCORE = 4.0
FULL_MISFIT = 4.5
"""Droop and misfit up to which the whole band is kept: no clean log of reference/calibration.md is cut, and a filter that costs
the white noise more than its error goes far beyond. A band cut by chance costs the white noise most of what is known of it."""
PASSED = 0.2
"""Squared magnitude of a filter above which its band is used when the whole band does not fit."""
LIKE_A_FILTER = 41.0
"""Correlation times (samples) up to which a low-pass of the sensor could look the same."""
FLOOR_SHARE = 0.01
"""Of the white level at low frequency that may be left at the top for a correlated term to be taken for a filter."""


@dataclass(frozen=True)
class Choice:
    """The model that is used.

    Attributes
    ----------
    whole, bins : BinnedPowers
        All bins, and those used in the fit, with the columns of the model.
    fit : Fit
    shapes : (r,) bool array
        Mean shapes in the model.
    ramp : (estimate, lower, upper, likelihood ratio)
        Per sample.
    band : Band
    low_pass : FilterFit or None
    correlation : CorrelationFit or None
    """

    whole: BinnedPowers
    bins: BinnedPowers
    fit: Fit
    shapes: BoolArray
    ramp: tuple[float, float, float, float]
    band: Band
    low_pass: FilterFit | None = None
    correlation: CorrelationFit | None = None


def choose_model(bins: BinnedPowers, coverage: float) -> Choice:
    """Choose the model of a record by the chain above.

    Parameters
    ----------
    bins : BinnedPowers
        The whole band, all terms.
    coverage : float
        Of intervals.
    """
    threshold = likelihood_threshold(coverage)
    index = bins.shapes.index("ramp")

    def with_ramp(used: BinnedPowers) -> tuple[BoolArray, tuple[float, float, float, float]]:
        ramp = shape_limits(used, index, threshold)
        shapes = np.zeros(len(bins.shapes), dtype=bool)
        shapes[index] = ramp[3] > RAMP_RATIO
        return shapes, ramp

    shapes, ramp = with_ramp(bins)
    fit = maximise(bins, shapes=shapes)
    plain = _full_band(bins, fit)
    correlation = fit_correlation(bins, fit, shapes, enough=CORRELATED_RATIO, threshold=threshold)
    if correlation is not None:
        band = _full_band(correlation.bins, correlation.fit)
        if band.fits and not _like_a_filter(correlation):
            shapes, ramp = with_ramp(correlation.bins)
            fit = maximise(correlation.bins, shapes=shapes)
            return Choice(correlation.bins, correlation.bins, fit, shapes, ramp, band, correlation=correlation)
    if plain.fits:
        return Choice(bins, bins, fit, shapes, ramp, plain)
    found = fit_low_pass(bins, shapes)
    if 2.0 * (fit.objective - found.fit.objective) > FILTER_RATIO:
        for used in (found.bins, found.bins.chosen(found.gain() >= PASSED)):
            behind = maximise(used, shapes=shapes)
            if goodness_of_fit(used, behind) < LARGEST_MISFIT:
                shapes, ramp = with_ramp(used)
                behind = maximise(used, shapes=shapes)
                top = NYQUIST if used is found.bins else float(used.frequency.max())
                band = Band(top, full=used is found.bins, fits=True, droop=plain.droop, misfit=plain.misfit)
                return Choice(found.bins, used, behind, shapes, ramp, band, low_pass=found)
    band = largest_band(bins, shapes)
    used = bins.below(band.top)
    shapes, ramp = with_ramp(used)
    return Choice(bins, used, maximise(used, shapes=shapes), shapes, ramp, band)


def white_alone(bins: BinnedPowers, coverage: float) -> Choice:
    """Return the model of a log too short for more than its white noise."""
    index = bins.roles.index("white")
    only = replace(bins, basis=bins.basis[:, [index]], roles=("white",))
    shapes = np.zeros(len(bins.shapes), dtype=bool)
    fit = maximise(only, shapes=shapes)
    ramp = shape_limits(only, bins.shapes.index("ramp"), likelihood_threshold(coverage))
    return Choice(only, only, fit, shapes, ramp, _full_band(only, fit))


def _full_band(bins: BinnedPowers, fit: Fit) -> Band:
    droop = droop_score(bins, fit, NYQUIST)
    misfit = goodness_of_fit(bins, fit)
    fits = abs(droop) < FULL_SCORE and misfit < FULL_MISFIT
    return Band(NYQUIST, full=True, fits=fits, droop=droop, misfit=misfit)


def _like_a_filter(found: CorrelationFit) -> bool:
    """Whether the correlated term may as well be the sensor's low-pass: short, and with next to no white floor above it."""
    theta = dict(zip(found.bins.roles, found.fit.theta.tolist(), strict=True))
    plateau = 2.0 * found.time * theta["correlated"]
    return found.time <= LIKE_A_FILTER and theta["white"] < FLOOR_SHARE * (plateau + theta["white"])
