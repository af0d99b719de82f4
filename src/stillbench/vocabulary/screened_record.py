"""A record with what was found in it, and what is kept."""

from dataclasses import dataclass

from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.record import Record


@dataclass(frozen=True)
class ScreenedRecord:
    """Output of the screening stage.

    Attributes
    ----------
    record : Record
        Kept runs only, holes filled by a conditional random draw, finite everywhere.
    findings : tuple of Finding
        Of the reader, the clock and the screening, in the order in which they were made.
    n_offered : int
        Samples on the grid before screening.
    n_used : int
        Samples with a value of their own that enter the numbers.
    unscreened : Record or None
        The record with only those samples left out that have no value; None when nothing more was excluded.
    """

    record: Record
    findings: tuple[Finding, ...]
    n_offered: int
    n_used: int
    unscreened: Record | None = None
