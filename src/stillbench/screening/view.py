"""A record as the checks look at it: what several of them need is worked out once."""

from functools import cached_property

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.scratch import blocks, large_array, spread
from stillbench.screening.level import take_level_off
from stillbench.vocabulary.record import Record

MOST_COMPARED = 1 << 24
"""Values that are compared with each other; of a longer record stretches spread over it."""
CONTINUOUS_SHARE = 8
"""With more distinct values than an eighth of the samples the readings count as continuous."""


class RecordView:
    """What several checks need of one record, worked out when first asked for."""

    def __init__(self, record: Record) -> None:
        self.record = record

    @cached_property
    def residual(self) -> FloatArray:
        """Samples less the slow course of their run; shape (n,), NaN in holes."""
        residual = large_array(self.record.values.size)
        for run in self.record.runs:
            take_level_off(self.record.values[run.first : run.last], residual[run.first : run.last])
        return residual

    @cached_property
    def noise(self) -> float:
        """Standard deviation of the samples about the slow course.

        What dithers a converter is all noise that is fast against the averages taken of it, filtered or not.
        """
        total, count = 0.0, 0
        for part in blocks(self.residual.size):
            known = self.residual[part][~self.record.missing[part]]
            total += float(known @ known)
            count += known.size
        return float(np.sqrt(total / count))

    @cached_property
    def step(self) -> float | None:
        """Step between neighbouring codes of the converter, or None when the readings look continuous and none is declared.

        The smallest gaps between distinct values, the mean of those below one and a half of the smallest.
        """
        values = spread(self.record.present(), MOST_COMPARED)
        levels = np.unique(values)
        if levels.size > values.size / CONTINUOUS_SHARE or levels.size < 2:  # noqa: PLR2004  one level has no gap
            return self.record.step
        gaps = np.diff(levels)
        gaps = gaps[gaps > 1e-9 * float(np.ptp(levels))]
        return float(np.mean(gaps[gaps < 1.5 * gaps.min()]))
