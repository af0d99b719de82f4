"""The published cases run on the machine, and their outcome stands in every report."""

import json
from pathlib import Path

import pytest
from tests.conftest import Command

from stillbench.selfcheck.cases import Case
from stillbench.selfcheck.run import compute

pytestmark = pytest.mark.installed


def test_every_case_is_reproduced(stillbench: Command) -> None:
    done = stillbench("selfcheck", check=0)
    text = done.stdout.decode()
    assert "DIFFERS" not in text
    assert "2.922319e-01" in text
    last = text.splitlines()[-1].split()
    assert last[0] == last[2]


def test_a_case_that_differs_is_seen() -> None:
    assert not compute(Case("x", "y", "1.234", lambda: 1.236)).agrees
    near = compute(Case("x", "y", "1.234", lambda: 1.2336))
    assert near.agrees
    assert near.matched == 4
    off = compute(Case("x", "y", "1.234e-02", lambda: 0.1234))
    assert (off.agrees, off.matched) == (False, 0)


def test_the_outcome_is_remembered_and_stands_in_the_result(stillbench: Command, tmp_path: Path) -> None:
    (tmp_path / "log.txt").write_text("".join(f"{(7 * i * i) % 101}\n" for i in range(600)))
    flags = ["characterize", "log.txt", "--unit", "V", "--rate", "1", "--json", "-"]
    cache = str(tmp_path / "cache")
    for _ in range(2):
        result = json.loads(stillbench(*flags, check=0, XDG_CACHE_HOME=cache).stdout)
        assert "cases reproduced in the digits printed" in result["provenance"]["selfcheck"]
    (kept,) = (tmp_path / "cache" / "stillbench").iterdir()
    assert kept.name.startswith("selfcheck-")
    kept.write_text("not json")
    assert stillbench(*flags, XDG_CACHE_HOME=cache).returncode == 0
    assert stillbench(*flags, XDG_CACHE_HOME="/proc/nowhere").returncode == 0
