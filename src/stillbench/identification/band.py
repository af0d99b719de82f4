"""The largest band of frequencies that the model explains: a low-pass inside the sensor is recognised by its droop."""

from dataclasses import dataclass

import numpy as np

from stillbench.foundation.arrays import BoolArray
from stillbench.likelihood.bins import BinnedPowers
from stillbench.likelihood.fit import Fit, maximise
from stillbench.likelihood.goodness import droop_score, goodness_of_fit

NYQUIST = 0.5
MOST_HALVINGS = 40
LARGEST_SCORE = 3.0
LARGEST_MISFIT = 3.0
FEWEST_BINS = 24
FEWEST_COEFFICIENTS = 256
CORNER_OVER_TOP = 3.0
"""By simulation the corner of a one- or two-pole filter lies 2.5 to 4 times above the largest accepted frequency."""


@dataclass(frozen=True)
class Band:
    """Which frequencies the fit uses.

    Attributes
    ----------
    top : float
        Cycles per sample.
    full : bool
        True when nothing had to be cut.
    fits : bool
        False when no band passes; then the full one is used.
    droop : float
        Score of the full band; strongly negative behind a low-pass.
    misfit : float
        Goodness of fit of the full band.
    """

    top: float
    full: bool
    fits: bool
    droop: float
    misfit: float


def _tested(bins: BinnedPowers, top: float, shapes: BoolArray) -> tuple[float, float, Fit]:
    part = bins.below(top)
    fit = maximise(part, shapes=shapes)
    return droop_score(part, fit, top), goodness_of_fit(part, fit), fit


def largest_band(bins: BinnedPowers, shapes: BoolArray) -> Band:
    """Lower the top of the band by half-octaves until droop and misfit are within three standard deviations.

    Where anything was rejected the top is halved once more, so that what is left of the droop does no harm.

    Parameters
    ----------
    bins : BinnedPowers
    shapes : (r,) bool array
        Mean shapes in the model.
    """
    droop, misfit, _ = _tested(bins, NYQUIST, shapes)
    if abs(droop) < LARGEST_SCORE and misfit < LARGEST_MISFIT:
        return Band(NYQUIST, full=True, fits=True, droop=droop, misfit=misfit)
    for j in range(1, MOST_HALVINGS):
        top = NYQUIST * 2.0 ** (-j / 2.0)
        part = bins.frequency <= top
        if np.count_nonzero(part) < FEWEST_BINS or bins.dof[part].sum() < FEWEST_COEFFICIENTS:
            break
        score, gof, _ = _tested(bins, top, shapes)
        if abs(score) < LARGEST_SCORE and gof < LARGEST_MISFIT:
            lower = top / 2.0
            part = bins.frequency <= lower
            enough = np.count_nonzero(part) >= FEWEST_BINS and bins.dof[part].sum() >= FEWEST_COEFFICIENTS
            return Band(lower if enough else top, full=False, fits=True, droop=droop, misfit=misfit)
    return Band(NYQUIST, full=True, fits=False, droop=droop, misfit=misfit)
