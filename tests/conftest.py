"""Shared by all tiers: where the real logs are, how the command is started, made noise."""

import os
import subprocess
import sys
from collections.abc import Callable, Sequence
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, settings

from stillbench.foundation.arrays import FloatArray
from stillbench.terms.catalogue import BY_ROLE

ROOT = Path(__file__).resolve().parents[1]
REAL_LOGS = Path(os.environ.get("STILLBENCH_REAL_LOGS", ROOT.parent / "shared" / "data"))

settings.register_profile("dev", max_examples=40, deadline=None, suppress_health_check=[HealthCheck.too_slow])
settings.register_profile("ci", max_examples=100, deadline=None, derandomize=True)
settings.register_profile("fuzz", max_examples=5_000, deadline=None)
settings.load_profile(os.environ.get("HYPOTHESIS_PROFILE", "ci"))

Command = Callable[..., subprocess.CompletedProcess[bytes]]


@pytest.fixture
def real_log() -> Callable[[str], Path]:
    """Path of a file of the real logs; the test is skipped, saying so, where they are not there."""

    def find(name: str) -> Path:
        path = REAL_LOGS / name
        if not path.exists():
            pytest.skip(f"the real log {name} is not there (STILLBENCH_REAL_LOGS names their folder)")
        return path

    return find


@pytest.fixture
def stillbench(tmp_path: Path) -> Command:
    """Start the installed command in an empty folder."""

    def run(*arguments: str | Path, check: int | None = None, **environment: str) -> subprocess.CompletedProcess[bytes]:
        done = subprocess.run(
            [sys.executable, "-m", "stillbench", *map(str, arguments)],
            cwd=tmp_path,
            env={**os.environ, **environment},
            capture_output=True,
            timeout=300,
            check=False,
        )
        assert b"Traceback" not in done.stderr
        if check is not None:
            assert done.returncode == check, done.stderr.decode()
        return done

    return run


def made_noise(
    n_samples: int, seed: int, *, white: float = 0.0, flicker: float = 0.0, walk: float = 0.0, quantization: float = 0.0
) -> FloatArray:
    """Noise of known unit-sample coefficients."""
    generator = np.random.default_rng(seed)
    strengths = {"white": white, "flicker": flicker, "walk": walk, "quantization": quantization}
    total = np.zeros(n_samples)
    for role, strength in strengths.items():
        if strength:
            total += strength * BY_ROLE[role].generate(n_samples, generator)
    return total


@pytest.fixture
def noise() -> Callable[..., FloatArray]:
    """Noise of known unit-sample coefficients: noise(n_samples, seed, white=..., flicker=..., walk=...)."""
    return made_noise


def write_table(path: Path, columns: dict[str, Sequence[object]], delimiter: str = ",") -> Path:
    """Write columns as delimited text with a head."""
    lines = [delimiter.join(columns)]
    lines += [delimiter.join(map(str, row)) for row in zip(*columns.values(), strict=True)]
    path.write_text("\n".join(lines) + "\n")
    return path


@pytest.fixture
def table() -> Callable[..., Path]:
    """Write columns as delimited text: table(path, {"a": [...], ...}, delimiter=",")."""
    return write_table
