"""Runs that are killed, and machines without room: no half-written output, and a rerun gives the same bytes."""

import os
import resource
import shutil
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest
from tests.conftest import Command

KILLS = 100
MOMENT = "2026-03-01T06:30:00+00:00"


@pytest.fixture
def command(tmp_path: Path) -> list[str]:
    values = np.random.default_rng(1).normal(0.1, 0.02, 400)
    (tmp_path / "night.csv").write_text("rate\n" + "\n".join(f"{value:.6f}" for value in values) + "\n")
    flags = ["--unit", "deg/s", "--rate", "10", "--out", "out", "--made-at", MOMENT, "--quiet"]
    return [sys.executable, "-m", "stillbench", "characterize", "night.csv", *flags]


def outputs(folder: Path) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in folder.iterdir()} if folder.exists() else {}


def test_a_hundred_kills(command: list[str], tmp_path: Path) -> None:
    """At random instants of the run: what is there is whole, and the run after them gives the bytes of the first."""
    subprocess.run(command, cwd=tmp_path, check=True, capture_output=True)
    whole = outputs(tmp_path / "out")
    assert len(whole) == 3
    began = time.perf_counter()
    subprocess.run(command, cwd=tmp_path, check=True, capture_output=True)
    usual = time.perf_counter() - began
    generator = np.random.default_rng(3)
    for _ in range(KILLS):
        # Half of the kills come where the files are written, at the end.
        instant = generator.uniform(0.0, usual) if generator.random() < 0.5 else generator.uniform(0.85, 1.05) * usual
        with subprocess.Popen(command, cwd=tmp_path, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL) as process:
            try:
                process.wait(instant)
            except subprocess.TimeoutExpired:
                process.kill()
        found = outputs(tmp_path / "out")
        assert {name: found[name] for name in whole} == whole
        assert all(name in whole or name.endswith(".part") for name in found)
    subprocess.run(command, cwd=tmp_path, check=True, capture_output=True)
    assert outputs(tmp_path / "out") == whole


def test_little_memory(command: list[str], tmp_path: Path) -> None:
    """From too little to load the libraries up to enough: one line or a whole result."""
    codes = set()
    for gibibytes in (0.3, 0.5, 1.0, 1.5, 2.5, 8.0):
        limit = int(gibibytes * 2**30)
        shutil.rmtree(tmp_path / "out", ignore_errors=True)
        done = subprocess.run(
            command,
            cwd=tmp_path,
            capture_output=True,
            check=False,
            env={**os.environ, "OPENBLAS_NUM_THREADS": "1"},
            preexec_fn=lambda limit=limit: resource.setrlimit(resource.RLIMIT_AS, (limit, limit)),  # type: ignore[misc]
        )
        codes.add(done.returncode)
        if done.returncode == 0:
            assert len(outputs(tmp_path / "out")) == 3
        else:
            assert not outputs(tmp_path / "out"), (gibibytes, done)
            # Below what the libraries themselves need, one of them may end the process in words of its own.
            said = done.stderr.startswith(b"stillbench: not enough memory")
            own = done.returncode < 0 or b"OpenBLAS error" in done.stderr
            assert said or own, (gibibytes, done)
            assert b"Traceback" not in done.stderr
    assert 0 in codes


def test_a_scratch_folder_that_is_not_there(stillbench: Command, command: list[str]) -> None:
    """Small logs need none."""
    stillbench(*command[3:], "--scratch", "nowhere", check=0)
