"""A record as the checks look at it: what several of them need is worked out once."""

from functools import cached_property

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.screening.level import level_of
from stillbench.vocabulary.record import Record

CONTINUOUS_SHARE = 8
"""With more distinct values than an eighth of the samples the readings count as continuous."""


class RecordView:
    """What several checks need of one record, worked out when first asked for."""

    def __init__(self, record: Record) -> None:
        self.record = record

    @cached_property
    def residual(self) -> FloatArray:
        """Samples less the slow course of their run; shape (n,), NaN in holes."""
        residual = np.empty(self.record.values.size)
        for run in self.record.runs:
            piece = self.record.values[run.first : run.last]
            np.subtract(piece, level_of(piece), out=residual[run.first : run.last])
        return residual

    @cached_property
    def noise(self) -> float:
        """Standard deviation of the samples about the slow course.

        What dithers a converter is all noise that is fast against the averages taken of it, filtered or not.
        """
        known = self.residual if not self.record.missing.any() else self.residual[~self.record.missing]
        return float(np.sqrt(known @ known / known.size))

    @cached_property
    def step(self) -> float | None:
        """Step between neighbouring codes of the converter, or None when the readings look continuous and none is declared.

        The smallest gaps between distinct values, the mean of those below one and a half of the smallest.
        """
        values = self.record.present()
        levels = np.unique(values)
        if levels.size > values.size / CONTINUOUS_SHARE or levels.size < 2:  # noqa: PLR2004  one level has no gap
            return self.record.step
        gaps = np.diff(levels)
        gaps = gaps[gaps > 1e-9 * float(np.ptp(levels))]
        return float(np.mean(gaps[gaps < 1.5 * gaps.min()]))
