"""The full calibration in small: 30 logs of 16 384 samples of every scenario of bench/calibrate.py, same claims and bounds.

Bounds are binomial at 99.9 % from 30 logs, so they catch what is broken and not what is a percent off; the full run
(`make calibrate`, reference/calibration.md) is the proof.
"""

import importlib.util
import sys
from types import ModuleType
from typing import Any

import numpy as np
import pytest
from scipy import stats
from tests.conftest import ROOT

LOGS = 30
N_SAMPLES = 16_384
CERTAINTY = 0.999


def calibrate() -> ModuleType:
    path = ROOT / "bench" / "calibrate.py"
    name = "calibrate_in_full"
    if name not in sys.modules:
        spec = importlib.util.spec_from_file_location(name, path)
        assert spec is not None
        assert spec.loader is not None
        module = importlib.util.module_from_spec(spec)
        sys.modules[name] = module
        spec.loader.exec_module(module)
    return sys.modules[name]


SCENARIOS = [scenario.name for scenario in calibrate().SCENARIOS]


@pytest.mark.parametrize("name", SCENARIOS)
def test_claims_hold(name: str) -> None:
    full: Any = calibrate()
    scenario = next(one for one in full.SCENARIOS if one.name == name)
    rows = [full.estimated(scenario, N_SAMPLES, 10_000 + seed) for seed in range(LOGS)]
    fewest = stats.binom.ppf(1 - CERTAINTY, LOGS, 0.94)
    for role, truth in scenario.theta.items():
        if scenario.step and role == "white":
            truth = float(np.hypot(truth, scenario.step / np.sqrt(12.0)))  # noqa: PLW2901  rounding adds white noise
        limits = [row[role][1:] for row in rows if role in row]
        covered = sum(low <= truth <= high for low, high in limits)
        assert covered >= fewest - (LOGS - len(limits)), role
    truth_set = set(scenario.theta)
    single = [set(row["sets"][0]) for row in rows if len(row["sets"]) == 1]
    if scenario.shows_correlation(N_SAMPLES):
        assert sum(bool(chosen - truth_set) for chosen in single) <= stats.binom.ppf(
            CERTAINTY, max(1, len(single)), 0.05
        )
    slope = scenario.ramp(N_SAMPLES)
    assert sum(row["ramp"][1] <= slope <= row["ramp"][2] for row in rows) >= fewest
    if not slope:
        assert sum(row["ramp"][3] > full.RAMP_RATIO for row in rows) <= stats.binom.ppf(CERTAINTY, LOGS, 0.02)
