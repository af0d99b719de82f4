"""The second opinion: generalized least squares on octave points of the curve, with their full covariance."""

import numpy as np

from stillbench.deviation.overlapping import pooled_deviation
from stillbench.foundation.arrays import IntArray
from stillbench.likelihood.fitted import FittedModel
from stillbench.likelihood.quadratic import solve_nonnegative
from stillbench.terms.covariance import curve_products
from stillbench.terms.mixture import term_of
from stillbench.terms.ramp import Ramp
from stillbench.vocabulary.deviation_curve import DeviationCurve
from stillbench.vocabulary.noise_model import CurveEstimate
from stillbench.vocabulary.quantity import TIME_POWERS
from stillbench.vocabulary.record import Record

USABLE_SHARE = 10
FEWEST_POINTS = 3
ROUNDS = 4


def octave_points(factors: IntArray, longest_run: int) -> IntArray:
    """Return which averaging factors stand nearest to 1, 2, 4, ... up to a tenth of the longest run."""
    octaves = np.arange(0.0, np.log2(max(1.0, longest_run / USABLE_SHARE)) + 1e-9)
    return np.unique(np.abs(np.log2(factors)[:, None] - octaves).argmin(axis=0))


def curve_estimates(
    record: Record, curve: DeviationCurve, fitted: FittedModel, coverage: float
) -> dict[str, CurveEstimate]:
    """Estimate the random terms from octave points of the Allan variance.

    A resolved ramp is taken off the record first. The covariance of the points is that of the terms themselves, so it is
    computed anew from the estimate, a few times.

    Parameters
    ----------
    record : Record
    curve : DeviationCurve
        Of the same record.
    fitted : FittedModel
        Its terms are the ones tried; its estimate is where the covariance starts.
    coverage : float

    Returns
    -------
    dict of role to CurveEstimate
        SI; empty when there are too few points.

    References
    ----------
    Weighted least squares on the Allan variance with a full covariance: see reference/formulas.md (derived).
    """
    from scipy.special import ndtri  # noqa: PLC0415  heavy imports stay inside functions

    lengths = [run.n_samples for run in record.runs]
    factors = np.rint(curve.tau / record.sample_interval).astype(np.int64)
    points = octave_points(factors, max(lengths))
    factors = factors[points]
    roles = fitted.bins.roles
    if factors.size < max(FEWEST_POINTS, len(roles)):
        return {}
    slope = float(fitted.fit.beta[0]) if fitted.shapes.any() else 0.0
    if slope:
        pieces = [piece - slope * Ramp().shape(piece.size) for piece in record.pieces()]
        variance = pooled_deviation(pieces, factors)[0] ** 2
    else:
        variance = curve.deviation[points] ** 2
    samples = factors.astype(np.float64)
    terms = tuple(term_of(role, fitted.correlation_time) for role in roles)
    design = np.column_stack([term.allan_variance(samples) for term in terms])
    products = curve_products(terms, tuple(factors.tolist()), tuple(lengths))
    theta = fitted.fit.theta.copy()
    for _ in range(ROUNDS):
        if not (theta > 0).any():
            return {}
        weight = np.linalg.inv(np.einsum("s,t,stij->ij", theta, theta, products))
        information = design.T @ weight @ design
        scale = 1.0 / np.sqrt(np.diag(information))
        linear = scale * (design.T @ (weight @ variance))
        theta = scale * solve_nonnegative(information * np.outer(scale, scale), linear)
    errors = scale * np.sqrt(np.diag(np.linalg.inv(information * np.outer(scale, scale))))
    z = float(ndtri(0.5 + coverage / 2.0))
    estimates = {}
    for i, role in enumerate(roles):
        factor = record.sample_interval ** TIME_POWERS[role]
        ends = (theta[i], max(0.0, theta[i] - z * errors[i]), theta[i] + z * errors[i])
        estimates[role] = CurveEstimate(*(float(np.sqrt(end)) * factor for end in ends))
    return estimates
