"""A noise term is one thing seen four ways: the ways must agree, and the generator must have the strength it claims."""

import itertools

import numpy as np
import pytest
from scipy import integrate, stats

from stillbench.deviation.overlapping import pooled_deviation
from stillbench.likelihood.bins import bin_run, bin_starts, cosine_transform
from stillbench.terms.base import Fluctuation
from stillbench.terms.catalogue import BY_ROLE, FLUCTUATIONS, SHAPE_BY_ROLE
from stillbench.terms.correlated import CorrelatedNoise
from stillbench.terms.covariance import curve_covariance, curve_edf, pair_covariance
from stillbench.terms.flicker import mean_correction
from stillbench.terms.mixture import Mixture

CERTAINTY = 0.9999


@pytest.mark.parametrize("role", ["white", "walk", "quantization"])
@pytest.mark.parametrize("factor", [1, 2, 7, 100])
def test_allan_variance_follows_from_the_covariance(role: str, factor: int) -> None:
    rule = pair_covariance(Mixture({role: 1.0}).parts, factor, np.array([0.0]))[0]
    assert rule == pytest.approx(float(BY_ROLE[role].allan_variance(np.array(float(factor)))), rel=1e-12)


@pytest.mark.parametrize("factor", [100, 1_000])
def test_flicker_floor_follows_from_the_covariance(factor: int) -> None:
    """0.6643 B: sqrt(2 ln 2/pi), IEEE Std 952 annex C (from memory)."""
    rule = np.sqrt(pair_covariance(Mixture({"flicker": 1.0}).parts, factor, np.array([0.0]))[0])
    assert f"{rule:.4f}" == "0.6643"
    assert np.sqrt(BY_ROLE["flicker"].allan_variance(np.array(float(factor)))) == pytest.approx(rule, rel=1e-9)


@pytest.mark.parametrize("term", FLUCTUATIONS, ids=lambda term: term.role)
@pytest.mark.parametrize("factor", [1, 3, 10, 40])
def test_allan_variance_is_the_integral_of_the_spectrum(term: Fluctuation, factor: int) -> None:
    """sigma^2(m) = 4 integral_0^(1/2) S(f) sin^4(pi f m) / (m sin(pi f))^2 df for sampled rates."""

    def integrand(frequency: float) -> float:
        window = np.sin(np.pi * frequency * factor) ** 4 / (factor * np.sin(np.pi * frequency)) ** 2
        return float(4.0 * term.spectrum(np.array([frequency]))[0] * window)

    lobes = np.linspace(0.0, 0.5, factor + 1)
    total = sum(integrate.quad(integrand, max(a, 1e-12), b)[0] for a, b in itertools.pairwise(lobes))
    assert float(term.allan_variance(np.array(float(factor)))) == pytest.approx(total, rel=1e-6)


@pytest.mark.parametrize("k", [1, 2, 3, 8, 31, 101])
def test_mean_correction_of_flicker(k: int) -> None:
    """The closed form against quadrature of |W_k(f)|^2/(2 pi |f|), W_k the transform of sqrt(2) cos(pi k t) on (0, 1)."""
    a = np.pi * k

    def integrand(u: float) -> float:
        # With b = 2 pi f = a + u the integrand is (1 - cos u)/u^2 times smooth factors.
        b = a + u
        half = np.sinc(u / (2.0 * np.pi)) ** 2 / 2.0
        return float(4.0 / np.pi * b * half / (2.0 * a + u) ** 2)

    edges = np.concatenate([np.arange(-a, 400.0, np.pi), [400.0]])
    total = sum(integrate.quad(integrand, low, high)[0] for low, high in itertools.pairwise(edges))
    # Beyond, the cosine averages out: (4/pi)/(u^2 (2a + u)^2) (a + u), integrated in closed form.
    tail = integrate.quad(lambda u: 4.0 / np.pi * (a + u) / (u * (2 * a + u)) ** 2, 400.0, np.inf)[0]
    assert float(mean_correction(np.array(float(k)))) == pytest.approx((total + tail) * a, rel=2e-5)


