"""The second opinion: generalized least squares on octave points of the curve, with their full covariance."""

import numpy as np

from stillbench.deviation.overlapping import pooled_deviation
from stillbench.foundation.arrays import FloatArray
from stillbench.likelihood.fitted import FittedModel
from stillbench.likelihood.quadratic import solve_nonnegative
from stillbench.terms.covariance import curve_covariance
from stillbench.terms.mixture import Mixture, term_of
from stillbench.terms.ramp import Ramp
from stillbench.vocabulary.noise_model import CurveEstimate
from stillbench.vocabulary.quantity import TIME_POWERS
from stillbench.vocabulary.record import Record

USABLE_SHARE = 10
FEWEST_POINTS = 3
ROUNDS = 4


def octave_factors(longest_run: int) -> FloatArray:
    """Return averaging factors 1, 2, 4, ... up to a tenth of the longest run."""
    return 2.0 ** np.arange(0.0, np.log2(max(1.0, longest_run / USABLE_SHARE)) + 1e-9)


def curve_estimates(record: Record, fitted: FittedModel, coverage: float) -> dict[str, CurveEstimate]:
    """Estimate the random terms from octave points of the Allan variance.

    A resolved ramp is taken off the record first. The covariance of the points is that of the terms themselves, so it is
    computed anew from the estimate, a few times.

    Parameters
    ----------
    record : Record
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
    factors = octave_factors(max(lengths)).astype(np.int64)
    roles = fitted.bins.roles
    if factors.size < max(FEWEST_POINTS, len(roles)):
        return {}
    pieces = record.pieces()
    slope = float(fitted.fit.beta[0]) if fitted.shapes.any() else 0.0
    if slope:
        pieces = [piece - slope * Ramp().shape(piece.size) for piece in pieces]
    variance = pooled_deviation(pieces, factors)[0] ** 2
    samples = factors.astype(np.float64)
    design = np.column_stack([term_of(role, fitted.correlation_time).allan_variance(samples) for role in roles])
    theta = fitted.fit.theta.copy()
    for _ in range(ROUNDS):
        mixture = Mixture(dict(zip(roles, theta.tolist(), strict=True)), 0.0, fitted.correlation_time)
        if not mixture.parts:
            return {}
        weight = np.linalg.inv(curve_covariance(mixture, factors, lengths))
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
