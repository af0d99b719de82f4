"""Sums of squared second differences, in blocks that stay in the cache: here, and in a helper process on the same memory.

Two threads gain little in this loop of short operations: the interpreter lock changes hands between each. So on a long run a helper process takes every other chunk. It is
this file run as a program; it needs numpy only, and reads the angle where the caller keeps it, without a copy.
"""

import mmap
import os
import subprocess
import sys
from collections.abc import Iterator  # noqa: TC003  plain types here: this file is run alone, too
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import numpy as np

BLOCK = 65_536
"""Second differences handled at a time; the block, its buffer and the slices it reads fit a second-level cache of 2 MiB."""
CHUNK = 1 << 19


def chunk_sums(angle: "np.ndarray[Any, Any]", factors: "list[int]", begin: int) -> "np.ndarray[Any, Any]":
    """Return the sum of squared second differences that start in one chunk, for each factor, all factors block by block.

    Parameters
    ----------
    angle : (n + 1,) float array
    factors : list of ``k`` int
        Increasing.
    begin : int
        First start of the chunk.

    Returns
    -------
    (k,) float array
    """
    sums = np.zeros(len(factors))
    buffer = np.empty(BLOCK)
    end = min(begin + CHUNK, angle.size - 2 * factors[0])
    for first in range(begin, end, BLOCK):
        stop = min(first + BLOCK, end)
        for i, factor in enumerate(factors):
            last = min(stop, angle.size - 2 * factor)
            if last <= first:
                break  # factors increase, so no longer one has pairs here either
            difference = buffer[: last - first]
            middle = angle[first + factor : last + factor]
            np.subtract(angle[first + 2 * factor : last + 2 * factor], middle, out=difference)
            difference -= middle
            difference += angle[first:last]
            sums[i] += difference @ difference
    return sums


@contextmanager
def helper(descriptor: int, factors: "list[int]") -> "Iterator[subprocess.Popen[bytes] | None]":
    """Start a helper process; None where it cannot be started. It waits for one line with the chunks that it is to do."""
    single = dict.fromkeys(("OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "OMP_NUM_THREADS"), "1")
    command = [sys.executable, "-P", str(Path(__file__)), str(descriptor), *map(str, factors)]
    try:
        process = subprocess.Popen(  # noqa: S603  our own interpreter and file
            command,
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.DEVNULL,
            pass_fds=[descriptor],
            env={**os.environ, **single},
        )
    except OSError:
        yield None
        return
    try:
        yield process
    finally:
        process.kill()
        process.communicate()


def main(arguments: "list[str]") -> None:
    """Do what the line on standard input says: first start, stop and step of chunks; write their sums as bytes."""
    descriptor, *factors = map(int, arguments)
    begin, stop, step = map(int, sys.stdin.readline().split())
    with mmap.mmap(descriptor, 0, access=mmap.ACCESS_READ) as memory:
        angle = np.frombuffer(memory, dtype=np.float64)
        for start in range(begin, stop, step):
            sys.stdout.buffer.write(chunk_sums(angle, factors, start).tobytes())
            sys.stdout.buffer.flush()
        del angle


if __name__ == "__main__":
    main(sys.argv[1:])
