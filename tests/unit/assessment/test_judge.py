"""Verdicts: decisions, bounds, common factors, and how often a guarded acceptance is wrong."""

from pathlib import Path

import numpy as np
import pytest
from scipy import stats
from tests.conftest import made_noise

from stillbench.assessment.judge import limit_in_si
from stillbench.assessment.uncertainty import with_common_factor
from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.errors import UsageError
from stillbench.pipeline import characterize
from stillbench.vocabulary.quantity import ACCELERATION, ANGULAR_RATE
from stillbench.vocabulary.specification import Requirement, Specification
from stillbench.vocabulary.verdict import Verdict


def judged(log: FloatArray, rate: float = 10.0, **requirement: object) -> Verdict:
    wanted = Requirement.model_validate({"id": "r", **requirement})
    result = characterize(
        log, rate=rate, unit="rad/s", specification=Specification(requirement=(wanted,)), made_at="2026-01-01"
    )
    return result.channels[0].verdicts[0]


WHITE = made_noise(20_000, 12, white=1.0)


@pytest.mark.parametrize(("limit", "decision"), [(0.40, "conforms"), (0.25, "does not conform"), (0.3162, "undecided")])
def test_three_decisions(limit: float, decision: str) -> None:
    """N = 1/sqrt(10 Hz) = 0.3162 rad/sqrt(s)."""
    verdict = judged(WHITE, quantity="angle random walk", limit=f"{limit} rad/sqrt(s)")
    assert verdict.decision == decision
    probability = verdict.conformance_probability
    assert probability is not None
    assert {"conforms": probability > 0.999, "does not conform": probability < 0.001}.get(
        decision, 0.001 < probability < 0.999
    )


def test_spectral_density_is_one_sided() -> None:
    requirement = Requirement(id="r", quantity="angle random walk", limit="0.01 deg/s/sqrt(Hz)")
    found = limit_in_si(requirement, ANGULAR_RATE)
    assert found is not None
    # 0.01 deg/s/sqrt(Hz) one-sided is N = 0.00707107 deg/sqrt(s) = 0.424264 deg/sqrt(h).
    assert f"{np.degrees(found[0]) * 60:.6f}" == "0.424264"
    assert limit_in_si(requirement, ACCELERATION) is None


def test_resolution_is_a_multiple_of_the_deviation() -> None:
    """2.77 and 4.58 times sigma(tau): 1.96 sqrt 2 and (1.96 + 1.28) sqrt 2."""
    sigma = 1.0 / np.sqrt(10.0)  # of averages of 1 s at 10 Hz
    for meaning, multiple in ((None, 2.77), ("seen 90 %", 4.58)):
        verdict = judged(WHITE, quantity="resolution", limit="9 rad/s", averaging_time="1 s", meaning=meaning)
        assert verdict.value == pytest.approx(multiple * sigma, rel=0.005 + 4 / np.sqrt(2 * 20_000))
        assert verdict.lower is not None
        assert verdict.lower < multiple * sigma * 1.001
        assert verdict.decision == "conforms"


def test_drift_is_the_largest_departure_from_the_null() -> None:
    log = made_noise(36_000, 3, white=0.1)
    log[20_000:20_010] += 0.5
    verdict = judged(log, quantity="drift", limit="0.3 rad/s", averaging_time="1 s", null="60 s", over="1 h")
    # The average of ten samples at the bump, and the null, each with its white noise.
    assert verdict.value == pytest.approx(0.5, abs=4 * 0.1 / np.sqrt(10))
    assert verdict.decision == "does not conform"
    gappy = log.copy()
    gappy[3_600:34_000] = np.nan
    verdict = judged(gappy, quantity="drift", limit="0.9 rad/s", averaging_time="1 s", null="60 s", over="1 h")
    assert verdict.decision == "undecided"
    assert "averages exist" in verdict.because
    short = judged(log[:18_000], quantity="drift", limit="0.4 rad/s", averaging_time="1 s", null="60 s", over="1 h")
    assert short.decision == "undecided"
    assert "does not cover" in short.because


def test_bias_limits_its_size() -> None:
    verdict = judged(WHITE - 5.0, quantity="bias", limit="4 rad/s")
    assert verdict.value == pytest.approx(5.0, abs=4 / np.sqrt(20_000))
    assert verdict.decision == "does not conform"


def test_typical_is_no_limit_and_simple_acceptance_takes_the_estimate() -> None:
    assert judged(WHITE, quantity="angle random walk", limit="9 rad/sqrt(s)", kind="typical").decision == "undecided"
    verdict = judged(WHITE, quantity="angle random walk", limit="0.3162 rad/sqrt(s)", rule="simple")
    assert verdict.value is not None
    assert verdict.decision == ("conforms" if verdict.value <= 0.3162 else "does not conform")


def test_coverage_of_the_requirement_rules_whatever_the_table_has() -> None:
    """The bound is z(coverage) standard errors off, for the requirement's coverage and not for --coverage."""
    for coverage, z in ((0.95, 1.645), (0.99, 2.326), (0.8, 0.842)):
        wanted = Requirement(id="r", quantity="bias", limit="9 rad/s", coverage=coverage)
        for own in (0.95, 0.68):
            result = characterize(
                WHITE + 2.0, rate=10.0, unit="rad/s", coverage=own, specification=Specification(requirement=(wanted,))
            )
            verdict = result.channels[0].verdicts[0]
            assert verdict.bound is not None
            assert verdict.value is not None
            assert verdict.bound - verdict.value == pytest.approx(z / np.sqrt(20_000), rel=0.05)


