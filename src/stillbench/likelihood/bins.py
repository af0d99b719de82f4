"""From runs of a log to binned powers of their cosine transforms.

For a mean plus white noise plus a random walk the vectors of the orthonormal DCT-II are exactly the eigenvectors of the
covariance once the mean is removed, so their squares are independent and the likelihood below is the exact restricted
one. For flicker noise the largest correlation between coefficients is 0.12, at the lowest of them only.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray, IntArray
from stillbench.foundation.scratch import BLOCK, blocks
from stillbench.terms.base import Fluctuation, MeanShape

SINGLES = 32
"""The lowest coefficients stand alone."""

PER_DECADE = 24
"""Bins a decade above; the loss of information is below 0.1 %."""

SHAPE_REACH = 65_536
"""Coefficients of a mean shape beyond this one are taken as zero (they fall as k^-2)."""

LONGEST_TRANSFORM = 1 << 24
"""Samples of a run that are transformed at once; a longer one is binned in two bands."""

BLOCK_TRANSFORM = 1 << 20
"""Samples of the blocks of the high band."""

LOW_BAND = 32
"""The low band ends at this part of the coefficients of the means."""

QUADRATURE_FROM = 64
"""Bins with at least this many coefficients have their mean basis by quadrature in place of a sum."""


@dataclass(frozen=True)
class BinnedPowers:
    """Binned powers of the cosine transforms of all runs, unit samples.

    Attributes
    ----------
    first, last : (j,) int arrays
        Coefficients ``first`` to ``last - 1`` of their run.
    length : (j,) int array
        Samples of the run.
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

    first: IntArray
    last: IntArray
    length: IntArray
    power: FloatArray
    basis: FloatArray
    cross: FloatArray
    gram: FloatArray
    roles: tuple[str, ...]
    shapes: tuple[str, ...]

    @cached_property
    def frequency(self) -> FloatArray:
        """Mean frequency of each bin, cycles per sample, shape (j,)."""
        return np.asarray((self.first + self.last - 1) / (4.0 * self.length))

    @cached_property
    def dof(self) -> FloatArray:
        """Coefficients in each bin, shape (j,)."""
        return (self.last - self.first).astype(np.float64)

    def below(self, frequency: float) -> "BinnedPowers":
        """Return the bins up to ``frequency`` (cycles per sample)."""
        return self.chosen(self.frequency <= frequency)

    def chosen(self, which: BoolArray | IntArray) -> "BinnedPowers":
        """Return some of the bins."""
        return replace(
            self,
            first=self.first[which],
            last=self.last[which],
            length=self.length[which],
            power=self.power[which],
            basis=self.basis[which],
            cross=self.cross[which],
            gram=self.gram[which],
        )

    def with_column(self, role: str, column: FloatArray) -> "BinnedPowers":
        """Return the bins with one more term."""
        return replace(self, basis=np.column_stack([self.basis, column]), roles=(*self.roles, role))

    def means_of(self, power: Callable[[FloatArray, int], FloatArray], nodes: int = 8) -> FloatArray:
        """Return the mean of an expected power over the coefficients of each bin.

        Parameters
        ----------
        power : callable
            Of coefficient (float array) and number of samples.
        nodes : int
            Of the quadrature in wide bins; more where the power varies within a bin.
        """
        means = np.empty(self.first.size)
        width = self.last - self.first
        for length in np.unique(self.length):
            own = self.length == length
            wide = np.flatnonzero(own & (width >= QUADRATURE_FROM))
            if wide.size:
                # The sum over k is an integral from k0 - 1/2 to k1 - 1/2 of a function smooth on the scale of the bin.
                abscissae, weights = np.polynomial.legendre.leggauss(nodes)
                low, high = self.first[wide] - 0.5, self.last[wide] - 0.5
                middle, half = (low + high) / 2.0, (high - low) / 2.0
                means[wide] = power(middle[:, None] + half[:, None] * abscissae, int(length)) @ weights / 2.0
            narrow = np.flatnonzero(own & (width < QUADRATURE_FROM))
            if narrow.size:
                starts = np.concatenate([[0], np.cumsum(width[narrow])])
                k = np.arange(starts[-1]) - np.repeat(starts[:-1] - self.first[narrow], width[narrow])
                means[narrow] = np.add.reduceat(power(k.astype(float), int(length)), starts[:-1]) / width[narrow]
        return means


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
    if values.size > LONGEST_TRANSFORM:
        return _bin_long_run(values, terms, shapes)
    return _binned(cosine_transform(values), values.size, bin_starts(values.size), terms, shapes)


