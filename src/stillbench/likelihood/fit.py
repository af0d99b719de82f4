"""Restricted maximum likelihood of squared coefficients and mean shapes from binned cosine powers.

l = 1/2 sum_j nu_j [ln S_j + P_j/S_j] (+ 1/2 ln det Z'D^-1 Z for the regressors), S = sum_a theta_a g_a, theta >= 0.

References
----------
P. Whittle, Ark. Mat. 2 (1953) 423 (likelihood of powers); H. D. Patterson and R. Thompson, Biometrika 58 (1971) 545
(restricted likelihood). Fisher scoring by non-negative least squares is standard; the form here is derived in
reference/formulas.md.
"""

from dataclasses import dataclass

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray
from stillbench.likelihood.bins import BinnedPowers
from stillbench.likelihood.quadratic import solve_nonnegative

MOST_STEPS = 60
TOLERANCE = 1e-9
"""Change of the objective, relative to the number of coefficients' logarithm scale, at which scoring stops."""

FLOOR = 1e-14
"""Smallest model power over observed power that is admitted, so that logarithms stay finite."""


@dataclass(frozen=True)
class Fit:
    """A maximum of the likelihood.

    Attributes
    ----------
    theta : (a,) float array
        Squared coefficients, unit samples.
    beta : (r,) float array
        Coefficients of the mean shapes.
    objective : float
        l at the maximum, up to a constant of the data.
    spectrum : (j,) float array
        Fitted mean power of each bin.
    information : (a, a) float array
        Fisher information of theta.
    beta_covariance : (r, r) float array
    """

    theta: FloatArray
    beta: FloatArray
    objective: float
    spectrum: FloatArray
    information: FloatArray
    beta_covariance: FloatArray


@dataclass(frozen=True)
class Constraint:
    """Hold a linear function of theta: weights @ theta = total."""

    weights: FloatArray
    total: float


