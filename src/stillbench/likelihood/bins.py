"""From runs of a log to binned powers of their cosine transforms.

For a mean plus white noise plus a random walk the vectors of the orthonormal DCT-II are exactly the eigenvectors of the
covariance once the mean is removed, so their squares are independent and the likelihood below is the exact restricted
one. For flicker noise the largest correlation between coefficients is 0.12, at the lowest of them only.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray, IntArray
from stillbench.terms.base import Fluctuation, MeanShape

SINGLES = 32
"""The lowest coefficients stand alone."""

PER_DECADE = 24
"""Bins a decade above; the loss of information is below 0.1 %."""

SHAPE_REACH = 65_536
"""Coefficients of a mean shape beyond this one are taken as zero (they fall as k^-2)."""

QUADRATURE_FROM = 64
"""Bins with at least this many coefficients have their mean basis by quadrature in place of a sum."""

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(8)


@dataclass(frozen=True)
class BinnedPowers:
    """Binned powers of the cosine transforms of all runs, unit samples.

    Attributes
    ----------
    frequency : (j,) float array
        Mean frequency, cycles per sample.
    dof : (j,) float array
        Coefficients in the bin.
    power : (j,) float array
        Mean square of the coefficients.
    basis : (j, a) float array
        Mean square expected for unit coefficient of each term.
    cross : (j, r) float array
        Mean product of coefficient and regressor.
    gram : (j, r, r) float array
        Mean product of regressors.
    roles, shapes : tuple of str
        Names of the ``a`` terms and ``r`` regressors.
    """

    frequency: FloatArray
    dof: FloatArray
    power: FloatArray
    basis: FloatArray
    cross: FloatArray
    gram: FloatArray
    roles: tuple[str, ...]
    shapes: tuple[str, ...]

    def below(self, frequency: float) -> "BinnedPowers":
        """Return the bins up to ``frequency`` (cycles per sample)."""
        return self.chosen(self.frequency <= frequency)

    def chosen(self, which: BoolArray) -> "BinnedPowers":
        """Return some of the bins."""
        return BinnedPowers(
            self.frequency[which],
            self.dof[which],
            self.power[which],
            self.basis[which],
            self.cross[which],
            self.gram[which],
            self.roles,
            self.shapes,
        )


def cosine_transform(values: FloatArray) -> FloatArray:
    """Return coefficients 1 to n-1 of the orthonormal DCT-II of one run, shape (n-1,); the mean (k = 0) is dropped.

    References
    ----------
    X_k = sqrt(2/n) sum_j y_j cos(pi k (j + 1/2)/n): G. Strang, "The discrete cosine transform", SIAM Review 41 (1999) 135.
    """
    from scipy import fft  # noqa: PLC0415  heavy imports stay inside functions

    # A constant near the data is taken off exactly first, so that a large offset costs no digits.
    level = values - values[values.size // 2]
    level -= level.mean()
    return np.asarray(fft.dct(level, type=2, norm="ortho", overwrite_x=True)[1:])


def bin_starts(n_samples: int) -> IntArray:
    """Return the first coefficient k of each bin and, last, n: singles up to 32, then 24 a decade."""
    singles = np.arange(1, min(SINGLES, n_samples - 1) + 1)
    if n_samples - 1 <= SINGLES:
        return np.append(singles, n_samples)
    count = max(1, round(PER_DECADE * np.log10((n_samples - 1) / SINGLES)))
    edges = np.rint(np.geomspace(SINGLES + 1, n_samples, count + 1)).astype(np.int64)
    return np.unique(np.concatenate([singles, edges]))


def _bin_means(term: Fluctuation, starts: IntArray, n_samples: int) -> FloatArray:
    """Mean of the expected power of ``term`` over the coefficients of each bin."""
    means = np.empty(starts.size - 1)
    widths = np.diff(starts)
    wide = widths >= QUADRATURE_FROM
    if wide.any():
        # The sum over k is an integral from k0 - 1/2 to k1 - 1/2 of a function smooth on the scale of the bin.
        first, last = starts[:-1][wide] - 0.5, starts[1:][wide] - 0.5
        middle, half = (first + last) / 2.0, (last - first) / 2.0
        nodes = middle[:, None] + half[:, None] * _NODES
        means[wide] = term.cosine_power(nodes, n_samples) @ _WEIGHTS / 2.0
    narrow = np.flatnonzero(~wide)
    if narrow.size:
        stop = int(starts[narrow[-1] + 1])
        each = term.cosine_power(np.arange(1, stop, dtype=float), n_samples)
        sums = np.add.reduceat(each, starts[: narrow[-1] + 1] - 1)
        means[narrow] = sums[narrow] / widths[narrow]
    return means


def bin_run(values: FloatArray, terms: Sequence[Fluctuation], shapes: Sequence[MeanShape]) -> BinnedPowers:
    """Transform and bin one run.

    Parameters
    ----------
    values : (n,) float array
        Rates, finite, n >= 2.
    terms, shapes
        Whose expected powers and transforms are wanted.

    Returns
    -------
    BinnedPowers
    """
    n_samples = values.size
    starts = bin_starts(n_samples)
    dof = np.diff(starts).astype(float)
    transform = cosine_transform(values)
    offsets = starts[:-1] - 1
    reach = min(n_samples - 1, SHAPE_REACH)
    k = np.arange(1, reach + 1, dtype=float)
    columns = np.array([shape.cosine(k, n_samples) for shape in shapes]).reshape(len(shapes), reach)
    covered = offsets[offsets < reach]
    cross = np.zeros((dof.size, len(shapes)))
    gram = np.zeros((dof.size, len(shapes), len(shapes)))
    for r in range(len(shapes)):
        cross[: covered.size, r] = np.add.reduceat(columns[r] * transform[:reach], covered)
        for s in range(len(shapes)):
            gram[: covered.size, r, s] = np.add.reduceat(columns[r] * columns[s], covered)
    np.square(transform, out=transform)
    power = np.add.reduceat(transform, offsets) / dof
    basis = np.column_stack([_bin_means(term, starts, n_samples) for term in terms])
    frequency = (starts[:-1] + starts[1:] - 1) / (4.0 * n_samples)
    return BinnedPowers(
        frequency,
        dof,
        power,
        basis,
        cross / dof[:, None],
        gram / dof[:, None, None],
        tuple(term.role for term in terms),
        tuple(shape.role for shape in shapes),
    )


def bin_runs(pieces: Sequence[FloatArray], terms: Sequence[Fluctuation], shapes: Sequence[MeanShape]) -> BinnedPowers:
    """Bin every run; each keeps its own mean, the likelihoods add. Sorted by frequency."""
    parts = [bin_run(piece, terms, shapes) for piece in pieces]
    order = np.argsort(np.concatenate([part.frequency for part in parts]), kind="stable")
    return BinnedPowers(
        np.concatenate([part.frequency for part in parts])[order],
        np.concatenate([part.dof for part in parts])[order],
        np.concatenate([part.power for part in parts])[order],
        np.concatenate([part.basis for part in parts])[order],
        np.concatenate([part.cross for part in parts])[order],
        np.concatenate([part.gram for part in parts])[order],
        parts[0].roles,
        parts[0].shapes,
    )
