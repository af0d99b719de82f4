"""Overlapping Allan deviation, pooled over runs, in blocks that stay in the cache."""

import os
from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor

import numpy as np

from stillbench.deviation.averaging import averaging_factors
from stillbench.foundation.arrays import FloatArray, IntArray
from stillbench.foundation.errors import RecordTooShortError
from stillbench.foundation.progress import SILENT, Progress
from stillbench.vocabulary.deviation_curve import DeviationCurve
from stillbench.vocabulary.record import Record

BLOCK = 65_536
"""Second differences handled at a time; the block, its buffer and the slices it reads fit a second-level cache of 2 MiB.
Shorter blocks make two threads slower than one: each operation is then over before the interpreter lock changes hands."""
CHUNK = 1 << 19
MOST_THREADS = 4


def _angle(rate: FloatArray) -> FloatArray:
    """Return the running sum of the mean-free rate, both ends of every sample, shape (n+1,), float64 whatever came in."""
    rate = np.asarray(rate)
    angle = np.empty(rate.size + 1)
    angle[0] = 0.0
    # Offset first: a value of the log itself, so that this subtraction is exact; then the small mean that is left.
    np.subtract(rate, rate[rate.size // 2], out=angle[1:], dtype=np.float64)
    angle[1:] -= angle[1:].mean()
    np.cumsum(angle[1:], out=angle[1:])
    return angle


def _chunk_sums(angle: FloatArray, factors: IntArray, begin: int, end: int) -> FloatArray:
    """Sum of squared second differences that start in ``begin`` to ``end``, for each factor, in blocks, all factors inside."""
    sums = np.zeros(factors.size)
    buffer = np.empty(BLOCK)
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


def _sums_of_squares(
    angle: FloatArray, factors: IntArray, progress: Progress, done: float, share: float, threads: int
) -> FloatArray:
    """Sum of squared second differences of ``angle`` at each averaging factor.

    Chunks are the same whatever the number of threads, and are added in their order: so are the bits of the result.
    """
    most = angle.size - 2 * int(factors[0])
    begins = range(0, most, CHUNK)

    def work(begin: int) -> FloatArray:
        return _chunk_sums(angle, factors, begin, min(begin + CHUNK, most))

    sums = np.zeros(factors.size)
    with ThreadPoolExecutor(max_workers=threads) as pool:
        parts = pool.map(work, begins) if threads > 1 and len(begins) > 1 else map(work, begins)
        for begin, part in zip(begins, parts, strict=True):
            sums += part
            progress.step(done + share * min(1.0, (begin + CHUNK) / most))
    return sums


def usable_threads() -> int:
    """Return how many threads the curve uses by default: the processors this process may run on, at most four."""
    affinity = getattr(os, "sched_getaffinity", None)
    return min(MOST_THREADS, len(affinity(0)) if affinity else (os.cpu_count() or 1))


def pooled_deviation(
    pieces: Sequence[FloatArray], factors: IntArray, progress: Progress = SILENT, threads: int | None = None
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
    threads : int, optional
        As many as there are processors by default; the result does not depend on it.

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
                _angle(piece), usable, progress, done, share, usable_threads() if threads is None else threads
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
