"""The converter's part taken off in variance: coverage of what is left, and where the converter rules. Made logs."""

import json
from pathlib import Path

import numpy as np
import pytest
from scipy.stats import binom
from tests.conftest import Command

from stillbench.archive.codec import decode, encode
from stillbench.assessment.converter_part import corrected_term
from stillbench.pipeline import characterize
from stillbench.report.render import render_report
from stillbench.vocabulary.noise_model import RESOLVED, NoiseTerm

TRIALS = 4_000


def term(estimate: float, error: float) -> NoiseTerm:
    """Make a term with a symmetric 95 % interval."""
    return NoiseTerm(estimate, max(0.0, estimate - 1.96 * error), estimate + 1.96 * error, "V", RESOLVED, "")


@pytest.mark.parametrize(("error", "other_error"), [(0.02, 0.012), (0.003, 0.03)])
def test_interval_of_what_is_left_covers(error: float, other_error: float) -> None:
    """Sensor 0.8, converter 0.6 (together 1.0); either of the two the less certain one."""
    generator = np.random.default_rng(4)
    low, high = binom.interval(0.999, TRIALS, 0.95)
    covered = 0
    for _ in range(TRIALS):
        left = corrected_term(
            term(1.0 + error * generator.standard_normal(), error),
            term(0.6 + other_error * generator.standard_normal(), other_error),
        )
        assert left is not None
        covered += left.lower <= 0.8 <= left.upper
    assert low <= covered <= high, covered


def test_a_converter_that_is_all_there_is() -> None:
    generator = np.random.default_rng(5)
    zeros = sum(
        left.lower == 0
        for left in (
            corrected_term(
                term(1.0 + 0.02 * generator.standard_normal(), 0.02),
                term(1.0 + 0.02 * generator.standard_normal(), 0.02),
            )
            for _ in range(TRIALS)
        )
        if left is not None
    )
    # Nothing is left for the sensor: one in forty lower ends lies above zero.
    low, high = binom.interval(0.999, TRIALS, 0.975)
    assert low <= zeros <= high, zeros


def test_converter_limited(stillbench: Command, tmp_path: Path) -> None:
    """White noise of the sensor over a random walk of the converter: limited above where they cross (tau^2 = 3 N^2/K^2)."""
    generator = np.random.default_rng(6)
    n = 60_000
    walk, other_walk = (np.cumsum(1e-3 * generator.standard_normal(n)) for _ in range(2))
    fast = 0.1 * generator.standard_normal(n)
    for name, values in (
        ("night.csv", walk + fast + generator.standard_normal(n)),
        ("shorted.csv", other_walk + 0.1 * generator.standard_normal(n)),
    ):
        (tmp_path / name).write_text("out\n" + "\n".join(f"{value:.6f}" for value in values) + "\n")
    done = stillbench(
        "characterize",
        "night.csv",
        "--unit",
        "V",
        "--rate",
        "1",
        "--converter-log",
        "shorted.csv",
        "--json",
        "-",
        check=0,
    )
    (channel,) = json.loads(done.stdout)["channels"]
    share = channel["converter"]
    cross = np.sqrt(3.0) / 1e-3
    assert cross / 3 < share["limited_from_s"] < cross * 3
    white, slow = share["sensor"]["white_noise"], share["sensor"]["random_walk"]
    assert white["lower"] < 1.0 < white["upper"]
    assert white["share"] < 0.05
    assert slow["limited"]
    assert slow["lower"] == 0
    assert any(finding["kind"] == "converter_limited" for finding in channel["findings"])
    page = render_report(decode(done.stdout)).decode()
    assert "Sensor and converter" in page
    assert "converter alone" in page


def test_a_result_with_a_converter_survives_its_archive() -> None:
    generator = np.random.default_rng(7)
    logs = [{"out": scale * generator.standard_normal(2_000)} for scale in (1.0, 0.3)]
    result = characterize(logs[0], unit="V", rate=1.0, converter_log=logs[1], made_at="2026-01-01")
    assert encode(decode(encode(result))) == encode(result)
