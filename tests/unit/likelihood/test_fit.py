import numpy as np
import pytest
from scipy import optimize
from tests.conftest import made_noise

from stillbench.likelihood.bins import bin_runs
from stillbench.likelihood.fit import Constraint, maximise
from stillbench.likelihood.fitted import FittedModel
from stillbench.likelihood.profile import likelihood_threshold, profile_limits, shape_limits
from stillbench.likelihood.quadratic import solve_nonnegative
from stillbench.likelihood.subsets import chi_bar_quantile
from stillbench.likelihood.whitened import whitened_kurtosis
from stillbench.terms.catalogue import BY_ROLE, MEAN_SHAPES

TERMS = [BY_ROLE[role] for role in ("white", "flicker", "walk")]


def test_scoring_finds_what_a_general_minimiser_finds() -> None:
    bins = bin_runs([made_noise(8_000, 3, white=1.0, flicker=0.2, walk=5e-3)], TERMS, ())
    fit = maximise(bins)

    def objective(logarithms: np.ndarray) -> float:
        spectrum = bins.basis @ np.exp(logarithms)
        return float(0.5 * np.sum(bins.dof * (np.log(spectrum) + bins.power / spectrum)))

    found = optimize.minimize(
        objective,
        np.log(np.maximum(fit.theta, 1e-9)) + 0.3,
        method="Nelder-Mead",
        options={"xatol": 1e-8, "fatol": 1e-10, "maxiter": 5_000},
    )
    assert fit.objective <= found.fun + 1e-6


def test_dense_covariance_agrees_for_white_noise_and_walk() -> None:
    """The cosine likelihood of mean + white + walk is exact: judged by the restricted likelihood of the dense covariance."""
    n_samples = 300
    log = made_noise(n_samples, 8, white=1.0, walk=0.1)
    bins = bin_runs([log], [TERMS[0], TERMS[2]], ())
    walk = np.minimum.outer(np.arange(n_samples), np.arange(n_samples)) + 1.0
    ones = np.ones(n_samples)

    def restricted(theta: np.ndarray) -> float:
        covariance = theta[0] * np.eye(n_samples) + theta[1] * walk
        inverse = np.linalg.inv(covariance)
        information = ones @ inverse @ ones
        left = log - (ones @ inverse @ log) / information
        return float(0.5 * (np.linalg.slogdet(covariance)[1] + np.log(information) + left @ inverse @ left))

    def cosine(theta: np.ndarray) -> float:
        k = np.arange(1.0, n_samples)
        spectrum = theta[0] + theta[1] * TERMS[2].cosine_power(k, n_samples)
        from stillbench.likelihood.bins import cosine_transform  # noqa: PLC0415

        return float(0.5 * np.sum(np.log(spectrum) + cosine_transform(log) ** 2 / spectrum))

    first, second = np.array([1.0, 0.01]), np.array([0.8, 0.03])
    assert restricted(first) - restricted(second) == pytest.approx(cosine(first) - cosine(second), abs=1e-8)
    fit = maximise(bins)
    errors = np.sqrt(np.diag(np.linalg.inv(fit.information)))
    exact = optimize.minimize(restricted, fit.theta, method="Nelder-Mead", options={"xatol": 1e-7, "fatol": 1e-9}).x
    assert np.all(np.abs(fit.theta - exact) < 0.1 * errors)


def test_dense_covariance_agrees_for_all_three_terms() -> None:
    """N, B and K at n = 250 against the restricted likelihood of the dense covariance: to 0.1 of a standard error.

    Flicker band-limited at f = 1/2 has, up to a constant that the mean takes, covariance -Cin(pi d)/pi at lag d.
    """
    from scipy.special import sici  # noqa: PLC0415

    n_samples = 250
    lag = np.abs(np.subtract.outer(np.arange(n_samples), np.arange(n_samples))).astype(float)
    safe = np.where(lag > 0, np.pi * lag, 1.0)
    flicker = np.where(lag > 0, -(np.euler_gamma + np.log(safe) - sici(safe)[1]) / np.pi, 0.0)
    walk = np.minimum.outer(np.arange(n_samples), np.arange(n_samples)) + 1.0
    k = np.arange(1, n_samples)
    contrasts = np.sqrt(2 / n_samples) * np.cos(np.pi * np.outer(k, np.arange(n_samples) + 0.5) / n_samples)
    parts = [contrasts @ part @ contrasts.T for part in (np.eye(n_samples), flicker, walk)]
    worst = np.zeros(3)
    for seed in range(3):
        log = made_noise(n_samples, 70 + seed, white=1.0, flicker=0.6, walk=0.05)
        left = contrasts @ log

        def restricted(logarithms: np.ndarray, left: np.ndarray = left) -> float:
            covariance = sum(square * part for square, part in zip(np.exp(logarithms), parts, strict=True))
            return float(0.5 * (np.linalg.slogdet(covariance)[1] + left @ np.linalg.solve(covariance, left)))

        fit = maximise(bin_runs([log], TERMS, ()))
        if fit.theta.min() < 1e-4:
            continue  # on the boundary both say zero, and logarithms cannot
        start = np.log(fit.theta)
        exact = np.exp(
            optimize.minimize(
                restricted, start, method="Nelder-Mead", options={"xatol": 1e-6, "fatol": 1e-8, "maxiter": 4_000}
            ).x
        )
        errors = np.sqrt(np.diag(np.linalg.inv(fit.information)))
        worst = np.maximum(worst, np.abs(fit.theta - exact) / errors)
    assert 0 < worst.max() < 0.1, worst


