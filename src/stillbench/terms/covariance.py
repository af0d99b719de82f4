"""One rule for variances of weighted angles, and what follows from it: the spread of the Allan deviation.

For weights w at times t with sum w = 0 and sum w t = 0, Var[sum w x(t)] = sum_ij w_i w_j G(t_i - t_j), with G the
generalized covariance of the angle x. Second differences of x, of which the Allan variance is the mean square, are such
weights, so their covariance at any lag, and with it the equivalent degrees of freedom of the mean square, follow from G.

References
----------
C. A. Greenhall, "Recipes for degrees of freedom of frequency stability estimators", IEEE Trans. Instrum. Meas. 40 (1991)
994; generalized autocovariance from memory, formulas derived here and checked against exact white-noise values.
"""

from collections.abc import Sequence
from functools import lru_cache

import numpy as np

from stillbench.foundation.arrays import FloatArray, IntArray
from stillbench.terms.base import Fluctuation
from stillbench.terms.catalogue import SHAPE_BY_ROLE
from stillbench.terms.mixture import Mixture

SECOND_DIFFERENCE_PRODUCT = np.array([1.0, -4.0, 6.0, -4.0, 1.0])
"""Autocorrelation of the weights (1, -2, 1)."""

EXACT_FACTOR = 512
"""Up to this averaging factor every lag is summed; above, lags are strided."""

STRIDES_PER_FACTOR = 128
"""Lags per averaging time when strided; the summand is smooth on that scale."""

REACH = 8
"""Lags beyond this many averaging times are left out: white and walk end at 2, flicker falls as lag^-4."""


def pair_covariance(parts: Sequence[tuple[float, Fluctuation]], factor: int, lag: FloatArray) -> FloatArray:
    """Return the covariance of two normalised second differences of the angle, ``lag`` samples apart.

    Parameters
    ----------
    parts : sequence of (squared unit-sample coefficient, term)
    factor : int
        Averaging factor m, samples.
    lag : (l,) float array
        Samples.

    Returns
    -------
    (l,) float array
        R(l), where R(0) is the Allan variance.
    """
    total = np.zeros(np.shape(lag))
    for square, term in parts:
        for offset, product in zip(range(-2, 3), SECOND_DIFFERENCE_PRODUCT, strict=True):
            total += square * product * term.covariance(lag + offset * factor)
    return total / (2.0 * factor**2)


def _lags(factor: int, n_pairs: int) -> tuple[FloatArray, FloatArray]:
    """Lags from 0 on, and the number of lags each stands for (both signs), for a symmetric sum."""
    reach = min(REACH * factor, n_pairs - 1)
    stride = 1 if factor <= EXACT_FACTOR else factor // STRIDES_PER_FACTOR
    lags = np.unique(np.concatenate([np.arange(0, reach + 1, stride), [reach]])).astype(float)
    # Trapezoid rule: each lag stands for half the way to its neighbours. At stride 1 this is the plain sum.
    edges = np.concatenate([[0.0], (lags[1:] + lags[:-1]) / 2.0, [reach + 0.5]])
    return lags, 2.0 * np.diff(edges)


def _mean_square_variance(mixture: Mixture, fixed: float, factor: int, pairs: FloatArray) -> tuple[float, float]:
    """Return R(0) and Var[mean of (second difference + c)^2], c^2 = ``fixed``, over runs with ``pairs`` pairs each.

    Var = 2/M^2 sum_l (M - |l|) (R(l)^2 + 2 c^2 R(l)).
    """
    smooth = [part for part in mixture.parts if part[1].role != "quantization"]
    spikes = [part for part in mixture.parts if part[1].role == "quantization"]

    def weighted(lags: FloatArray, weights: FloatArray, values: FloatArray) -> float:
        overlap = np.clip(pairs[:, None] - lags, 0.0, None).sum(axis=0)
        return float(np.sum(weights * overlap * values))

    lags, weights = _lags(factor, int(pairs.max()))
    course = pair_covariance(smooth, factor, lags)
    total = weighted(lags, weights, course**2 + 2.0 * fixed * course)
    variance = float(course[0])
    if spikes:
        # White noise in the angle correlates at 0, m and 2m only; a strided sum would count these spikes too often.
        where = np.array([0.0, factor, 2.0 * factor])
        below = pair_covariance(smooth, factor, where)
        spike = pair_covariance(spikes, factor, where)
        rise = (below + spike) ** 2 - below**2 + 2.0 * fixed * spike
        total += weighted(where, np.array([1.0, 2.0, 2.0]), rise)
        variance += float(spike[0])
    return variance, 2.0 * total / float(pairs.sum()) ** 2


