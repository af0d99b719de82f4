"""Missing samples filled by a conditional random draw, so that a lost row neither splits the night nor smooths it.

Near a hole the noise is taken as white noise plus a random walk, with the two strengths read from the differences of the
log over one and two samples. Given the samples on both sides, the missing ones are Gaussian; one draw of them is taken.

Where more than a sample in a thousand is missing, the neighbours alone would copy their slow noise into the holes and raise
the spectrum at low frequencies. The draw is then refined over the whole run by data augmentation: with the spectrum of the
filled log split into a white part and the rest, the slow course given all samples is drawn in the cosine basis, then the
missing samples given the slow course, a few times over (M. A. Tanner and W. H. Wong, J. Am. Stat. Assoc. 82 (1987) 528).
"""

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray
from stillbench.foundation.scratch import blocks, large_array
from stillbench.likelihood.bins import cosine_transform
from stillbench.likelihood.whitened import smooth_spectrum
from stillbench.vocabulary.record import Record

REACH = 24
"""Samples on each side that a draw is conditioned on."""
SEED = 52_711
REFINED_SHARE = 1e-3
SHORTEST_REFINED = 512
LONGEST_REFINED = 1 << 24
"""Samples drawn together; longer runs are gone through in such parts."""
SWEEPS = 6
WHITE_SHARE = 0.9
"""Of the lowest power of the spectrum that is taken as white: the rest is course."""


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
    """Return the values with every missing sample drawn at random given its neighbours; shape (n,), not a copy if none is.

    The draw has a fixed seed: the same log gives the same numbers.
    """
    if not record.missing.any():
        return record.values
    filled = large_array(record.values.size)
    filled[:] = record.values
    generator = np.random.default_rng(SEED)
    white, walk = local_strengths(record.pieces())
    white = max(white, np.finfo(float).tiny)
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
        if np.count_nonzero(absent) > REFINED_SHARE * absent.size and absent.size >= SHORTEST_REFINED:
            for part in blocks(absent.size, LONGEST_REFINED):
                if absent[part].any() and part.stop - part.start >= SHORTEST_REFINED:
                    _refine(piece[part], absent[part], generator)
    return filled


def _refine(piece: FloatArray, absent: BoolArray, generator: np.random.Generator) -> None:
    """Draw the missing samples of one run again, given all others and the spectrum of the run, in place."""
    from scipy import fft  # noqa: PLC0415  heavy imports stay inside functions

    for _ in range(SWEEPS):
        mean = float(piece.mean())
        transform = cosine_transform(piece)
        spectrum = smooth_spectrum(transform, piece.size)
        white = WHITE_SHARE * float(spectrum.min())
        gain = 1.0 - white / spectrum
        slow = gain * transform + np.sqrt(white * gain) * generator.standard_normal(transform.size)
        course = mean + fft.idct(np.concatenate([[0.0], slow]), type=2, norm="ortho")
        piece[absent] = course[absent] + np.sqrt(white) * generator.standard_normal(np.count_nonzero(absent))
