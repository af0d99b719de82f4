"""A fitted model with its data: intervals and posterior draws of any linear function of the squared coefficients."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray, IntArray
from stillbench.likelihood.bins import BinnedPowers
from stillbench.likelihood.fit import Fit
from stillbench.likelihood.profile import profile_limits, shape_limits
from stillbench.likelihood.response import OUTPUT, FilterFit
from stillbench.terms.mixture import Mixture, term_of

WALKERS = 32
STEPS = 400
SETTLING = 100
STRETCH = 2.0
SEED = 90_173
FELT = 32.0
"""Averaging time times corner below which the filter of a sensor shows in the curve."""


@dataclass(frozen=True)
class FittedModel:
    """The full model of one record, unit samples (amplitudes in SI of the rate).

    Attributes
    ----------
    bins : BinnedPowers
        Of the band that was used.
    fit : Fit
    shapes : (r,) bool array
        Mean shapes in the model.
    sample_interval : float
        s.
    correlation_time : float or None
        Of the correlated term, samples.
    family : tuple of BinnedPowers
        The same data with other correlation times near the best one: intervals take the best of them at every point.
    low_pass : FilterFit or None
        Of the sensor.
    excess : float
        (kurtosis - 3)/n of heavy tails: what they add to the variance of ln N^2.
    """

    bins: BinnedPowers
    fit: Fit
    shapes: BoolArray
    sample_interval: float
    correlation_time: float | None = None
    family: tuple[BinnedPowers, ...] = ()
    excess: float = 0.0
    low_pass: FilterFit | None = None

    def allan_variance(self, factors: IntArray) -> FloatArray:
        """Return the Allan variance of the random terms at averaging factors, behind the filter of the sensor if any.

        sigma^2(m) = 4 integral_0^(1/2) S(f) sin^4(pi f m)/(m sin(pi f))^2 df, by quadrature on each lobe, where the filter
        is felt; the closed forms elsewhere.
        """
        mixture = self.mixture()
        variance = mixture.allan_variance(factors)
        if self.low_pass is None:
            return variance
        nodes, weights = np.polynomial.legendre.leggauss(12)
        behind = float(self.fit.theta[self.bins.roles.index(OUTPUT)])
        for i in np.flatnonzero(factors * self.low_pass.corner < FELT):
            factor = int(factors[i])
            edges = np.linspace(0.0, 0.5, factor + 1)
            half = np.diff(edges)[:, None] / 2.0
            frequency = edges[:-1, None] + half * (nodes + 1.0)
            window = np.sin(np.pi * frequency * factor) ** 4 / (factor * np.sin(np.pi * frequency)) ** 2
            spectrum = sum(
                (square * term.spectrum(frequency) for square, term in mixture.parts), np.zeros(frequency.shape)
            )
            passed = (spectrum - behind) * self.low_pass.shape.gain(frequency, self.low_pass.parameter) + behind
            variance[i] = 4.0 * float(np.sum(passed * window * weights * half))
        return variance

    def mixture(self) -> Mixture:
        """Return the random terms as a mixture (the white level of a filtered sensor as white noise)."""
        theta = dict(zip(self.bins.roles, self.fit.theta.tolist(), strict=True))
        theta["white"] = theta.get("white", 0.0) + theta.pop(OUTPUT, 0.0)
        return Mixture(theta, 0.0, self.correlation_time)

    def _tails(self, weights: FloatArray) -> float:
        """Variance that heavy tails add to the logarithm of sqrt(weights @ theta)."""
        total = float(weights @ self.fit.theta)
        if self.excess == 0 or total <= 0:
            return 0.0
        white = np.array([role in ("white", OUTPUT) for role in self.bins.roles])
        share = float((weights * white) @ self.fit.theta) / total
        return self.excess * share**2 / 4.0

    def weights(self, by_role: Mapping[str, float]) -> FloatArray:
        """Return weights in the order of the terms; roles not in the model count nothing.

        White noise behind a filter of the sensor is part of the white level.
        """
        level = {OUTPUT: by_role.get("white", 0.0), **by_role}
        return np.array([level.get(role, 0.0) for role in self.bins.roles])

    def variance_weights(self, factor: float) -> FloatArray:
        """Return the weights that give the Allan variance at an averaging factor (samples, not whole ones only)."""
        at = np.array(float(factor))
        roles = [role for role in self.bins.roles if role != OUTPUT]
        return self.weights({role: float(term_of(role, self.correlation_time).allan_variance(at)) for role in roles})

    def amplitude(self, weights: FloatArray) -> float:
        """Return sqrt(weights @ theta) at the maximum."""
        return float(np.sqrt(np.maximum(0.0, weights @ self.fit.theta)))

    def limits(self, weights: FloatArray, threshold: float) -> tuple[float, float]:
        """Return the profile-likelihood interval of sqrt(weights @ theta), widened for heavy tails."""
        lower, upper = profile_limits(self.bins, self.fit, weights, threshold, shapes=self.shapes, family=self.family)
        added = threshold * self._tails(weights)
        if added == 0:
            return lower, upper
        estimate = self.amplitude(weights)
        low = estimate * np.exp(-np.hypot(np.log(estimate / lower), np.sqrt(added))) if lower > 0 else 0.0
        return float(low), float(estimate * np.exp(np.hypot(np.log(upper / estimate), np.sqrt(added))))

    def shape_limits(self, role: str, threshold: float) -> tuple[float, float, float]:
        """Return estimate and interval of a mean shape, per sample."""
        estimate, lower, upper, _ = shape_limits(self.bins, self.bins.shapes.index(role), threshold)
        return estimate, lower, upper

    def relative_error(self, weights: FloatArray, amplitude: float | None = None) -> float:
        """Return the relative standard error of sqrt(weights @ theta) from the Fisher information.

        Parameters
        ----------
        weights : (a,) float array
        amplitude : float, optional
            Where to evaluate, if not at the maximum: a single term is put there, the others stay; a function of several
            terms is scaled as a whole, which does not change its relative error.
        """
        theta = self.fit.theta.copy()
        single = np.count_nonzero(weights) == 1
        if amplitude is not None and single:
            index = int(np.argmax(weights))
            theta[index] = amplitude**2 / weights[index]
        spectrum = np.maximum(self.bins.basis @ theta, np.finfo(float).tiny)
        weighted = self.bins.basis / spectrum[:, None]
        information = 0.5 * (weighted * self.bins.dof[:, None]).T @ weighted
        scale = 1.0 / np.sqrt(np.diag(information))
        covariance = np.linalg.pinv(information * np.outer(scale, scale), hermitian=True) * np.outer(scale, scale)
        value = float(weights @ theta)
        if value <= 0:
            return np.inf
        return float(np.hypot(np.sqrt(weights @ covariance @ weights) / (2.0 * value), np.sqrt(self._tails(weights))))

    def draw(self, flat_in_variance: Sequence[str] = (), seed: int = SEED) -> FloatArray:
        """Draw amplitudes from the posterior with a flat prior on them, or on the variance of the roles named.

        Returns
        -------
        (draws, a) float array
            Square roots of theta.

        References
        ----------
        J. Goodman and J. Weare, Comm. App. Math. Comp. Sci. 5 (2010) 65: stretch move.
        """
        generator = np.random.default_rng(seed)
        bins, fit = self.bins, self.fit
        beta = np.where(self.shapes, fit.beta, 0.0)
        power = bins.power - 2.0 * bins.cross @ beta + np.einsum("r,jrs,s->j", beta, bins.gram, beta)
        lift = np.array([role in flat_in_variance for role in bins.roles], dtype=float)

        def log_density(amplitudes: FloatArray) -> FloatArray:
            spectrum = amplitudes**2 @ bins.basis.T
            inside = np.asarray((amplitudes >= 0).all(axis=1) & (spectrum > 0).all(axis=1))
            safe = np.where(inside[:, None], spectrum, 1.0)
            value = -0.5 * (np.log(safe) + power / safe) @ bins.dof
            value += np.log(np.where(amplitudes > 0, amplitudes, np.finfo(float).tiny)) @ lift
            return np.where(inside, value, -np.inf)

        best = np.sqrt(fit.theta)
        spread = np.sqrt(np.abs(np.diag(np.linalg.pinv(fit.information, hermitian=True))))
        # On the boundary the information is about the square; its fourth root of variance is the scale of the amplitude.
        scale = np.where(best**2 > spread, spread / (2.0 * np.maximum(best, np.finfo(float).tiny)), np.sqrt(spread))
        walkers = np.abs(best + scale * generator.standard_normal((WALKERS, best.size)))
        density = log_density(walkers)
        kept = []
        half = WALKERS // 2
        for step in range(STEPS):
            for first in (0, half):
                own, others = slice(first, first + half), slice(half - first, WALKERS - first)
                stretch = (1.0 + (STRETCH - 1.0) * generator.random(half)) ** 2 / STRETCH
                partners = walkers[others][generator.integers(half, size=half)]
                proposal = partners + stretch[:, None] * (walkers[own] - partners)
                new = log_density(proposal)
                chance = (best.size - 1) * np.log(stretch) + new - density[own]
                taken = np.log(generator.random(half)) < chance
                walkers[own] = np.where(taken[:, None], proposal, walkers[own])
                density[own] = np.where(taken, new, density[own])
            if step >= SETTLING:
                kept.append(walkers.copy())
        draws = np.concatenate(kept)
        if self.excess > 0:
            tails = np.exp(np.sqrt(self.excess / 4.0) * generator.standard_normal(draws.shape[0]))
            white = np.array([role in ("white", OUTPUT) for role in bins.roles])
            draws[:, white] *= tails[:, None]
        return draws
