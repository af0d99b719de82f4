"""Which terms does the log require? Every subset of the terms is fitted; those that explain it as well are kept."""

import itertools
import math
from collections.abc import Sequence

import numpy as np

from stillbench.foundation.arrays import BoolArray
from stillbench.likelihood.bins import BinnedPowers
from stillbench.likelihood.fit import Fit, maximise

SIGNIFICANCE = 0.01


def chi_bar_quantile(dropped: int, significance: float = SIGNIFICANCE) -> float:
    """Return the upper quantile of the likelihood ratio when ``dropped`` terms at their bound zero are left out.

    A mixture of chi-square distributions with binomial weights (5.41, 7.29, 8.75 for 1, 2, 3 at 1 %).

    References
    ----------
    S. G. Self and K.-Y. Liang, J. Am. Stat. Assoc. 82 (1987) 605.
    """
    from scipy.optimize import brentq  # noqa: PLC0415  heavy imports stay inside functions
    from scipy.special import chdtrc  # noqa: PLC0415

    def excess(value: float) -> float:
        tail = sum(math.comb(dropped, d) * float(chdtrc(d, value)) for d in range(1, dropped + 1))
        return tail / 2.0**dropped - significance

    return float(brentq(excess, 1e-6, 100.0))


def smallest_accepted(
    bins: BinnedPowers, full: Fit, *, shapes: BoolArray | None = None, required: Sequence[str] = ()
) -> list[tuple[str, ...]]:
    """Return the smallest sets of terms whose likelihood is not significantly below that of the full model.

    Parameters
    ----------
    bins : BinnedPowers
    full : Fit
        With all terms, restricted.
    shapes
        As for ``maximise``.
    required : sequence of str
        Roles that stay in every set.

    Returns
    -------
    list of tuple of str
        Sets of roles, none of which contains another; several when the log cannot tell them apart.
    """
    count = len(bins.roles)
    needed = {bins.roles.index(role) for role in required}
    accepted: list[frozenset[int]] = []
    for size in range(1, count + 1):
        for chosen in itertools.combinations(range(count), size):
            candidate = frozenset(chosen)
            if not needed <= candidate:
                continue
            if any(smaller <= candidate for smaller in accepted):
                continue
            if size == count:
                accepted.append(candidate)
                continue
            terms = np.zeros(count, dtype=bool)
            terms[list(chosen)] = True
            fit = maximise(bins, terms=terms, shapes=shapes)
            if 2.0 * (fit.objective - full.objective) < chi_bar_quantile(count - size):
                accepted.append(candidate)
    return [_named(chosen, bins.roles) for chosen in accepted]


def _named(chosen: frozenset[int], roles: Sequence[str]) -> tuple[str, ...]:
    return tuple(roles[i] for i in sorted(chosen))