@pytest.mark.parametrize("term", FLUCTUATIONS, ids=lambda term: term.role)
def test_generated_noise_has_its_cosine_powers(term: Fluctuation) -> None:
    """Mean powers of 400 logs over the expected ones: chi-square bounds, Bonferroni over the coefficients."""
    n_samples, logs = 256, 400
    generator = np.random.default_rng(17)
    powers = np.mean([cosine_transform(term.generate(n_samples, generator)) ** 2 for _ in range(logs)], axis=0)
    k = np.arange(1.0, n_samples)
    ratio = powers / term.cosine_power(k, n_samples)
    tail = (1 - CERTAINTY) / 2 / n_samples
    assert ratio.max() < stats.chi2.ppf(1 - tail, logs) / logs
    assert ratio.min() > stats.chi2.ppf(tail, logs) / logs
    # The mean over all coefficients is sharper by their number.
    assert abs(ratio.mean() - 1.0) < stats.norm.ppf(1 - (1 - CERTAINTY) / 2) * np.sqrt(2.0 / logs / n_samples)


def test_flicker_from_another_generator_has_the_same_powers() -> None:
    """Fractional integration of white noise (Kasdin, Proc. IEEE 83 (1995) 802), order 1/2."""
    from scipy.signal import lfilter  # noqa: PLC0415

    n_samples, logs = 256, 300
    weights = np.cumprod(np.concatenate([[1.0], (np.arange(1, 4_096) - 0.5) / np.arange(1, 4_096)]))
    generator = np.random.default_rng(23)
    total = np.zeros(n_samples - 1)
    for _ in range(logs):
        white = generator.standard_normal(n_samples + 4_096)
        total += cosine_transform(lfilter(weights, [1.0], white)[-n_samples:]) ** 2
    k = np.arange(1.0, n_samples)
    # Its spectrum is 1/(2 sin(pi f)), which tends to 1/(2 pi f): compared where the two forms agree to 1 %.
    low = k / (2 * n_samples) < 0.05
    ratio = (total / logs / BY_ROLE["flicker"].cosine_power(k, n_samples))[low]
    assert abs(ratio.mean() - 1.0) < 0.01 + stats.norm.ppf(1 - (1 - CERTAINTY) / 2) * np.sqrt(2.0 / logs / low.sum())


def test_cosine_transform_of_the_ramp() -> None:
    n_samples = 1_001
    ramp = SHAPE_BY_ROLE["ramp"]
    k = np.arange(1.0, n_samples)
    assert np.allclose(ramp.cosine(k, n_samples), cosine_transform(ramp.shape(n_samples)), atol=1e-9)


def test_bins_hold_every_coefficient_once() -> None:
    for n_samples in (2, 5, 33, 34, 100, 4_097, 100_000):
        starts = bin_starts(n_samples)
        assert (starts[0], starts[-1]) == (1, n_samples)
        assert (np.diff(starts) > 0).all()


@pytest.mark.parametrize("role", sorted(BY_ROLE))
def test_bin_means_by_quadrature_are_the_sums(role: str) -> None:
    term, n_samples = BY_ROLE[role], 20_000
    bins = bin_run(np.random.default_rng(0).standard_normal(n_samples), [term], ())
    starts = bin_starts(n_samples)
    plain = np.add.reduceat(term.cosine_power(np.arange(1.0, n_samples), n_samples), starts[:-1] - 1) / np.diff(starts)
    assert np.max(np.abs(bins.basis[:, 0] / plain - 1.0)) < 2e-6  # a thousandth of the statistical error at 1e9 samples


def test_powers_add_up_to_the_sum_of_squares() -> None:
    log = 5.0 + np.random.default_rng(0).standard_normal(3_000)
    bins = bin_run(log, [BY_ROLE["white"]], ())
    assert np.sum(bins.dof * bins.power) == pytest.approx(np.sum((log - log.mean()) ** 2), rel=1e-10)


