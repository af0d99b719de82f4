"""Arrays in nameless files: nothing is left behind, and a folder without room is said in one line."""

import os
from pathlib import Path

import numpy as np
import pytest

from stillbench.foundation import scratch
from stillbench.foundation.errors import OutputError


def test_a_large_array_lies_in_a_file_without_a_name(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(scratch, "LARGE", 1_000)
    before = len(list(Path("/proc/self/fd").iterdir()))
    with scratch.scratch_in(tmp_path):
        array = scratch.large_array(5_000)
    array[:] = np.arange(5_000)
    assert array.sum() == 5_000 * 4_999 / 2
    assert not list(tmp_path.iterdir())
    assert str(tmp_path) in Path("/proc/self/maps").read_text()
    del array
    assert len(list(Path("/proc/self/fd").iterdir())) <= before
    assert str(tmp_path) not in Path("/proc/self/maps").read_text()


def test_no_room(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(scratch, "LARGE", 1_000)

    def full(*_: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "posix_fallocate", full)
    with scratch.scratch_in(tmp_path), pytest.raises(OutputError, match=r"No space left on device.*--scratch"):
        scratch.large_array(5_000)
    assert not list(tmp_path.iterdir())


def test_a_folder_that_is_not_there(tmp_path: Path) -> None:
    with scratch.scratch_in(tmp_path / "none"), pytest.raises(OutputError, match="--scratch"):
        scratch.scratch_file(10)


def test_stretches_spread_over_a_long_record() -> None:
    values = np.arange(1_000_000.0)
    assert scratch.spread(values, 2_000_000) is values
    some = scratch.spread(values, 6_400)
    assert some.size == 6_400
    assert some[0] == 0
    assert some[-1] == 999_999
    assert np.count_nonzero(np.diff(some) == 1) == 6_400 - 64
