"""Overlapping Allan deviation, pooled over runs, from one running sum of the log."""

import mmap
import os
from collections.abc import Sequence
from contextlib import ExitStack, suppress

import numpy as np

from stillbench.deviation.averaging import averaging_factors
from stillbench.deviation.kernel import CHUNK, chunk_sums, helper
from stillbench.foundation.arrays import FloatArray, IntArray
from stillbench.foundation.errors import RecordTooShortError
from stillbench.foundation.progress import SILENT, Progress
from stillbench.foundation.scratch import LARGE, blocks, scratch_file
from stillbench.vocabulary.deviation_curve import DeviationCurve
from stillbench.vocabulary.record import Record

HELPED_FROM = 1 << 21
"""Samples of a run from which a second process is worth its start (a tenth of a second)."""


def _angle(rate: FloatArray, angle: FloatArray) -> None:
    """Put the running sum of the mean-free rate, both ends of every sample, into ``angle``, shape (n+1,)."""
    rate = np.asarray(rate)
    angle[0] = 0.0
    # Offset first: a value of the log itself, so that this subtraction is exact; then the small mean that is left.
    np.subtract(rate, rate[rate.size // 2], out=angle[1:], dtype=np.float64)
    total = 0.0
    for part in blocks(rate.size):
        total += float(angle[1:][part].sum())
    mean, last = total / rate.size, 0.0
    for part in blocks(rate.size):
        block = angle[1:][part]
        block -= mean
        np.cumsum(block, out=block)
        block += last
        last = float(block[-1])


def _sums_of_squares(
    rate: FloatArray, factors: IntArray, progress: Progress, done: float, share: float, processes: int
) -> FloatArray:
    """Sum of squared second differences of the angle of one run at each averaging factor.

    Chunks are the same whatever the number of processes, and are added in their order: so are the bits of the result.
    """
    from threadpoolctl import threadpool_limits  # noqa: PLC0415  wanted only where a curve is computed

    helped = processes > 1 and rate.size >= HELPED_FROM
    angle, descriptor = _angle_room(rate.size + 1, shared=helped)
    ladder = factors.tolist()
    most = angle.size - 2 * ladder[0]
    starts = range(0, most, CHUNK)
    parts: dict[int, FloatArray] = {}
    with threadpool_limits(1), ExitStack() as stack:
        process = None
        if descriptor is not None:
            stack.callback(os.close, descriptor)
        if descriptor is not None and helped:
            process = stack.enter_context(helper(descriptor, ladder))
        _angle(rate, angle)
        if process is not None and process.stdin and process.stdout:
            with suppress(OSError):
                process.stdin.write(f"{CHUNK} {most} {2 * CHUNK}\n".encode())
                process.stdin.flush()
        for start in starts[:: 2 if process else 1]:
            parts[start] = chunk_sums(angle, ladder, start)
            progress.step(done + share * (start + CHUNK) / (most + CHUNK))
        for start in starts[1::2] if process else ():
            found = process.stdout.read(8 * len(ladder)) if process and process.stdout else b""
            whole = len(found) == 8 * len(ladder)  # a helper that was killed leaves its chunks to us
            parts[start] = np.frombuffer(found) if whole else chunk_sums(angle, ladder, start)
    sums = np.zeros(factors.size)
    for start in starts:
        sums += parts[start]
    progress.step(done + share)
    return sums


def _angle_room(count: int, *, shared: bool) -> tuple[FloatArray, int | None]:
    """Room for the angle and, where another process is to see it, its descriptor: in memory, or in a scratch file."""
    if count >= LARGE:
        descriptor = scratch_file(count)
    elif shared and hasattr(os, "memfd_create"):
        descriptor = os.memfd_create("angle")
        os.ftruncate(descriptor, 8 * count)
    else:
        return np.empty(count), None
    return np.frombuffer(mmap.mmap(descriptor, 8 * count), dtype=np.float64), descriptor


def usable_processes() -> int:
    """Return how many processes the curve uses by default: two where this process may run on two processors."""
    affinity = getattr(os, "sched_getaffinity", None)
    return min(2, len(affinity(0)) if affinity else (os.cpu_count() or 1))


def pooled_deviation(
    pieces: Sequence[FloatArray], factors: IntArray, progress: Progress = SILENT, processes: int | None = None
) -> tuple[FloatArray, IntArray]:
    """Return the overlapping Allan deviation of several runs, and the number of pairs, at each averaging factor.

    A window never crosses a gap: each run contributes its own second differences, M is their sum.

    Parameters
    ----------
    pieces : sequence of (n,) arrays
        Evenly spaced rates of each run.
    factors : (k,) int array
        Increasing averaging factors, samples.
    progress : Progress
        Told the fraction done.
    processes : int, optional
        One, or two (on long runs; by default where there are two processors); the result does not depend on it.

    Returns
    -------
    deviation : (k,) float array
        In the unit of the rates; NaN where no run is long enough.
    pairs : (k,) int array

    References
    ----------
    Riley, NIST SP 1065 (2008), overlapping Allan variance:
    sigma^2(m) = 1/(2 tau^2 M) sum (x[i+2m] - 2 x[i+m] + x[i])^2, M = n - 2m + 1 (equation from memory).
    """
    sums = np.zeros(factors.size)
    pairs = np.zeros(factors.size, dtype=np.int64)
    total = sum(piece.size for piece in pieces)
    done = 0.0
    for piece in pieces:
        usable = factors[2 * factors <= piece.size]
        if usable.size:
            share = piece.size / total
            sums[: usable.size] += _sums_of_squares(
                piece, usable, progress, done, share, usable_processes() if processes is None else processes
            )
            pairs[: usable.size] += piece.size - 2 * usable + 1
            done += share
    with np.errstate(invalid="ignore", divide="ignore"):
        deviation = np.sqrt(sums / (2.0 * pairs)) / factors
    return deviation, pairs


def overlapping_deviation(rate: FloatArray, *, sample_interval: float, factor: int) -> float:
    """Return the overlapping Allan deviation of evenly spaced rates at one averaging factor.

    Parameters
    ----------
    rate : (n,) array
        Any unit.
    sample_interval : float
        s; the deviation of rates does not depend on it, the averaging time factor * sample_interval does.
    factor : int
        Averaging factor, samples.

    Raises
    ------
    RecordTooShortError
        When there are fewer than 2 * factor samples.
    """
    if np.size(rate) < 2 * factor:
        raise RecordTooShortError(np.size(rate), 2 * factor, f"an averaging time of {factor * sample_interval:g} s")
    return float(pooled_deviation([rate], np.array([factor]))[0][0])


def estimate_deviation(record: Record, factors: IntArray | None = None, progress: Progress = SILENT) -> DeviationCurve:
    """Return the overlapping Allan deviation of a record, without intervals: those need a model.

    Parameters
    ----------
    record : Record
        Finite everywhere (screened).
    factors : (k,) int array, optional
        Averaging factors; 1 sample to a third of the longest run, 20 a decade, by default.
    """
    longest = max(run.n_samples for run in record.runs)
    factors = averaging_factors(longest) if factors is None else factors
    factors = factors[2 * factors <= longest]
    deviation, pairs = pooled_deviation(record.pieces(), factors, progress)
    tau = factors.astype(np.float64) * record.sample_interval
    total = record.n_samples
    classical = 1.0 / np.sqrt(2.0 * np.maximum(total / factors - 1.0, 0.5))
    return DeviationCurve(tau, deviation, pairs, classical)
