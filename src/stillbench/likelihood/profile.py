"""Profile-likelihood intervals of linear functions of the squared coefficients, and of a mean shape."""

from collections.abc import Callable, Sequence

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray
from stillbench.likelihood.bins import BinnedPowers
from stillbench.likelihood.fit import Constraint, Fit, maximise

GROWTH = 1.5
MOST_EXPANSIONS = 80
PRECISION = 2e-4
"""To which an interval's end is found, as a share of its distance from the estimate."""


def likelihood_threshold(coverage: float) -> float:
    """Return the quantile of chi-square with one degree of freedom: 3.84 for a two-sided 95 % interval."""
    from scipy.special import chdtri  # noqa: PLC0415  heavy imports stay inside functions

    return float(chdtri(1.0, 1.0 - coverage))


def profile_limits(
    bins: BinnedPowers,
    best: Fit,
    weights: FloatArray,
    threshold: float,
    *,
    terms: BoolArray | None = None,
    shapes: BoolArray | None = None,
    family: Sequence[BinnedPowers] = (),
) -> tuple[float, float]:
    """Return the ends of the profile-likelihood interval of sqrt(weights @ theta).

    Parameters
    ----------
    bins : BinnedPowers
    best : Fit
        The maximum with the same terms and shapes, restricted.
    weights : (a,) float array
        Not negative.
    threshold : float
        Of 2 (l - l_min).
    terms, shapes
        As for ``maximise``.
    family : sequence of BinnedPowers
        The same data with the basis at other values of a parameter that is free: the best of them counts at every point.

    Returns
    -------
    lower, upper : float
        Amplitudes, unit samples; lower is 0 where zero is inside the interval.

    References
    ----------
    W. Q. Meeker and L. A. Escobar, Am. Stat. 49 (1995) 48.
    """
    estimate = float(np.sqrt(np.maximum(0.0, weights @ best.theta)))

    def rise(amplitude: float) -> float:
        held = Constraint(weights, amplitude**2)
        least = min(
            maximise(one, terms=terms, shapes=shapes, constraint=held, start=best.theta).objective
            for one in (bins, *family)
        )
        return 2.0 * (least - best.objective) - threshold

    # A first guess of the scale from the curvature at the maximum.
    covariance = np.linalg.pinv(best.information)
    spread = float(np.sqrt(np.maximum(0.0, weights @ covariance @ weights)))
    width = spread / (2.0 * estimate) if estimate > 0 else 0.0
    if not 0 < width < estimate:
        width = max(float(np.sqrt(spread)), estimate)
    width *= float(np.sqrt(threshold))
    upper = _crossing(rise, estimate, width)
    lower = 0.0
    if estimate > 0 and rise(0.0) > 0:
        lower = max(0.0, -_crossing(lambda negative: rise(max(0.0, -negative)), -estimate, min(width, estimate)))
    return lower, upper


def shape_limits(
    bins: BinnedPowers, index: int, threshold: float, *, terms: BoolArray | None = None
) -> tuple[float, float, float, float]:
    """Return estimate, lower, upper of one mean shape and its likelihood ratio against none, by plain likelihood.

    The random terms are fitted again at every value, because a random walk can look like a trend. The noise at the
    frequencies of the shape is known from few coefficients only, so the threshold of the interval is that of Student's t.

    Parameters
    ----------
    bins : BinnedPowers
    index : int
        Which shape.
    threshold : float
        Of 2 (l - l_min).
    terms
        As for ``maximise``.
    """
    shapes = np.zeros(len(bins.shapes), dtype=bool)
    shapes[index] = True
    with_shape = maximise(bins, terms=terms, shapes=shapes, restricted=False)
    without = maximise(bins, terms=terms, restricted=False)
    threshold = _student_threshold(bins, with_shape, index, threshold)
    held = np.zeros(len(bins.shapes))
    estimate = float(with_shape.beta[index])
    ratio = max(0.0, 2.0 * (without.objective - with_shape.objective))

    def rise(value: float) -> float:
        held[index] = value
        fit = maximise(bins, terms=terms, restricted=False, fixed_beta=held.copy(), start=with_shape.theta)
        return 2.0 * (fit.objective - with_shape.objective) - threshold

    width = float(np.sqrt(with_shape.beta_covariance[index, index] * threshold))
    upper = _crossing(rise, estimate, width)
    lower = -_crossing(lambda value: rise(-value), -estimate, width)
    return estimate, lower, upper, ratio


def _student_threshold(bins: BinnedPowers, fit: Fit, index: int, threshold: float) -> float:
    """Raise a chi-square threshold to what Student's t asks for, given how well the variance of the shape is known.

    In a regression with nu degrees of freedom the likelihood ratio is (nu + 1) ln(1 + t^2/nu); nu = 2 V^2 / Var[V] with
    V the variance of the coefficient, a function of theta.
    """
    from scipy.special import chdtrc, stdtrit  # noqa: PLC0415  heavy imports stay inside functions

    variance = float(fit.beta_covariance[index, index])
    gram = bins.gram[:, index, index]
    slope = variance**2 * (bins.dof * gram / fit.spectrum**2) @ bins.basis
    spread = float(slope @ np.linalg.pinv(fit.information, hermitian=True) @ slope)
    freedom = max(2.0, 2.0 * variance**2 / spread) if spread > 0 else np.inf
    if not np.isfinite(freedom):
        return threshold
    t = float(stdtrit(freedom, 1.0 - float(chdtrc(1.0, threshold)) / 2.0))
    return float((freedom + 1.0) * np.log1p(t**2 / freedom))


def _crossing(rise: Callable[[float], float], inside: float, width: float) -> float:
    """Step outwards from ``inside`` until ``rise`` is positive, then close in by a bracketing root search."""
    from scipy.optimize import brentq  # noqa: PLC0415  heavy imports stay inside functions

    near, far = inside, inside + width
    for _ in range(MOST_EXPANSIONS):
        if rise(far) > 0:
            if rise(near) > 0:
                return near
            return float(brentq(rise, near, far, xtol=PRECISION * (far - inside), rtol=8.9e-16))
        near, far = far, inside + GROWTH * (far - inside)
    return float("inf")
