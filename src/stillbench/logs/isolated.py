"""Tables read by a child process with limits on memory and time, because the library crashes on some damaged files."""

import json
import subprocess
import sys
import tempfile
import threading
from collections.abc import Sequence
from pathlib import Path
from typing import IO, Any

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.errors import LogError
from stillbench.foundation.scratch import large_array
from stillbench.foundation.suggestions import listed
from stillbench.logs.arrays import MOST_CHANNELS
from stillbench.logs.contents import Contents
from stillbench.logs.formats import missing_library
from stillbench.logs.table import Table
from stillbench.vocabulary.log_sheet import LogSection

KINDS = {"hdf5": "HDF5", "mat": "MAT"}
BASE_MEMORY = 1 << 30
BYTES_A_SECOND = 20 << 20
BASE_SECONDS = 9
"""A listing that takes longer is given up."""


class _Child:
    """The process that reads; killed with its time, or when it is let go."""

    def __init__(self, kind: str, path: Path, name: str, size: int) -> None:
        self._name, self._kind = name, KINDS[kind]
        self._process = subprocess.Popen(  # noqa: S603  our own interpreter and file
            [sys.executable, "-P", str(Path(__file__).with_name("isolated_child.py"))],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.DEVNULL,
        )
        self.seconds = BASE_SECONDS + 40 * size // BYTES_A_SECOND
        task = {
            "kind": kind,
            "path": str(path),
            "bytes": size,
            "memory": BASE_MEMORY + 64 * size,
            "seconds": self.seconds,
        }
        try:
            self.answer = self._ask(task)
        except BaseException:
            self.close()
            raise

    def _pipe(self, which: IO[bytes] | None) -> IO[bytes]:
        if which is None:
            raise TypeError(which)
        return which

    def _ask(self, task: Any) -> dict[str, Any]:  # noqa: ANN401  JSON
        line = self._line(task)
        try:
            answer = json.loads(line)
        except ValueError:
            answer = {}
        if not isinstance(answer, dict) or not answer:
            raise self._gave_up()
        if "error" in answer:
            raise self._damaged(answer["error"])
        return answer

    def _line(self, task: Any) -> bytes:  # noqa: ANN401  JSON
        timer = threading.Timer(self.seconds + 1.0, self._process.kill)
        timer.start()
        try:
            stream = self._pipe(self._process.stdin)
            stream.write(json.dumps(task).encode() + b"\n")
            stream.flush()
            return self._pipe(self._process.stdout).readline(1 << 22)
        except OSError:
            return b""
        finally:
            timer.cancel()

    def samples(self, path: str, shape: Sequence[int]) -> np.ndarray:
        """Return one dataset as float64."""
        line = self._line(path)
        if not line.strip().isdigit():
            if line.startswith(b"{"):
                raise self._damaged(json.loads(line).get("error", ""))
            raise self._gave_up()
        timer = threading.Timer(self.seconds + 1.0, self._process.kill)
        timer.start()
        try:
            size = int(line)
            if 8 * int(np.prod(shape)) != size:
                raise self._gave_up()
            samples = large_array(size // 8)
            view, stream = samples.view(np.uint8).data, self._pipe(self._process.stdout)
            done = 0
            while done < size and (count := stream.readinto(view[done:])):  # type: ignore[attr-defined]
                done += count
        finally:
            timer.cancel()
        if done < size:
            raise self._gave_up()
        return samples.reshape(shape)

    def close(self) -> None:
        """End the process."""
        self._process.kill()
        self._process.communicate()

    def _damaged(self, reason: str) -> LogError:
        return LogError(
            f"{self._name!r} is damaged or cannot be read ({reason})", f"a whole {self._kind} file", "save it again"
        )

    def _gave_up(self) -> LogError:
        return LogError(
            f"reading {self._name!r} was given up: the library crashed on it, or passed {self.seconds} s or its memory",
            f"a whole {self._kind} file",
            "save it again",
        )


def _wanted(all_sets: list[dict[str, Any]], dataset: str | None, name: str) -> list[dict[str, Any]]:
    """Return the datasets that may be read, or the one asked for."""
    wanted = dataset.strip("/") if dataset else None
    chosen = [entry for entry in all_sets if wanted is None or entry["path"].strip("/") == wanted]
    sets = [entry for entry in chosen if not entry["fault"] and min(entry["shape"]) > 0]
    if sets:
        return sets
    for entry in chosen:
        if entry["fault"]:
            raise LogError(
                f"the dataset {entry['path']!r} of {name!r} {entry['fault']}", "numbers within the file itself"
            )
    known = [entry["path"].strip("/") for entry in all_sets if not entry["fault"]]
    raise LogError(
        f"{name!r} holds no dataset {dataset!r}" if wanted else f"{name!r} holds no numbers",
        "a dataset of numbers",
        f"it holds {listed(known)}" if known else "",
    )


class IsolatedTable(Table):
    """Vectors and tables of numbers that are as long as the longest, by their path."""

    def __init__(self, kind: str, contents: Contents, section: LogSection) -> None:
        self._kind, self._kept = KINDS[kind], None
        path = contents.path
        if path is None:  # it was compressed: the library wants a file
            self._kept = tempfile.NamedTemporaryFile(suffix=f".{kind}")  # noqa: SIM115  it lives as long as the table
            self._kept.write(contents.data)
            self._kept.flush()
            path = Path(self._kept.name)
        self._child = _Child(kind, path, contents.name, len(contents.data))
        try:
            self._choose(contents, section)
        except BaseException:
            self._child.close()
            raise

    def _choose(self, contents: Contents, section: LogSection) -> None:
        if "missing" in self._child.answer:
            raise missing_library(f"{contents.name!r} is an {self._kind} file: reading it", "h5py", "hdf5")
        all_sets = self._child.answer["datasets"]
        sets = _wanted(all_sets, section.dataset, contents.name)
        longest = max(max(entry["shape"]) for entry in sets)
        self._columns: list[tuple[dict[str, Any], int | None]] = []
        heads, units = [], []
        for entry in sets:
            shape = entry["shape"]
            if longest not in shape:
                continue
            base = entry["path"].strip("/")
            one = len(shape) == 1 or 1 in shape
            count = 1 if one else min(shape) if min(shape) <= MOST_CHANNELS else shape[1]
            for i in range(count):
                heads.append(base if one else f"{base}.{i + 1}")
                units.append(entry["unit"] or None)
                self._columns.append((entry, None if one else i))
        super().__init__(heads, f"{self._kind}, {len(heads)} columns", has_heads=True)
        self.units = units
        for entry in sets:
            if entry.get("scaled"):
                self.remarks.append(
                    f"{entry['path']} has {entry['scaled']}, which are not applied: the numbers are those stored"
                )
        refused = [entry for entry in all_sets if entry["fault"]]
        for entry in refused[:5]:
            self.remarks.append(f"{entry['path']} {entry['fault']}: not read")
        self._read: dict[str, np.ndarray] = {}

    def _array(self, index: int) -> FloatArray:
        entry, column = self._columns[index]
        path = entry["path"]
        if path not in self._read:
            samples = self._child.samples(path, entry["shape"])
            turned = column is not None and samples.shape[0] < samples.shape[1] and samples.shape[0] <= MOST_CHANNELS
            samples = samples.T if turned else samples
            self._read = {path: samples}
        samples = self._read[path]
        return np.asarray(samples.ravel() if column is None else samples[:, column])

    def numbers(self, indices: Sequence[int]) -> list[FloatArray]:
        return [np.ascontiguousarray(self._array(index)) for index in indices]

    def texts(self, index: int) -> Sequence[str]:
        return [str(value) for value in self._array(index)]

    def edge_cells(self, index: int, count: int) -> tuple[Sequence[str], Sequence[str]]:
        column = self._array(index)
        return [str(value) for value in column[:count]], [str(value) for value in column[-count:]]

    def first_text(self, index: int) -> str:  # noqa: ARG002  all are numbers
        return "0"

    def close(self) -> None:
        self._child.close()
        if self._kept is not None:
            self._kept.close()
