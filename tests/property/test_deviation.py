"""What must hold for the Allan deviation of any log."""

import sys

import numpy as np
import pytest
from hypothesis import assume, example, given
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from stillbench.deviation.overlapping import HELPED_FROM, pooled_deviation
from stillbench.deviation.plain import exact_overlapping_variance, plain_overlapping_deviation
from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.scratch import BLOCK

finite = st.floats(-1e3, 1e3, allow_nan=False, width=32)
logs = hnp.arrays(np.float64, st.integers(8, 120), elements=finite)
factors = st.integers(1, 4)

ROUNDING = 1e-9
"""Of the largest reading: sums of some hundred float64 numbers that cancel."""


def deviation(pieces: list[FloatArray], factor: int) -> float:
    return float(pooled_deviation(pieces, np.array([factor]))[0][0])


def tolerance(log: FloatArray) -> float:
    return ROUNDING * (1.0 + float(np.abs(log).max()))


@given(logs, factors, st.floats(-1e6, 1e6))
@example(np.zeros(8), 1, 1e6)
def test_an_offset_changes_nothing(log: FloatArray, factor: int, offset: float) -> None:
    shifted = log + offset
    lost = 4.0 * np.spacing(np.abs(shifted).max())  # what the addition itself rounds off
    assert deviation([shifted], factor) == pytest.approx(deviation([log], factor), abs=tolerance(log) + lost)


@given(logs, factors, st.floats(-50, 50))
def test_scaling_scales(log: FloatArray, factor: int, scale: float) -> None:
    expected = abs(scale) * deviation([log], factor)
    assert deviation([scale * log], factor) == pytest.approx(expected, abs=50 * tolerance(log))


@given(logs, factors)
def test_time_reversal_changes_nothing(log: FloatArray, factor: int) -> None:
    assert deviation([log[::-1]], factor) == pytest.approx(deviation([log], factor), abs=tolerance(log))


@given(st.integers(20, 400), st.integers(1, 10), st.floats(-5, 5))
def test_a_ramp_gives_slope_times_tau_over_root_two(n_samples: int, factor: int, slope: float) -> None:
    ramp = slope * np.arange(n_samples, dtype=np.float64)
    expected = abs(slope) * factor / np.sqrt(2.0)
    assert deviation([ramp], factor) == pytest.approx(expected, abs=tolerance(ramp))


@given(logs, factors)
def test_the_blocked_estimator_is_the_plain_one(log: FloatArray, factor: int) -> None:
    assert deviation([log], factor) == pytest.approx(plain_overlapping_deviation(log, factor), abs=tolerance(log))


def test_blocks_join_without_seam() -> None:
    """More samples than one block, factors on both sides of it."""
    log = np.random.default_rng(2).standard_normal(30_000)
    for factor in (1, 8_191, 8_192, 9_999):
        angle = np.concatenate([[0.0], np.cumsum(log)])
        second = angle[2 * factor :] - 2 * angle[factor:-factor] + angle[: -2 * factor]
        assert deviation([log], factor) == pytest.approx(np.sqrt(np.mean(second**2) / 2) / factor, rel=1e-10)


@given(logs, factors, st.data())
def test_splitting_at_a_gap_drops_the_windows_that_straddle_it(
    log: FloatArray, factor: int, data: st.DataObject
) -> None:
    cut = data.draw(st.integers(1, log.size - 1))
    first, second = log[:cut], log[cut:]
    assume(max(first.size, second.size) >= 2 * factor)
    starts = [i for i in range(log.size - 2 * factor + 1) if i + 2 * factor <= cut or i >= cut]
    squares = [(log[i + factor : i + 2 * factor].mean() - log[i : i + factor].mean()) ** 2 for i in starts]
    expected = np.sqrt(sum(squares) / (2 * len(squares)))
    assert deviation([first, second], factor) == pytest.approx(expected, abs=tolerance(log))


@given(hnp.arrays(np.float64, st.integers(8, 40), elements=finite), st.integers(1, 3), st.sampled_from([0.0, 1e8]))
def test_exact_arithmetic_agrees_to_nine_digits(log: FloatArray, factor: int, offset: float) -> None:
    """The inputs are taken as the binary numbers they are, offset included."""
    given_log = log + offset
    exact = exact_overlapping_variance(given_log, factor)
    assume(exact > 1e-6)
    assert deviation([given_log], factor) ** 2 == pytest.approx(float(exact), rel=2e-9)


def test_a_log_of_more_than_one_block_of_the_running_sum() -> None:
    """Against the formula of NIST SP 1065 on one plain running sum (math as in plain.py, which is too slow for this length)."""
    log = np.random.default_rng(6).standard_normal(BLOCK + 5_000) + 1e8
    angle = np.concatenate([[0.0], np.cumsum(log - 1e8)])
    for factor in (1, 7, 1_000, 300_000):
        second = angle[2 * factor :] - 2.0 * angle[factor:-factor] + angle[: -2 * factor]
        plain = np.sqrt(np.mean(second**2) / 2.0) / factor
        assert deviation([log], factor) == pytest.approx(plain, rel=1e-7)


def test_a_helper_process_does_not_change_a_bit() -> None:
    log = np.random.default_rng(2).standard_normal(HELPED_FROM + 1_000)
    taken = np.array([1, 3, 100, 9_999, 400_000])
    one, two = (pooled_deviation([log], taken, processes=processes)[0] for processes in (1, 2))
    assert np.array_equal(one, two)


def test_the_chunks_of_a_helper_that_cannot_run_are_done_all_the_same(monkeypatch: pytest.MonkeyPatch) -> None:
    log = np.random.default_rng(2).standard_normal(HELPED_FROM + 1_000)
    taken = np.array([1, 3, 100])
    whole = pooled_deviation([log], taken, processes=1)[0]
    for program in ("/bin/false", "/no/such/program"):
        monkeypatch.setattr(sys, "executable", program)
        assert np.array_equal(pooled_deviation([log], taken, processes=2)[0], whole)


@pytest.mark.parametrize("offset", [0.0, 1e8])
def test_nine_digits_against_exact_fractions_at_all_averaging_times(offset: float) -> None:
    """Log relative error of at least nine (NIST StRD practice), the inputs taken as the binary numbers they are."""
    log = offset + np.random.default_rng(3).standard_normal(300)
    for factor in range(1, 101):
        exact = float(exact_overlapping_variance(log, factor))
        assert -np.log10(max(abs(deviation([log], factor) ** 2 / exact - 1.0), 1e-16)) >= 9.0
