"""No file is ever seen half-written, whichever step fails."""

import errno
import os
from pathlib import Path

import pytest

from stillbench.foundation.errors import OutputError
from stillbench.foundation.files import write_whole


def test_written_whole(tmp_path: Path) -> None:
    files = {tmp_path / "a" / "one": b"1", tmp_path / "a" / "two": b"22"}
    write_whole(files)
    assert {path: path.read_bytes() for path in (tmp_path / "a").iterdir()} == files
    write_whole({tmp_path / "a" / "one": b"new"})
    assert (tmp_path / "a" / "one").read_bytes() == b"new"


@pytest.mark.parametrize("step", ["fsync", "replace"])
@pytest.mark.parametrize("number", [1, 2, 3])
def test_a_failing_step_leaves_nothing_half_written(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, step: str, number: int
) -> None:
    """The n-th fsync or rename fails: each name holds old or new content whole, and no temporary file is left."""
    old = {tmp_path / name: b"old " + name.encode() for name in ("a", "b", "c")}
    write_whole(old)
    new = {path: b"new content of " + path.name.encode() for path in old}
    calls = 0
    true_fsync, true_replace = os.fsync, Path.replace

    def failing(*arguments: object) -> object:
        nonlocal calls
        calls += 1
        if calls == number:
            raise OSError(errno.EIO, "made to fail")
        return true_fsync(arguments[0]) if step == "fsync" else true_replace(*arguments)  # type: ignore[arg-type, type-var]

    if step == "fsync":
        monkeypatch.setattr(os, "fsync", failing)
    else:
        monkeypatch.setattr(Path, "replace", failing)
    with pytest.raises(OutputError, match="made to fail"):
        write_whole(new)
    assert sorted(path.name for path in tmp_path.iterdir()) == ["a", "b", "c"]
    for path, content in old.items():
        assert path.read_bytes() in (content, new[path])
    if step == "fsync":
        assert all(path.read_bytes() == content for path, content in old.items())
