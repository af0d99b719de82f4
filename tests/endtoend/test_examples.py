"""The examples run and are what the demonstration uses."""

import subprocess
import sys
from pathlib import Path

import pytest
from tests.conftest import ROOT

from stillbench.simulation import launch

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