def curve_edf(mixture: Mixture, factors: IntArray, run_lengths: Sequence[int]) -> FloatArray:
    """Return the equivalent degrees of freedom of the overlapping Allan variance pooled over runs.

    Parameters
    ----------
    mixture : Mixture
        Its ramp adds a fixed part to every second difference.
    factors : (k,) int array
        Averaging factors.
    run_lengths : sequence of int
        Samples in each run.

    Returns
    -------
    (k,) float array
        edf = 2 (expected Allan variance)^2 / Var[estimate], at least 1.
    """
    edf = np.empty(factors.size)
    for i, factor in enumerate(int(m) for m in factors):
        pairs = np.array([n - 2 * factor + 1 for n in run_lengths if n >= 2 * factor], dtype=float)
        fixed = mixture.slope**2 * float(SHAPE_BY_ROLE["ramp"].allan_variance(np.array(float(factor))))
        variance, spread = _mean_square_variance(mixture, fixed, factor, pairs)
        edf[i] = max(1.0, 2.0 * (variance + fixed) ** 2 / spread) if spread > 0 else 1.0
    return edf


def cross_covariance(term: Fluctuation, first: int, second: int, lag: FloatArray) -> FloatArray:
    """Return the covariance of normalised second differences at averaging factors ``first`` and ``second``, unit coefficient.

    R(l) = sum_ab c_a c_b G(l + a m_1 - b m_2)/(2 m_1 m_2), c = (1, -2, 1), the second difference of ``second`` starting
    ``lag`` samples before that of ``first``.
    """
    total = np.zeros(np.shape(lag))
    for a, weight_a in enumerate((1.0, -2.0, 1.0)):
        for b, weight_b in enumerate((1.0, -2.0, 1.0)):
            total += weight_a * weight_b * term.covariance(lag + a * first - b * second)
    return total / (2.0 * first * second)


@lru_cache(maxsize=4)
def curve_products(
    terms: tuple[Fluctuation, ...], factors: tuple[int, ...], run_lengths: tuple[int, ...]
) -> FloatArray:
    """Return what the covariance between the points of the curve is made of, for any strengths of the terms.

    The covariance R of two second differences is a sum over terms, linear in their squared coefficients theta, so that

    V_ij = sum_st theta_s theta_t C_stij,  C_stij = 2/(M_i M_j) sum over runs and lags of (pairs at that lag) R_s,ij(l) R_t,ij(l).

    Lags are strided by a twelfth of the shorter factor and reach eight of the longer to both sides.

    Parameters
    ----------
    terms : tuple of ``a`` terms
    factors : tuple of ``k`` int
        Averaging factors.
    run_lengths : tuple of int
        Samples in each run.

    Returns
    -------
    (a, a, k, k) float array
        Kept for the last few calls: channels of one log share it.
    """
    count = len(factors)
    products = np.zeros((len(terms), len(terms), count, count))
    # White noise in the angle correlates at a few lags only; a strided sum would count these spikes too often.
    spiky = np.array([term.role == "quantization" for term in terms])
    smooth = np.flatnonzero(~spiky)
    pairs = np.array([[max(0, n - 2 * m + 1) for n in run_lengths] for m in factors], dtype=float)
    for i, first in enumerate(factors):
        for j, second in enumerate(factors[i:], start=i):
            # R is even about the lag at which both differences have the same middle: half of it will do.
            stride = max(1, min(first, second) // 12, max(first, second) // 768)
            reach = REACH * max(first, second)
            apart = np.unique(np.concatenate([np.arange(0, reach + 1, stride), [reach]])).astype(float)
            edges = np.concatenate([[0.0], (apart[1:] + apart[:-1]) / 2.0, [reach + 0.5]])
            lags = second - first + apart
            weights = np.diff(edges) * (
                _overlap(pairs[i], pairs[j], lags) + _overlap(pairs[i], pairs[j], second - first - apart)
            )
            courses = np.array([cross_covariance(terms[s], first, second, lags) for s in smooth])
            sums = np.zeros((len(terms), len(terms)))
            if smooth.size:
                sums[np.ix_(smooth, smooth)] = (courses * weights) @ courses.T
            if spiky.any():
                where = np.unique([b * second - a * first for a in range(3) for b in range(3)]).astype(float)
                courses = np.array([cross_covariance(term, first, second, where) for term in terms])
                at_spikes = (courses * _overlap(pairs[i], pairs[j], where)) @ courses.T
                sums[spiky, :], sums[:, spiky] = at_spikes[spiky, :], at_spikes[:, spiky]
            products[:, :, i, j] = products[:, :, j, i] = 2.0 * sums / (pairs[i].sum() * pairs[j].sum())
    return products


def curve_covariance(mixture: Mixture, factors: IntArray, run_lengths: Sequence[int]) -> FloatArray:
    """Return the covariance between the points of an overlapping Allan variance pooled over runs, shape (k, k)."""
    squares = np.array([square for square, _ in mixture.parts])
    terms = tuple(term for _, term in mixture.parts)
    products = curve_products(terms, tuple(int(m) for m in factors), tuple(int(n) for n in run_lengths))
    return np.asarray(np.einsum("s,t,stij->ij", squares, squares, products))


def _overlap(first: FloatArray, second: FloatArray, lags: FloatArray) -> FloatArray:
    """Return the number of pairs of starts (s, s + lag) with s below ``second`` and s + lag below ``first``, over runs."""
    low = np.maximum(0.0, lags[:, None])
    high = np.minimum(first, second + lags[:, None])
    return np.asarray(np.clip(high - low, 0.0, None).sum(axis=1))
