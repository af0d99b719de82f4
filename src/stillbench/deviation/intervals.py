"""Intervals of the curve, given a fitted model."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.terms.covariance import curve_edf
from stillbench.terms.mixture import Mixture
from stillbench.vocabulary.deviation_curve import DeviationCurve
from stillbench.vocabulary.noise_model import RESOLVED, NoiseModel
from stillbench.vocabulary.quantity import TIME_POWERS, role_of


def chi_square_limits(deviation: FloatArray, edf: FloatArray, coverage: float) -> tuple[FloatArray, FloatArray]:
    """Return the ends of the chi-square interval of a deviation with ``edf`` degrees of freedom.

    References
    ----------
    NIST SP 1065, eq. 45 (as quoted in public transcriptions): sigma_min^2 = s^2 edf/chi2(p_high).
    """
    from scipy.special import gammaincinv  # noqa: PLC0415  heavy imports stay inside functions

    tail = (1.0 - coverage) / 2.0
    low, high = (2.0 * gammaincinv(edf / 2.0, p) for p in (1.0 - tail, tail))
    return deviation * np.sqrt(edf / low), deviation * np.sqrt(edf / high)


def mixture_of(model: NoiseModel, sample_interval: float) -> Mixture:
    """Return the terms of a model in SI as a mixture in unit samples; a ramp counts when it is resolved."""
    theta: dict[str, float] = {}
    slope = 0.0
    correlation_time = None
    for name, term in model.terms.items():
        role = role_of(name)
        if role is None or term.coefficient is None:
            continue
        coefficient = term.coefficient / sample_interval ** TIME_POWERS[role]
        if role == "ramp":
            slope = coefficient if term.state == RESOLVED else 0.0
        else:
            theta[role] = coefficient**2
        if role == "correlated":
            correlation_time = term.parameters["correlation_time_s"] / sample_interval
    return Mixture(theta, slope, correlation_time)


def bound_deviation(
    curve: DeviationCurve,
    model: NoiseModel,
    *,
    sample_interval: float,
    run_lengths: Sequence[int],
    coverage: float = 0.95,
    mixture: Mixture | None = None,
    variance: FloatArray | None = None,
) -> DeviationCurve:
    """Add interval, degrees of freedom and model to a curve.

    Parameters
    ----------
    curve : DeviationCurve
    model : NoiseModel
        Fitted to the same record.
    sample_interval : float
        s.
    run_lengths : sequence of int
        Samples in each run.
    coverage : float
        Two-sided.
    mixture : Mixture, optional
        The terms in unit samples, where the model withholds a figure that its curve needs.
    variance : (k,) float array, optional
        Allan variance of the random terms at the points of the curve, where a filter of the sensor shapes it.
    """
    mixture = mixture_of(model, sample_interval) if mixture is None else mixture
    if not mixture.parts:
        mixture = Mixture({"white": 1.0})  # nothing known: the degrees of freedom of white noise
    factors = np.rint(curve.tau / sample_interval).astype(np.int64)
    edf = curve_edf(mixture, factors, run_lengths)
    lower, upper = chi_square_limits(curve.deviation, edf, coverage)
    ramp = replace(mixture, theta={})
    course = np.sqrt(mixture.allan_variance(factors) if variance is None else variance + ramp.allan_variance(factors))
    return replace(curve, lower=lower, upper=upper, edf=edf, model=course, coverage=coverage)