def test_heavy_tails_reach_the_verdict() -> None:
    heavy = np.random.default_rng(3).standard_t(5, 50_000)
    verdict = judged(heavy, 1.0, quantity="angle random walk", limit="9 rad/sqrt(s)")
    term = characterize(heavy, rate=1.0, unit="rad/s").channels[0].noise.terms["angle_random_walk"]
    assert (verdict.lower, verdict.upper) == pytest.approx((term.lower, term.upper), rel=1e-6)


def test_noise_that_the_converter_does_not_resolve_is_not_judged() -> None:
    log = np.round(made_noise(60_000, 5, white=0.2) + 0.1)
    log[::7_000] += 1.0  # a code is seen now and then
    cases: list[tuple[str, dict[str, object]]] = [("angle random walk", {}), ("resolution", {"averaging_time": "1 s"})]
    for quantity, more in cases:
        unit = "rad/sqrt(s)" if quantity.startswith("angle") else "rad/s"
        assert judged(log, quantity=quantity, limit=f"9 {unit}", rate=10.0, **more).decision == "undecided"


def test_clipped_noise_is_not_judged() -> None:
    log = np.clip(WHITE, -1.0, 1.0)
    assert judged(log, quantity="angle random walk", limit="9 rad/sqrt(s)").decision == "undecided"


def test_an_averaging_time_between_samples_is_scaled_by_the_model() -> None:
    """Dt = 0.8 s, asked 1 s: white noise averages as 1/sqrt(tau), not as the nearest whole sample."""
    verdict = judged(WHITE, 1.25, quantity="resolution", limit="9 rad/s", averaging_time="1 s")
    assert verdict.value == pytest.approx(2.772 * np.sqrt(0.8), rel=4 / np.sqrt(2 * 20_000))
    drift = judged(WHITE, 1.25, quantity="drift", limit="9 rad/s", averaging_time="1 s", null="60 s")
    assert drift.decision == "undecided"
    assert "whole number of samples" in drift.because


def test_what_this_version_does_not_measure_is_undecided() -> None:
    verdict = judged(WHITE, quantity="warm-up time", limit="5 min")
    assert (verdict.decision, verdict.value) == ("undecided", None)


def test_undecided_names_the_log_that_would_decide() -> None:
    log = made_noise(30_000, 5, white=1.0, walk=0.01)
    estimate = judged(log, 1.0, quantity="rate random walk", limit="1 rad/s/sqrt(s)").value or 0.0
    verdict = judged(log, 1.0, quantity="rate random walk", limit=f"{1.05 * estimate} rad/s/sqrt(s)")
    assert verdict.decision == "undecided"
    assert verdict.deciding_length is not None
    low, high = verdict.deciding_length
    # Errors of the walk fall with the root of the length: at 8 % now, 5 % off the limit is seen at some twenty times it.
    assert high is None or high > 100_000
    assert low < 32 * 30_000


def test_a_model_that_does_not_fit_gives_no_verdict_on_its_terms() -> None:
    # A line so low that cutting the band does not get rid of it.
    log = made_noise(20_000, 3, white=0.1) + np.sin(2 * np.pi * np.arange(20_000) / 4_001.0) * 3
    verdict = judged(log, quantity="rate random walk", limit="1 rad/s/sqrt(s)")
    assert verdict.decision == "undecided"
    assert "does not explain" in verdict.because
    seen = judged(log, quantity="resolution", limit="9 rad/s", averaging_time="1 s")
    assert "from the curve itself" in seen.because
    assert seen.value is not None


def test_a_requirement_on_something_else_is_refused() -> None:
    with pytest.raises(UsageError, match="requirement 'r'"):
        judged(WHITE, quantity="velocity random walk", limit="1 m/s/sqrt(h)")


def test_common_factor() -> None:
    """Pure scale error: the interval is the estimate times 1 +- z u; pure statistics: unchanged."""
    assert with_common_factor(2.0, 2.0, 2.0, 0.1, 2.0) == pytest.approx((1.6, 2.4))
    assert with_common_factor(2.0, 1.5, 2.7, 0.0, 2.0) == (1.5, 2.7)
    assert with_common_factor(-2.0, -2.0, -2.0, 0.1, 2.0) == pytest.approx((-2.4, -1.6))
    low, high = with_common_factor(2.0, 1.0, 3.0, 0.1, 2.0)
    assert (low, high) == pytest.approx((2.0 - np.hypot(1.0, 0.4), 2.0 + np.hypot(1.0, 0.6)))


def test_false_acceptance_at_the_limit() -> None:
    """300 sensors exactly at the limit of the walk (relative error about 15 %): at most 5 %, within the binomial bound.

    The bound is taken at 99 %, so that the 8.9 % of an unadjusted threshold would pass one time in three only.
    """
    accepted = 0
    trials = 300
    for seed in range(trials):
        log = made_noise(8_192, 4_000 + seed, white=1.0, walk=0.02)
        accepted += judged(log, 1.0, quantity="rate random walk", limit="0.02 rad/s/sqrt(s)").decision == "conforms"
    assert accepted <= stats.binom.ppf(0.99, trials, 0.05)


def test_specification_file_of_the_examples(tmp_path: Path) -> None:
    from stillbench.assessment.judge import load_specification  # noqa: PLC0415
    from stillbench.simulation.launch import SPECIFICATION  # noqa: PLC0415

    path = tmp_path / "spec.toml"
    path.write_text(SPECIFICATION)
    assert [r.quantity for r in load_specification(path).requirement][:2] == ["resolution", "drift"]
