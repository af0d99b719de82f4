"""Bias and coverage of the noise terms, first round: 100 made logs of 131 072 samples for each of three scenarios.

Bounds are two-sided: a count of covered logs must lie in the central 99.9 % of the binomial of the nominal coverage, a mean
of squared coefficients within Student's t at 99.9 % of the truth. Seeds are fixed; nothing is run twice.
"""

from dataclasses import dataclass
from functools import cache

import numpy as np
import pytest
from scipy import stats
from tests.conftest import made_noise

from stillbench.foundation.arrays import FloatArray
from stillbench.likelihood.bins import bin_runs
from stillbench.likelihood.fit import maximise
from stillbench.likelihood.goodness import droop_score, goodness_of_fit
from stillbench.likelihood.profile import likelihood_threshold, profile_limits, shape_limits
from stillbench.likelihood.subsets import smallest_accepted
from stillbench.terms.catalogue import BY_ROLE, MEAN_SHAPES

LOGS = 100
N_SAMPLES = 131_072
CERTAINTY = 0.999
ROLES = ("white", "flicker", "walk")
SCENARIOS: dict[str, dict[str, float]] = {
    "N": {"white": 1.0},
    "N+K": {"white": 1.0, "walk": 1e-3},
    "N+B+K": {"white": 1.0, "flicker": 0.05, "walk": 1e-3},
}


@dataclass(frozen=True)
class Trials:
    """What came of the logs of one scenario: theta (logs, 3), limits (logs, 3, 2), and what was accepted."""

    theta: FloatArray
    limits: FloatArray
    accepted: list[list[tuple[str, ...]]]
    ramp: FloatArray
    goodness: FloatArray
    droop: FloatArray


@cache
def trials(name: str) -> Trials:
    terms = [BY_ROLE[role] for role in ROLES]
    threshold = likelihood_threshold(0.95)
    theta, limits, accepted, ramp, goodness, droop = [], [], [], [], [], []
    for seed in range(LOGS):
        log = made_noise(N_SAMPLES, 7_000 + seed, **SCENARIOS[name])
        bins = bin_runs([log], terms, MEAN_SHAPES)
        fit = maximise(bins)
        theta.append(fit.theta)
        limits.append([profile_limits(bins, fit, row, threshold) for row in np.eye(3)])
        accepted.append(smallest_accepted(bins, fit))
        ramp.append(shape_limits(bins, 0, threshold))
        goodness.append(goodness_of_fit(bins, fit))
        droop.append(droop_score(bins, fit, 0.5))
    return Trials(np.array(theta), np.array(limits), accepted, np.array(ramp), np.array(goodness), np.array(droop))


def within_binomial(count: int, probability: float) -> bool:
    fewest, most = stats.binom.interval(CERTAINTY, LOGS, probability)
    return bool(fewest <= count <= most)


@pytest.mark.parametrize("name", SCENARIOS)
def test_intervals_cover(name: str) -> None:
    done = trials(name)
    for i, role in enumerate(ROLES):
        truth = SCENARIOS[name].get(role, 0.0)
        covered = int(np.sum((done.limits[:, i, 0] <= truth) & (truth <= done.limits[:, i, 1])))
        if truth:
            assert within_binomial(covered, 0.95), (role, covered)
        else:
            # The truth is the lower end of what is possible: an interval that starts at zero holds it.
            assert covered >= stats.binom.ppf(1 - CERTAINTY, LOGS, 0.95), (role, covered)


@pytest.mark.parametrize("name", SCENARIOS)
def test_squared_coefficients_are_not_biased(name: str) -> None:
    done = trials(name)
    for i, role in enumerate(ROLES):
        truth = SCENARIOS[name].get(role, 0.0) ** 2
        if truth:
            spread = done.theta[:, i].std(ddof=1) / np.sqrt(LOGS)
            allowed = float(stats.t.ppf((1 + CERTAINTY) / 2, LOGS - 1)) * spread
            assert abs(done.theta[:, i].mean() - truth) < allowed, role


@pytest.mark.parametrize("name", SCENARIOS)
def test_errors_are_near_the_cramer_rao_bound(name: str) -> None:
    """Root mean square error over the bound of the same full model; bounds: central 99.9 % of chi-square for 1.10."""
    done = trials(name)
    terms = [BY_ROLE[role] for role in ROLES]
    truth = np.array([SCENARIOS[name].get(role, 0.0) ** 2 for role in ROLES])
    bins = bin_runs([made_noise(N_SAMPLES, 1, white=1.0)], terms, ())
    weighted = bins.basis / (bins.basis @ truth)[:, None]
    covariance = np.linalg.inv(0.5 * (weighted * bins.dof[:, None]).T @ weighted)
    for i, role in enumerate(ROLES):
        if truth[i] and covariance[i, i] < 0.15 * truth[i] ** 2:  # resolved well enough for a normal error
            ratio = np.mean((done.theta[:, i] - truth[i]) ** 2) / covariance[i, i]
            low, high = (stats.chi2.ppf(p, LOGS) / LOGS for p in ((1 - CERTAINTY) / 2, (1 + CERTAINTY) / 2))
            assert low < ratio < 1.10**2 * high, (role, ratio)


@pytest.mark.parametrize("name", SCENARIOS)
def test_terms_that_are_not_there_are_rarely_named(name: str) -> None:
    """A false term in at most 3 % of unambiguous answers, within the binomial bound of the trials."""
    done = trials(name)
    truth = set(SCENARIOS[name])
    false = sum(len(sets) == 1 and not set(sets[0]) <= truth for sets in done.accepted)
    assert false <= stats.binom.ppf(CERTAINTY, LOGS, 0.03)


@pytest.mark.parametrize("name", SCENARIOS)
def test_a_ramp_that_is_not_there(name: str) -> None:
    """Accepted (ratio above 9) in at most 2 % of logs; its interval covers zero."""
    done = trials(name)
    assert np.sum(done.ramp[:, 3] > 9.0) <= stats.binom.ppf(CERTAINTY, LOGS, 0.02)
    assert within_binomial(int(np.sum((done.ramp[:, 1] <= 0) & (done.ramp[:, 2] >= 0))), 0.95)


@pytest.mark.parametrize("name", SCENARIOS)
def test_goodness_and_droop_are_standard_normal(name: str) -> None:
    """Neither is beyond 3 more often than a normal figure, and the droop has mean 0 and variance 1."""
    done = trials(name)
    for figure in (done.goodness, np.abs(done.droop)):
        assert np.sum(figure > 3.0) <= stats.binom.ppf(CERTAINTY, LOGS, 2 * stats.norm.sf(3.0))
    assert abs(done.droop.mean()) < stats.norm.ppf((1 + CERTAINTY) / 2) / np.sqrt(LOGS)
    low, high = (stats.chi2.ppf(p, LOGS) / LOGS for p in ((1 - CERTAINTY) / 2, (1 + CERTAINTY) / 2))
    assert low < np.mean(done.droop**2) < high
