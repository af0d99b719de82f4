"""Large arrays in files of the scratch folder, so that a log may be larger than memory.

The files have no name: they are gone with the process, however it ends, and nothing is left to be cleaned.
"""

import mmap
import os
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from contextvars import ContextVar
from pathlib import Path

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.errors import OutputError

LARGE = 1 << 26
"""Numbers from which an array lies in a file (half a gigabyte)."""
BLOCK = 1 << 20
"""Numbers handled at a time where a whole array is gone through."""

_folder: ContextVar[Path | None] = ContextVar("scratch", default=None)


@contextmanager
def scratch_in(folder: Path | None) -> Iterator[None]:
    """Put the scratch files of this context into a folder; the system's folder for such files by default."""
    token = _folder.set(folder)
    try:
        yield
    finally:
        _folder.reset(token)


def scratch_file(count: int) -> int:
    """Return the descriptor of a nameless file with room for ``count`` numbers, reserved on the disk.

    Raises
    ------
    OutputError
        When there is no room for it.
    """
    folder = _folder.get()
    try:
        with tempfile.TemporaryFile(dir=folder) as file:
            descriptor = os.dup(file.fileno())
    except OSError as error:
        raise _no_room(folder, 8 * count, error) from error
    try:
        if hasattr(os, "posix_fallocate"):
            os.posix_fallocate(descriptor, 0, 8 * count)
        else:
            os.truncate(descriptor, 8 * count)
    except OSError as error:
        os.close(descriptor)
        raise _no_room(folder, 8 * count, error) from error
    return descriptor


def _no_room(folder: Path | None, size: int, error: OSError) -> OutputError:
    where = str(folder) if folder is not None else tempfile.gettempdir()
    return OutputError(
        f"the scratch folder {where!r} cannot take {size / 2**30:.1f} GiB ({error.strerror or error})",
        "room for the log as 64-bit numbers, three times over",
        "name another folder with --scratch",
    )


def large_array(count: int) -> FloatArray:
    """Return an array of ``count`` float64 numbers, not set: in memory, or in a scratch file where it is large."""
    if count < LARGE:
        return np.empty(count)
    descriptor = scratch_file(count)
    try:
        return np.frombuffer(mmap.mmap(descriptor, 8 * count), dtype=np.float64)
    finally:
        os.close(descriptor)


def blocks(count: int, size: int = BLOCK) -> Iterator[slice]:
    """Slices that go through ``count`` items."""
    for first in range(0, count, size):
        yield slice(first, min(first + size, count))


def spread(values: FloatArray, most: int) -> FloatArray:
    """Return the values, or where there are more than ``most``, stretches of them spread evenly that make about as many."""
    if values.size <= most:
        return values
    stretch = max(1, most // 64)
    starts = np.linspace(0, values.size - stretch, 64).astype(np.int64)
    return np.concatenate([values[start : start + stretch] for start in starts])
