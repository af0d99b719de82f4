"""What a log was understood to be, before anything is computed from it."""

from dataclasses import dataclass

from stillbench.vocabulary.finding import Finding


@dataclass(frozen=True)
class ColumnUnderstanding:
    """One column.

    Attributes
    ----------
    number : int
        From 1.
    head : str
    role : str
        ``time``, ``data``, ``words`` or ``empty``.
    unit : str or None
        As the file says; it counts only once it is declared.
    declared : str or None
        Unit from flag or sheet.
    """

    number: int
    head: str
    role: str
    unit: str | None
    declared: str | None


@dataclass(frozen=True)
class Understanding:
    """What a log was understood to be.

    Attributes
    ----------
    name, format : str
    rows : int or None
        None where there is no clock yet.
    columns : tuple of ColumnUnderstanding
    first, last : tuple of rows of text
    clock : str
        One sentence.
    sample_interval, duration, jitter : float or None
        s.
    findings : tuple of Finding
        Of the clock.
    remarks : tuple of str
        What was passed over or concluded.
    overrides : tuple of (what, value, how it is declared)
    sheet : str
        The log sheet (TOML) that says all this explicitly.
    """

    name: str
    format: str
    rows: int | None
    columns: tuple[ColumnUnderstanding, ...]
    first: tuple[tuple[str, ...], ...]
    last: tuple[tuple[str, ...], ...]
    clock: str
    sample_interval: float | None
    duration: float | None
    jitter: float | None
    findings: tuple[Finding, ...]
    remarks: tuple[str, ...]
    overrides: tuple[tuple[str, str, str], ...]
    sheet: str