def _binned(
    transform: FloatArray,
    n_samples: int,
    starts: IntArray,
    terms: Sequence[Fluctuation],
    shapes: Sequence[MeanShape],
) -> BinnedPowers:
    """Bin coefficients 1 to ``starts[-1] - 1`` of a run; the transform is squared in place."""
    width = np.diff(starts).astype(float)
    transform = transform[: starts[-1] - 1]
    offsets = starts[:-1] - 1
    reach = min(transform.size, SHAPE_REACH)
    k = np.arange(1, reach + 1, dtype=float)
    columns = np.array([shape.cosine(k, n_samples) for shape in shapes]).reshape(len(shapes), reach)
    covered = offsets[offsets < reach]
    cross = np.zeros((width.size, len(shapes)))
    gram = np.zeros((width.size, len(shapes), len(shapes)))
    for r in range(len(shapes)):
        cross[: covered.size, r] = np.add.reduceat(columns[r] * transform[:reach], covered)
        for s in range(len(shapes)):
            gram[: covered.size, r, s] = np.add.reduceat(columns[r] * columns[s], covered)
    np.square(transform, out=transform)
    power = np.add.reduceat(transform, offsets) / width
    bins = BinnedPowers(
        starts[:-1],
        starts[1:],
        np.full(width.size, n_samples),
        power,
        np.empty((width.size, 0)),
        cross / width[:, None],
        gram / width[:, None, None],
        (),
        tuple(shape.role for shape in shapes),
    )
    for term in terms:
        bins = bins.with_column(term.role, bins.means_of(term.cosine_power))
    return bins


def _means_of_a_quick_length(n_samples: int) -> tuple[int, int]:
    """Return how many samples make a mean and how many means, a number that is transformed quickly; few samples are left out."""
    from scipy import fft  # noqa: PLC0415  heavy imports stay inside functions

    fewest = -(-n_samples // LONGEST_TRANSFORM)
    best = (0, 0)
    for together in range(fewest, fewest + 8):
        count = n_samples // together
        while fft.next_fast_len(count, real=True) != count:
            count -= 1
        best = max(best, (together * count, together))
    return best[1], best[0] // best[1]


def _bin_long_run(values: FloatArray, terms: Sequence[Fluctuation], shapes: Sequence[MeanShape]) -> BinnedPowers:
    """Bin a run too long for one transform in two bands.

    Low band: the means of blocks of D samples have the coefficients of the whole run, but for a factor of root D, up to a
    small share of their own highest (a thirty-second: the averaging takes 0.08 % of the power there and less below). High band:
    the transforms of blocks of the run, averaged; white noise and a walk have the same expected power at the same frequency
    in a block as in the whole, and flicker too from the hundredth coefficient on.
    """
    together, count = _means_of_a_quick_length(values.size)
    n_samples = count * together
    origin = float(values[0])
    means = np.empty(count)
    for part in blocks(count, max(1, BLOCK // together)):
        rows = values[part.start * together : part.stop * together].reshape(-1, together)
        means[part] = (rows - origin).mean(axis=1)
    low = cosine_transform(means) * np.sqrt(together)
    del means
    # Coefficients of a block of the high band stand ``apart`` coefficients of the whole from each other.
    length = BLOCK_TRANSFORM
    apart = n_samples / length
    split = round(count / LOW_BAND / apart)
    top = round((split - 0.5) * apart)
    starts = bin_starts(n_samples)
    lower = np.append(starts[starts < top], top)
    bins = _binned(low, n_samples, lower, terms, shapes)
    del low
    upper = np.unique(np.concatenate([[split], np.rint(starts[starts > top] / apart).astype(np.int64)]))
    upper = np.append(upper[upper < length], length)
    power = np.zeros(upper.size - 1)
    whole = n_samples // length
    for i in range(whole):
        block = cosine_transform(values[i * length : (i + 1) * length])
        np.square(block, out=block)
        power += np.add.reduceat(block[: length - 1], upper[:-1] - 1)
    power /= whole * np.diff(upper)
    first = np.rint((upper[:-1] - 0.5) * apart).astype(np.int64)
    first[0], last = top, np.append(first[1:], n_samples)
    empty = (np.zeros((first.size, len(shapes))), np.zeros((first.size, len(shapes), len(shapes))))
    high = replace(
        bins,
        first=first,
        last=last,
        length=np.full(first.size, n_samples),
        power=power,
        basis=np.empty((first.size, 0)),
        cross=empty[0],
        gram=empty[1],
        roles=(),
    )
    for term in terms:
        high = high.with_column(term.role, high.means_of(term.cosine_power))
    return _joined([bins, high])


JOINED = ("first", "last", "length", "power", "basis", "cross", "gram")


def _joined(parts: Sequence[BinnedPowers]) -> BinnedPowers:
    """Return the bins of several parts one behind the other."""
    fields: dict[str, Any] = {name: np.concatenate([getattr(part, name) for part in parts]) for name in JOINED}
    return replace(parts[0], **fields)


def bin_runs(pieces: Sequence[FloatArray], terms: Sequence[Fluctuation], shapes: Sequence[MeanShape]) -> BinnedPowers:
    """Bin every run; each keeps its own mean, the likelihoods add. Sorted by frequency."""
    parts = [bin_run(piece, terms, shapes) for piece in pieces]

    whole = _joined(parts)
    return whole.chosen(np.argsort(whole.frequency, kind="stable"))
