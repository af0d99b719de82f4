"""The slow course of a log, from medians that a few odd samples do not move."""

import numpy as np

from stillbench.foundation.arrays import FloatArray, IntArray
from stillbench.foundation.scratch import blocks

BLOCK = 64
STRETCH = 4_096
"""Blocks handled at a time, so that they stay in the cache."""


def row_medians(rows: FloatArray) -> FloatArray:
    """Return the median of each row of ``rows``, shape (n, k) to (n,), NaN left out; NaN where a row holds nothing else."""
    ordered = np.sort(rows, axis=1)  # NaN last
    length = rows.shape[1]
    if not np.isnan(ordered[:, -1]).any():
        return np.asarray((ordered[:, (length - 1) // 2] + ordered[:, length // 2]) / 2.0)
    known = length - np.isnan(ordered).sum(axis=1)
    row = np.arange(rows.shape[0])
    low = ordered[row, np.maximum(known - 1, 0) // 2]
    high = ordered[row, np.minimum(known // 2, length - 1)]
    return np.asarray(np.where(known > 0, (low + high) / 2.0, np.nan))


def _medians(values: FloatArray, starts: IntArray, length: int) -> FloatArray:
    """Median of ``length`` samples from each start."""
    medians = np.empty(starts.size)
    for first in range(0, starts.size, STRETCH):
        some = starts[first : first + STRETCH]
        medians[first : first + STRETCH] = row_medians(values[some[:, None] + np.arange(length)])
    return medians


def take_level_off(values: FloatArray, residual: FloatArray) -> None:
    """Put into ``residual`` (n,) the samples of one run (n,) less its slow course: medians of 64 samples, joined by straight lines."""
    block = min(BLOCK, max(8, values.size // 8))
    count = max(1, values.size // block)
    edges = np.linspace(0, values.size, count + 1).astype(np.int64)
    lengths = np.diff(edges)
    medians = np.empty(count)
    for length in np.unique(lengths):  # two neighbouring lengths at most
        own = lengths == length
        medians[own] = _medians(values, edges[:-1][own], int(length))
    middles = (edges[:-1] + edges[1:] - 1) / 2.0
    for part in blocks(values.size):
        np.subtract(values[part], np.interp(np.arange(part.start, part.stop), middles, medians), out=residual[part])
