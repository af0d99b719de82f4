"""Files are written whole or not at all: whatever step fails, in whatever order."""

import os
import tempfile
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from stillbench.foundation import files
from stillbench.foundation.errors import OutputError
from stillbench.foundation.files import write_whole

OLD = {"report.html": b"old report", "result.json": b"old result", "curve.csv": b"old curve"}
NEW = {name: content.replace(b"old", b"new") * 1_000 for name, content in OLD.items()}


class Broken:
    """Counts the steps that reach the disk and lets the n-th of them fail."""

    def __init__(self, monkeypatch: pytest.MonkeyPatch, fails: int) -> None:
        self.count, self.fails = 0, fails
        for owner, name in ((os, "fsync"), (tempfile, "mkstemp"), (Path, "replace"), (os, "fdopen"), (Path, "chmod")):
            monkeypatch.setattr(owner, name, self._counted(getattr(owner, name)))

    def _counted(self, step: Callable[..., Any]) -> Callable[..., Any]:
        def counted(*arguments: Any, **named: Any) -> Any:
            self.count += 1
            if self.count == self.fails:
                raise OSError(28, "No space left on device")
            return step(*arguments, **named)

        return counted


def contents(folder: Path) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in folder.iterdir()}


@pytest.mark.filterwarnings("ignore::pytest.PytestUnraisableExceptionWarning")  # a descriptor whose fdopen failed
def test_whichever_step_fails(tmp_path: Path) -> None:
    """Staging: nothing has changed. Renaming: each file is whole, old or new; and nothing else is left."""
    fails, ended = 0, False
    while not ended:
        fails += 1
        folder = tmp_path / str(fails)
        folder.mkdir()
        for name, content in OLD.items():
            (folder / name).write_bytes(content)
        with pytest.MonkeyPatch.context() as patch:
            broken = Broken(patch, fails)
            try:
                write_whole({folder / name: content for name, content in NEW.items()})
            except OutputError as error:
                assert "No space left" in error.message
            ended = broken.count < fails
        found = contents(folder)
        assert set(found) == set(OLD)
        assert all(found[name] in (OLD[name], NEW[name]) for name in OLD)
        if fails <= 12:  # mkstemp, fdopen, fsync and chmod of three files
            assert found == OLD
    assert fails > 15
    assert contents(tmp_path / str(fails)) == NEW


def test_what_a_killed_run_left_is_swept_away(tmp_path: Path) -> None:
    done = os.fork()
    if done == 0:
        os._exit(0)
    os.waitpid(done, 0)
    dead = tmp_path / f".result.json.{done}.abc.part"
    alive = tmp_path / f".result.json.{os.getpid()}.abc.part"
    other = tmp_path / f".other.json.{done}.abc.part"
    for path in (dead, alive, other):
        path.write_bytes(b"half")
    write_whole({tmp_path / "result.json": b"whole"})
    assert not dead.exists()
    assert alive.exists()
    assert other.exists()
    assert files.PART == ".part"
