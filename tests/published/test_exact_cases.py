"""Cases whose Allan deviation is known exactly; derived by hand from the definition."""

import math

import numpy as np
import pytest

from stillbench.deviation.overlapping import overlapping_deviation

ROUNDING = 1e-12
"""Sums of a thousand float64 terms of order one."""


def deviation(values: object, factor: int) -> float:
    return overlapping_deviation(np.asarray(values, dtype=float), sample_interval=1.0, factor=factor)


def test_constant_has_none() -> None:
    assert deviation(np.full(1000, 2.5), 10) == 0.0


def test_ramp_is_slope_times_tau_over_root_two() -> None:
    ramp = 2.5e-3 * np.arange(1000)
    assert f"{deviation(ramp, 100):.14f}" == "0.17677669529664"
    for factor in (1, 7, 333):
        assert deviation(ramp, factor) == pytest.approx(2.5e-3 * factor / math.sqrt(2), rel=ROUNDING)


def test_step_at_the_centre() -> None:
    n_samples, factor = 1000, 100
    step = np.r_[np.zeros(n_samples // 2), np.ones(n_samples // 2)]
    variance = (2 * factor**2 + 1) / (3 * factor) / (2 * (n_samples - 2 * factor + 1))
    assert deviation(step, factor) == pytest.approx(math.sqrt(variance), rel=ROUNDING)
    assert f"{deviation(step, factor) ** 2:.13f}" == "0.0416167290886"


@pytest.mark.parametrize(("factor", "expected"), [(1, math.sqrt(2)), (2, 0.0), (3, math.sqrt(2) / 3)])
def test_alternating_signs(factor: int, expected: float) -> None:
    assert deviation([1.0, -1.0] * 500, factor) == pytest.approx(expected, abs=ROUNDING)


def test_sine_of_long_record() -> None:
    """ADEV(m) = A sin^2(pi f m) / (m sin(pi f)); with whole periods in every sum the phase averages out exactly."""
    frequency, factor, periods = 0.01, 37, 1000
    n_samples = round(periods / frequency) + 2 * factor - 1  # whole periods of second differences
    sine = np.sin(2 * math.pi * frequency * np.arange(n_samples))
    expected = math.sin(math.pi * frequency * factor) ** 2 / (factor * math.sin(math.pi * frequency))
    assert deviation(sine, factor) == pytest.approx(expected, rel=1e-9)  # rounding of 1e5 sines
    assert f"{expected:.7f}" == "0.7247246"
