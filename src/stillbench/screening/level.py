"""The slow course of a log, from medians that a few odd samples do not move."""

import itertools

import numpy as np

from stillbench.foundation.arrays import FloatArray

BLOCK = 64


def level_of(values: FloatArray) -> FloatArray:
    """Return the slow course of one run: medians of 64 samples, joined by straight lines; shape (n,)."""
    block = min(BLOCK, max(8, values.size // 8))
    count = max(1, values.size // block)
    edges = np.linspace(0, values.size, count + 1).astype(int)
    if (np.diff(edges) == block).all():
        medians = np.nanmedian(values.reshape(count, block), axis=1)
    else:
        medians = np.array([np.nanmedian(values[a:b]) for a, b in itertools.pairwise(edges)])
    return np.interp(np.arange(values.size), (edges[:-1] + edges[1:] - 1) / 2.0, medians)
