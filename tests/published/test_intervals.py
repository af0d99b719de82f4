"""Chi-square factors and equivalent degrees of freedom against published and exact values."""

import numpy as np
import pytest
from tests.published.test_sp1065 import thousand_points

from stillbench.deviation.intervals import chi_square_limits
from stillbench.deviation.overlapping import overlapping_deviation
from stillbench.terms.covariance import curve_edf
from stillbench.terms.mixture import Mixture

# Factors for the limits of a standard deviation from n observations, 95 % two-sided: table "Confidence Intervals on the
# Standard Deviation" of the Boost C++ math documentation.
BOOST_FACTORS = [
    (3, "0.5207", "6.2847"),
    (10, "0.6878", "1.8256"),
    (20, "0.7605", "1.4606"),
    (100, "0.8780", "1.1617"),
    (1000, "0.9580", "1.0459"),
]


@pytest.mark.parametrize(("n_observations", "low", "high"), BOOST_FACTORS)
def test_limits_of_a_standard_deviation(n_observations: int, low: str, high: str) -> None:
    lower, upper = chi_square_limits(np.array([1.0]), np.array([n_observations - 1.0]), 0.95)
    # The table rounds the last digit by hand in places: within six tenths of it.
    assert abs(lower[0] - float(low)) <= 0.6e-4
    assert abs(upper[0] - float(high)) <= 0.6e-4


# Exact degrees of freedom of the overlapping Allan variance of independent samples: with K = M-2m+1 and r_j = 2m-3j up to m,
# j-2m up to 2m, edf = K^2 (2m)^2 / (K (2m)^2 + 2 sum (K-j) r_j^2). Random walk and white angle noise from exact covariance.
WHITE = [
    (1000, 1, "666.222296"),
    (1000, 10, "146.072326"),
    (1000, 100, "12.813268"),
    (1000, 333, "2.677251"),
    (1000, 499, "1.005361"),
    (1000, 500, "1.000000"),
    (100, 10, "12.783244"),
    (10_000, 100, "147.750320"),
]
WALK = [(1000, 1, "999.000"), (1000, 10, "91.755"), (1000, 100, "7.757"), (1000, 333, "1.407")]
ANGLE = [(1000, 1, "514.036055"), (1000, 10, "507.173123"), (1000, 100, "440.206518")]


def white_edf(n_samples: int, factor: int) -> float:
    count = n_samples - 2 * factor + 1
    j = np.arange(1, min(count, 2 * factor))
    overlap = np.where(j <= factor, 2 * factor - 3 * j, j - 2 * factor)
    full = (2.0 * factor) ** 2
    return float(count**2 * full / (count * full + 2 * np.sum((count - j) * overlap**2.0)))


@pytest.mark.parametrize(("n_samples", "factor", "printed"), WHITE)
def test_white_noise(n_samples: int, factor: int, printed: str) -> None:
    got = curve_edf(Mixture({"white": 1.0}), np.array([factor]), [n_samples])[0]
    assert f"{got:.6f}" == printed
    assert got == pytest.approx(max(1.0, white_edf(n_samples, factor)), rel=1e-9)  # float64 sums


def test_white_noise_with_strided_lags() -> None:
    """Above 512 samples lags are strided; the sum is then good to a part in a thousand, far below what edf is good for."""
    got = curve_edf(Mixture({"white": 1.0}), np.array([36_000]), [360_000])[0]
    assert got == pytest.approx(white_edf(360_000, 36_000), rel=1e-3)
    assert f"{white_edf(360_000, 36_000):.6f}" == "12.800041"


@pytest.mark.parametrize(("n_samples", "factor", "printed"), WALK)
def test_random_walk(n_samples: int, factor: int, printed: str) -> None:
    assert f"{curve_edf(Mixture({'walk': 1.0}), np.array([factor]), [n_samples])[0]:.3f}" == printed


@pytest.mark.parametrize(("n_samples", "factor", "printed"), ANGLE)
def test_white_angle_noise(n_samples: int, factor: int, printed: str) -> None:
    assert f"{curve_edf(Mixture({'quantization': 1.0}), np.array([factor]), [n_samples])[0]:.6f}" == printed


def test_angle_noise_with_strided_lags_counts_its_spikes_once() -> None:
    """Exact: R is 6, -4, 1 times Q^2/(2 m^2) at lags 0, m, 2m and zero between."""
    n_samples, factor = 100_000, 2_000
    count = n_samples - 2 * factor + 1
    exact = 36.0 * count**2 / (36.0 * count + 2 * (16.0 * (count - factor) + (count - 2 * factor)))
    assert curve_edf(Mixture({"quantization": 1.0}), np.array([factor]), [n_samples])[0] == pytest.approx(
        exact, rel=1e-9
    )


# Limits of the 1000-point set for white noise, computed from the published deviations and the exact degrees of freedom.
LIMITS = [
    (1, "2.773490e-01", "3.088153e-01"),
    (8, "9.586740e-02", "1.178073e-01"),
    (64, "2.791404e-02", "5.166568e-02"),
    (333, "4.563625e-03", "3.484250e-02"),
]


@pytest.mark.parametrize(("factor", "low", "high"), LIMITS)
def test_limits_of_the_thousand_points(factor: int, low: str, high: str) -> None:
    sigma = overlapping_deviation(thousand_points(), sample_interval=1.0, factor=factor)
    edf = curve_edf(Mixture({"white": 1.0}), np.array([factor]), [1000])
    lower, upper = chi_square_limits(np.array([sigma]), edf, 0.95)
    assert (f"{lower[0]:.6e}", f"{upper[0]:.6e}") == (low, high)
