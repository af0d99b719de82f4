"""What a check returns."""

from dataclasses import dataclass

import numpy as np

from stillbench.foundation.arrays import BoolArray
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.record import Record


@dataclass(frozen=True)
class Outcome:
    """Findings, and the samples that they speak of.

    Attributes
    ----------
    findings : tuple of Finding
        Those with ``excluded`` true ask for the marked samples to be left out.
    marked : (n,) bool array
        Samples of the record; all False when nothing is to be left out.
    """

    findings: tuple[Finding, ...]
    marked: BoolArray


def nothing(record: Record) -> Outcome:
    """Return the outcome of a check that found nothing."""
    return Outcome((), np.zeros(record.values.size, dtype=bool))