def test_a_ramp_raises_the_degrees_of_freedom() -> None:
    factors = np.array([50])
    without = curve_edf(Mixture({"white": 1.0}), factors, [1_000])[0]
    steep = curve_edf(Mixture({"white": 1.0}, 1.0), factors, [1_000])[0]
    assert steep > 10 * without
    assert Mixture({"white": 1.0}, 1.0).allan_variance(factors)[0] == pytest.approx(1 / 50 + 50**2 / 2)


def test_pooled_degrees_of_freedom_of_equal_runs_add() -> None:
    one = curve_edf(Mixture({"white": 1.0, "walk": 1e-4}), np.array([20]), [1_000])[0]
    four = curve_edf(Mixture({"white": 1.0, "walk": 1e-4}), np.array([20]), [1_000] * 4)[0]
    assert four == pytest.approx(4 * one, rel=1e-12)


@pytest.mark.parametrize("time", [3.0, 50.0, 1_000.0])
def test_cosine_powers_of_correlated_noise_are_exact(time: float) -> None:
    """The closed form against the dense covariance p^|i-j|, every coefficient."""
    n_samples = 150
    covariance = np.exp(-np.abs(np.subtract.outer(np.arange(n_samples), np.arange(n_samples))) / time)
    k = np.arange(1, n_samples)
    vectors = np.sqrt(2 / n_samples) * np.cos(np.pi * np.outer(k, np.arange(n_samples) + 0.5) / n_samples)
    dense = np.einsum("ki,ij,kj->k", vectors, covariance, vectors)
    assert np.allclose(CorrelatedNoise(time).cosine_power(k.astype(float), n_samples) / dense, 1.0, atol=1e-9)


@pytest.mark.parametrize("factor", [1, 3, 50])
def test_allan_variance_of_correlated_noise(factor: int) -> None:
    """Against the dense covariance; and continuous across the change to its series."""
    for time in (3.0, 50.0, 1_000.0):
        lags = np.abs(np.subtract.outer(np.arange(2 * factor), np.arange(2 * factor)))
        weights = np.concatenate([-np.ones(factor), np.ones(factor)]) / factor
        dense = weights @ np.exp(-lags / time) @ weights / 2
        assert float(CorrelatedNoise(time).allan_variance(np.array(float(factor)))) == pytest.approx(dense, rel=1e-6)
    slow = CorrelatedNoise(1e5)
    below, above = (float(slow.allan_variance(np.array(float(m)))) / m for m in (99, 101))
    assert above / below == pytest.approx(1.0, abs=1e-4)


def test_peak_of_correlated_noise() -> None:
    """Peak 0.6174 of the standard deviation at 1.8926 Tc: IEEE Std 952 annex C, computed from its formula (from memory)."""
    term = CorrelatedNoise(10_000.0)
    factors = np.arange(15_000, 23_000, 10).astype(float)
    sigma = np.sqrt(term.allan_variance(factors))
    assert f"{sigma.max():.4f}" == "0.6174"
    assert factors[np.argmax(sigma)] / 10_000 == pytest.approx(1.8926, abs=0.002)


def test_covariance_between_points_of_the_curve() -> None:
    """Against 1500 simulated curves: standard deviations to 4 standard errors, correlations to 0.08."""
    factors = np.array([1, 2, 4, 8, 16, 32])
    for theta in ({"white": 1.0, "walk": 1e-3}, {"quantization": 1.0, "white": 0.05}):
        generator = np.random.default_rng(5)
        curves = []
        for _ in range(1_500):
            log = sum(np.sqrt(square) * BY_ROLE[role].generate(600, generator) for role, square in theta.items())
            curves.append(pooled_deviation([np.asarray(log)], factors)[0] ** 2)
        seen = np.cov(np.array(curves).T)
        expected = curve_covariance(Mixture(theta), factors, [600])
        ratio = np.sqrt(np.diag(seen) / np.diag(expected))
        assert np.all(np.abs(ratio - 1) < 4 * np.sqrt(1.0 / 1_500) + 0.02)
        root = np.sqrt(np.diag(expected))
        assert np.max(np.abs(np.corrcoef(np.array(curves).T) - expected / np.outer(root, root))) < 0.08
