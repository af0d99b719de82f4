"""The examples run and are what the demonstration uses."""

import subprocess
import sys
from pathlib import Path

import pytest
from tests.conftest import ROOT

from stillbench.pipeline import load_log_sheet
from stillbench.simulation import launch
from stillbench.vocabulary.log_sheet import (
    ClockSection,
    ConditionsSection,
    FrontEnd,
    LogSection,
    ReportSection,
    SensorSection,
    SideSection,
)

EXAMPLES = ROOT / "examples"


@pytest.fixture(autouse=True)
def _there() -> None:
    if not EXAMPLES.is_dir():
        pytest.skip("examples are part of the checkout, not of the wheel")


def test_sheets_and_specification_are_those_of_the_demonstration() -> None:
    assert (EXAMPLES / "wheel-gyro.toml").read_text() == launch.WHEEL_SHEET
    assert (EXAMPLES / "mems-part.toml").read_text() == launch.MEMS_SHEET
    assert (EXAMPLES / "specification.toml").read_text() == launch.SPECIFICATION


def test_from_python(tmp_path: Path) -> None:
    done = subprocess.run(
        [sys.executable, EXAMPLES / "from_python.py", tmp_path], capture_output=True, text=True, check=True
    )
    assert "angle_random_walk" in done.stdout
    assert (tmp_path / "made-hour.html").stat().st_size > 50_000


def test_the_full_sheet_is_a_sheet_and_has_every_key() -> None:
    text = (EXAMPLES / "full-sheet.toml").read_text()
    sheet = load_log_sheet(EXAMPLES / "full-sheet.toml")
    assert sheet.channel["rate_out"].front_end is not None
    for section in (LogSection, ClockSection, FrontEnd, SideSection, SensorSection, ConditionsSection, ReportSection):
        for key in section.model_fields:
            assert key in text or (section, key) == (ClockSection, "rate"), key
