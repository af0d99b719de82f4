"""Averaging factors at which the curve is computed."""

import numpy as np

from stillbench.foundation.arrays import IntArray

PER_DECADE = 20
LONGEST_SHARE = 3
"""The curve ends at a third of the longest run; beyond, there is less than one and a half degrees of freedom."""


def averaging_factors(longest_run: int, per_decade: int = PER_DECADE) -> IntArray:
    """Return averaging factors from 1 sample to a third of the longest run, at least ``per_decade`` a decade.

    Below some ten samples every whole number is taken, which is fewer than that.
    """
    last = max(1, longest_run // LONGEST_SHARE)
    count = int(np.ceil(per_decade * np.log10(last))) + 1 if last > 1 else 1
    return np.unique(np.rint(np.geomspace(1, last, max(count, 2))).astype(np.int64))