class _Problem:
    """One fit: bins, the terms and shapes in it, and the kind of likelihood."""

    def __init__(
        self,
        bins: BinnedPowers,
        terms: BoolArray,
        shapes: BoolArray,
        fixed_beta: FloatArray | None,
        *,
        restricted: bool,
    ) -> None:
        self.bins = bins
        self.terms = np.flatnonzero(terms)
        self.shapes = np.flatnonzero(shapes) if fixed_beta is None else np.array([], dtype=int)
        self.basis = bins.basis[:, self.terms]
        self.restricted = restricted
        self.power = bins.power
        if fixed_beta is not None:
            self.power = (
                bins.power - 2.0 * bins.cross @ fixed_beta + np.einsum("r,jrs,s->j", fixed_beta, bins.gram, fixed_beta)
            )
        self.cross = bins.cross[:, self.shapes]
        self.gram = bins.gram[np.ix_(np.arange(bins.dof.size), self.shapes, self.shapes)]
        self.least = FLOOR * float(np.max(bins.power)) + np.finfo(float).tiny

    def spectrum(self, theta: FloatArray) -> FloatArray:
        return np.maximum(self.basis @ theta, self.least)

    def regress(self, spectrum: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Generalized least squares of the shapes: beta, its covariance, and the power left in each bin."""
        if not self.shapes.size:
            return np.zeros(0), np.zeros((0, 0)), self.power
        weight = self.bins.dof / spectrum
        covariance = np.linalg.inv(np.einsum("j,jrs->rs", weight, self.gram))
        beta = covariance @ (weight @ self.cross)
        left = self.power - 2.0 * self.cross @ beta + np.einsum("r,jrs,s->j", beta, self.gram, beta)
        return beta, covariance, np.maximum(left, 0.0)

    def objective(self, spectrum: FloatArray) -> tuple[float, FloatArray, FloatArray, FloatArray]:
        beta, covariance, left = self.regress(spectrum)
        value = 0.5 * float(np.sum(self.bins.dof * (np.log(spectrum) + left / spectrum)))
        if self.restricted and self.shapes.size:
            value -= 0.5 * float(np.linalg.slogdet(covariance)[1])
        return value, beta, covariance, left

    def step(self, spectrum: FloatArray, constraint: Constraint | None) -> FloatArray:
        """One scoring step: non-negative weighted least squares of the powers on the basis."""
        _, covariance, left = self.regress(spectrum)
        if self.restricted and self.shapes.size:
            left = left + np.einsum("jrs,rs->j", self.gram, covariance)
        weight = self.bins.dof / (2.0 * spectrum**2)
        # Columns are scaled to unit information, so that the small system is well conditioned.
        scale = 1.0 / np.sqrt(np.maximum(weight @ self.basis**2, np.finfo(float).tiny))
        columns = self.basis * scale
        hessian = (columns * weight[:, None]).T @ columns
        linear = columns.T @ (weight * left)
        if constraint is None:
            return scale * solve_nonnegative(hessian, linear)
        weights = constraint.weights[self.terms] * scale
        norm = float(np.max(weights))
        return scale * solve_nonnegative(hessian, linear, weights / norm, constraint.total / norm)


def maximise(
    bins: BinnedPowers,
    *,
    terms: BoolArray | None = None,
    shapes: BoolArray | None = None,
    restricted: bool = True,
    constraint: Constraint | None = None,
    fixed_beta: FloatArray | None = None,
    start: FloatArray | None = None,
) -> Fit:
    """Fit squared coefficients and mean shapes by Fisher scoring.

    Parameters
    ----------
    bins : BinnedPowers
    terms, shapes : (a,) and (r,) bool arrays, optional
        Which are in the model; all terms and no shapes by default.
    restricted : bool
        With the correction for estimated shapes; without it models with different shapes can be compared.
    constraint : Constraint, optional
        A linear function of theta to hold; every term in it must be in the model.
    fixed_beta : (r,) float array, optional
        Shapes held at these coefficients in place of being fitted.
    start : (a,) float array, optional
        Where to begin; the observed powers otherwise.

    Returns
    -------
    Fit
        ``theta`` and ``information`` have the size of all terms; those outside the model are zero.
    """
    n_terms, n_shapes = bins.basis.shape[1], bins.cross.shape[1]
    terms = np.ones(n_terms, dtype=bool) if terms is None else terms
    shapes = np.zeros(n_shapes, dtype=bool) if shapes is None else shapes
    problem = _Problem(bins, terms, shapes, fixed_beta, restricted=restricted)
    if start is None:
        # Observed powers of wide bins are good weights; a single coefficient is not, so its neighbours join in.
        theta = problem.step(_smoothed(bins.dof, problem.power, problem.least), constraint)
    else:
        theta = start[problem.terms]
        if constraint is not None:
            theta = problem.step(problem.spectrum(theta), constraint)
    spectrum = problem.spectrum(theta)
    value, beta, covariance, _ = problem.objective(spectrum)
    for _ in range(MOST_STEPS):
        target = problem.step(spectrum, constraint)
        stride = 1.0
        while True:
            candidate = theta + stride * (target - theta)
            trial = problem.spectrum(candidate)
            new_value, new_beta, new_covariance, _ = problem.objective(trial)
            if new_value <= value or stride < 1e-4:  # noqa: PLR2004  smaller strides change nothing
                break
            stride /= 2.0
        gain = value - new_value
        if gain < 0:
            break
        theta, spectrum, value, beta, covariance = candidate, trial, new_value, new_beta, new_covariance
        if gain < TOLERANCE * (1.0 + abs(value) * 1e-6):
            break
    weighted = problem.basis / spectrum[:, None]
    block = 0.5 * (weighted * bins.dof[:, None]).T @ weighted
    all_theta = np.zeros(n_terms)
    all_theta[problem.terms] = theta
    information = np.zeros((n_terms, n_terms))
    information[np.ix_(problem.terms, problem.terms)] = block
    all_beta = np.zeros(n_shapes) if fixed_beta is None else fixed_beta.copy()
    beta_covariance = np.zeros((n_shapes, n_shapes))
    all_beta[problem.shapes] = beta
    beta_covariance[np.ix_(problem.shapes, problem.shapes)] = covariance
    return Fit(all_theta, all_beta, value, spectrum, information, beta_covariance)


def residual_power(bins: BinnedPowers, fit: Fit) -> FloatArray:
    """Return the mean powers that the mean shapes of a fit leave, shape (j,)."""
    left = bins.power - 2.0 * bins.cross @ fit.beta + np.einsum("r,jrs,s->j", fit.beta, bins.gram, fit.beta)
    return np.asarray(np.maximum(left, 0.0))


def _smoothed(dof: FloatArray, power: FloatArray, least: float) -> FloatArray:
    """Powers averaged over neighbouring bins until some eight coefficients share in each, for first weights."""
    sums, counts = dof * power, dof.copy()
    width = 1
    while counts.min() < min(8.0, dof.sum()) and width < dof.size:
        kernel = np.ones(2 * width + 1)
        sums = np.convolve(dof * power, kernel, mode="same") if kernel.size <= dof.size else sums
        counts = np.convolve(dof, kernel, mode="same") if kernel.size <= dof.size else counts
        width += 1
    return np.maximum(sums / counts, least)
