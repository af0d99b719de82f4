"""Progress shows on a terminal, keeps quiet elsewhere, and respects NO_COLOR and --quiet."""

import os
import pty
import re
import subprocess
import sys
from pathlib import Path

import pytest
from tests.conftest import Command, made_noise

pytestmark = pytest.mark.installed


@pytest.fixture
def log(tmp_path: Path) -> Path:
    path = tmp_path / "log.txt"
    path.write_text("".join(f"{value:.6f}\n" for value in made_noise(60_000, 3, white=1.0)))
    return path


def on_terminal(log: Path, *extra: str, **environment: str) -> bytes:
    """Return what a terminal on stderr receives."""
    ours, theirs = pty.openpty()
    command = [sys.executable, "-m", "stillbench", "characterize", log, "--unit", "deg/s", "--rate", "50", *extra]
    with subprocess.Popen(
        list(map(str, command)),
        stdout=subprocess.DEVNULL,
        stderr=theirs,
        env={**os.environ, "TERM": "xterm", **environment},
    ) as process:
        os.close(theirs)
        received = b""
        while True:
            try:
                part = os.read(ours, 65_536)
            except OSError:
                break
            if not part:
                break
            received += part
        assert process.wait(60) == 0
    os.close(ours)
    return received


def test_stages_show_on_a_terminal(log: Path) -> None:
    seen = on_terminal(log)
    for stage in (b"reading", b"curve of", b"fit of"):
        assert stage in seen


def test_no_color_is_respected(log: Path) -> None:
    colour = re.compile(rb"\x1b\[(?:3[0-9]|9[0-7])")
    assert colour.search(on_terminal(log))
    assert not colour.search(on_terminal(log, NO_COLOR="1"))


def test_quiet_says_nothing(log: Path) -> None:
    assert on_terminal(log, "--quiet") == b""


def test_nothing_moves_where_there_is_no_terminal(stillbench: Command, log: Path) -> None:
    assert stillbench("characterize", log, "--unit", "deg/s", "--rate", "50", check=0).stderr == b""
