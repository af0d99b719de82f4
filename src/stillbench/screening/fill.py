"""Missing samples filled by a conditional random draw, so that a lost row neither splits the night nor smooths it.

Near a hole the noise is taken as white noise plus a random walk, with the two strengths read from the differences of the
log over one and two samples. Given the samples on both sides, the missing ones are Gaussian; one draw of them is taken.
"""

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray
from stillbench.vocabulary.record import Record

REACH = 24
"""Samples on each side that a draw is conditioned on."""
SEED = 52_711


def local_strengths(pieces: list[FloatArray]) -> tuple[float, float]:
    """Return the variances of the white noise and of one step of the walk, from differences over 1 and 2 samples.

    E (y[i+1]-y[i])^2/2 = N^2 + K^2/2 and E (y[i+2]-y[i])^2/2 = N^2 + K^2.
    """
    one = float(np.nanmean(np.concatenate([np.diff(piece) ** 2 for piece in pieces]))) / 2.0
    two = float(np.nanmean(np.concatenate([(piece[2:] - piece[:-2]) ** 2 for piece in pieces]))) / 2.0
    walk = max(0.0, 2.0 * (two - one))
    return max(one - walk / 2.0, 1e-12 * one), walk


def _conditional(known: FloatArray, wanted: FloatArray, white: float, walk: float) -> tuple[FloatArray, FloatArray]:
    """Weights of the known samples and a root of the covariance left, for white noise plus walk with unknown level."""
    places = np.concatenate([known, wanted])
    origin = places.min()
    covariance = walk * np.minimum.outer(places - origin, places - origin) + 1e6 * (white + walk)
    covariance[np.diag_indices_from(covariance)] += white
    n = known.size
    weights = np.linalg.solve(covariance[:n, :n], covariance[:n, n:]).T
    left = covariance[n:, n:] - weights @ covariance[:n, n:]
    values, vectors = np.linalg.eigh((left + left.T) / 2.0)
    return weights, vectors * np.sqrt(np.maximum(values, 0.0))


def _holes(missing: BoolArray) -> list[tuple[int, int]]:
    padded = np.concatenate([[False], missing, [False]])
    edges = np.flatnonzero(padded[1:] != padded[:-1])
    return list(zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True))


def fill_holes(record: Record) -> FloatArray:
    """Return the values with every missing sample drawn at random given its neighbours; shape (n,).

    The draw has a fixed seed: the same log gives the same numbers.
    """
    filled = record.values.copy()
    if not record.missing.any():
        return filled
    generator = np.random.default_rng(SEED)
    white, walk = local_strengths(record.pieces())
    cache: dict[int, tuple[FloatArray, FloatArray]] = {}
    for run in record.runs:
        piece = filled[run.first : run.last]
        absent = record.missing[run.first : run.last]
        for first, last in _holes(absent):
            low, high = max(0, first - REACH), min(piece.size, last + REACH)
            places = np.concatenate([np.arange(low, first), np.arange(last, high)])
            alone = first - low == REACH == high - last and not absent[places].any()
            wanted = np.arange(first, last, dtype=float)
            if alone and last - first in cache:
                weights, root = cache[last - first]
            else:
                places = places[~np.isnan(piece[places])]
                weights, root = _conditional(places.astype(float), wanted, white, walk)
                if alone:
                    cache[last - first] = weights, root
            level = piece[places].mean()
            drawn = root @ generator.standard_normal(last - first)
            piece[first:last] = level + weights @ (piece[places] - level) + drawn
    return filled