def test_quadratic_programme_against_a_general_one() -> None:
    generator = np.random.default_rng(5)
    for _ in range(60):
        root = generator.standard_normal((6, 4))
        hessian, linear = root.T @ root + 0.1 * np.eye(4), generator.standard_normal(4)
        ours = solve_nonnegative(hessian, linear)
        theirs = optimize.minimize(
            lambda x, h=hessian, b=linear: x @ h @ x / 2 - b @ x,
            np.ones(4),
            bounds=[(0, None)] * 4,
            method="L-BFGS-B",
            options={"ftol": 1e-14, "gtol": 1e-10},
        ).x
        assert ours @ hessian @ ours / 2 - linear @ ours <= theirs @ hessian @ theirs / 2 - linear @ theirs + 1e-7
        weights = np.abs(generator.standard_normal(4))
        held = solve_nonnegative(hessian, linear, weights, 0.7)
        assert held @ weights == pytest.approx(0.7, abs=1e-9)
        assert held.min() >= 0
        best = optimize.minimize(
            lambda x, h=hessian, b=linear: x @ h @ x / 2 - b @ x,
            np.full(4, 0.7 / weights.sum()),
            bounds=[(0, None)] * 4,
            constraints={"type": "eq", "fun": lambda x, w=weights: x @ w - 0.7},
            method="SLSQP",
            options={"ftol": 1e-14, "maxiter": 500},
        ).x
        assert held @ hessian @ held / 2 - linear @ held <= best @ hessian @ best / 2 - linear @ best + 1e-7


def test_profile_ends_lie_on_the_threshold() -> None:
    bins = bin_runs([made_noise(16_000, 3, white=1.0, flicker=0.1, walk=5e-3)], TERMS, ())
    fit = maximise(bins)
    threshold = likelihood_threshold(0.95)
    assert f"{threshold:.4f}" == "3.8415"  # chi-square, one degree of freedom (tables)
    for row in np.eye(3):
        lower, upper = profile_limits(bins, fit, row, threshold)
        for end in (lower, upper):
            if end > 0:
                rise = 2 * (maximise(bins, constraint=Constraint(row, end**2)).objective - fit.objective)
                assert rise == pytest.approx(threshold, rel=1e-3)  # ends are found to 2e-4 of their distance


def test_runs_of_one_log_lose_little() -> None:
    """Each run has its own mean; the likelihoods add, and the estimates stay within their errors."""
    log = made_noise(60_000, 4, white=1.0, walk=3e-3)
    whole = maximise(bin_runs([log], TERMS, ()))
    parts = maximise(bin_runs(np.array_split(log, 4), TERMS, ()))
    errors = np.sqrt(np.diag(np.linalg.pinv(whole.information)))
    assert np.all(np.abs(whole.theta - parts.theta) < 2 * errors + 1e-9)


def test_a_ramp_is_found_and_does_not_raise_the_walk() -> None:
    n_samples = 50_000
    slope = 2e-4
    log = made_noise(n_samples, 4, white=1.0) + slope * np.arange(n_samples)
    bins = bin_runs([log], TERMS, MEAN_SHAPES)
    estimate, lower, upper, ratio = shape_limits(bins, 0, likelihood_threshold(0.95))
    assert lower < slope < upper
    assert estimate == pytest.approx(slope, rel=0.01)
    assert ratio > 100  # the walk can take on part of a trend, not this much
    with_ramp = maximise(bins, shapes=np.array([True]))
    assert with_ramp.theta[2] < 1e-4 * maximise(bins).theta[2] + 1e-9


def test_chi_bar_quantiles() -> None:
    """5.41, 7.29, 8.75 at 1 %: mixtures of chi-square with binomial weights (Self and Liang 1987)."""
    assert [f"{chi_bar_quantile(d):.2f}" for d in (1, 2, 3)] == ["5.41", "7.29", "8.75"]


def test_kurtosis_of_a_whitened_log() -> None:
    log = made_noise(100_000, 6, white=1.0, walk=0.01)
    assert whitened_kurtosis([log]) == pytest.approx(3.0, abs=4 * np.sqrt(24 / 100_000))
    heavy = np.random.default_rng(1).standard_t(5, 100_000)  # kurtosis 9
    assert whitened_kurtosis([heavy]) > 5
    # Neither a trend nor a second run hides the tails.
    assert whitened_kurtosis([heavy[:50_000] + 1e-3 * np.arange(50_000), heavy[50_000:]]) > 5


def test_posterior_draws_agree_with_the_likelihood() -> None:
    log = made_noise(40_000, 6, white=1.0)
    bins = bin_runs([log], [TERMS[0]], ())
    fitted = FittedModel(bins, maximise(bins), np.zeros(0, dtype=bool), 0.1)
    draws = fitted.draw()
    # One precise term: normal with the standard error of an amplitude, 1/sqrt(2n).
    assert draws.mean() == pytest.approx(fitted.amplitude(np.array([1.0])), abs=5e-4)
    assert draws.std() == pytest.approx(1 / np.sqrt(2 * 40_000), rel=0.1)
    assert fitted.relative_error(np.array([1.0])) == pytest.approx(1 / np.sqrt(2 * 40_000), rel=1e-3)
