"""Written dates and times of day, in the orders in use, to nanoseconds."""

import re
from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from stillbench.foundation.arrays import BoolArray, IntArray
from stillbench.foundation.errors import ClockError

if TYPE_CHECKING:
    import pandas as pd

DAY = 86_400 * 10**9
"""Nanoseconds."""
FIRST_YEAR, LAST_YEAR = 1700, 2250
"""Nanoseconds of 64 bits reach a little further to both sides."""
MONTHS = ("jan", "feb", "mar", "apr", "may", "jun", "jul", "aug", "sep", "oct", "nov", "dec")
EITHER = "either"
CLEARLY_SHORTER = 5.0
"""Times by which one order of day and month must make the log shorter than the other to be taken without asking."""

ISO = r"\d{4}-\d{1,2}-\d{1,2}(?:[T ]\d{1,2}:\d{2}(?::\d{2}(?:[.,]\d+)?)?)?\s?(?:Z|[+-]\d{2}:?\d{2})?"
_DATE = rf"\d{{4}}[-/.]\d{{1,2}}[-/.]\d{{1,2}}|\d{{1,2}}[-/. ](?:\d{{1,2}}|(?:{'|'.join(MONTHS)})[a-z]*)[-/. ]\d{{4}}"
_CLOCK = r"\d{1,2}:\d{2}(?::\d{2}(?:[.,]\d+)?)?(?:\s?[ap]\.?m\.?)?"
_IS_ISO = re.compile(ISO, re.ASCII)
_IS_DATE = re.compile(_DATE, re.IGNORECASE | re.ASCII)
_IS_CLOCK = re.compile(_CLOCK, re.IGNORECASE | re.ASCII)
_IS_STAMP = re.compile(rf"(?:{_DATE})(?:[T ]\s*{_CLOCK})?|{_CLOCK}", re.IGNORECASE | re.ASCII)
_PARTS = (
    r"^\s*(?:(?P<first>\d{1,4})[-/. ](?P<second>\w{1,9})[-/. ](?P<third>\d{1,4}))?[T\s]*"
    r"(?:(?P<hour>\d{1,2}):(?P<minute>\d{2})(?::(?P<second_of_minute>\d{2})(?:[.,](?P<fraction>\d+))?)?"
    r"\s?(?P<half>[AaPp])?\.?[Mm]?\.?)?\s*$"
)


def is_iso(cell: str) -> bool:
    """Whether a cell is an ISO date, with or without time and zone."""
    return _IS_ISO.fullmatch(cell.strip()) is not None


def is_stamp(cell: str) -> bool:
    """Whether a cell is a date, a time of day, or both, in any order that is read here."""
    cell = cell.strip()
    return _IS_ISO.fullmatch(cell) is not None or _IS_STAMP.fullmatch(cell) is not None


def is_bare_date(cell: str) -> bool:
    """Whether a cell is a date without a time of day."""
    return _IS_DATE.fullmatch(cell.strip()) is not None


def is_time_of_day(cell: str) -> bool:
    """Whether a cell is a time of day without a date."""
    return _IS_CLOCK.fullmatch(cell.strip()) is not None


def read_stamps_text(texts: Sequence[str], order: str | None, head: str) -> tuple[IntArray, str, str]:
    """Read dates and times of day.

    Parameters
    ----------
    texts : sequence of ``n`` str
        Of one form: date and time, or time of day alone (running over midnight).
    order : str or None
        ``day-first`` or ``month-first`` where declared.
    head : str
        Of the column, for messages.

    Returns
    -------
    nanoseconds : (n,) int array
        From 1970 on the clock of the log; from the first midnight where there are no dates.
    words : str
        How they were understood.
    order : str
        ``day-first`` or ``month-first`` where that was told or declared; empty where nothing needs to be declared.

    Raises
    ------
    ClockError
        For a cell that is no stamp, a date that does not exist, or an order of day and month that cannot be told.
    """
    import pandas as pd  # noqa: PLC0415  heavy, wanted only for written dates

    parts = pd.Series(texts, dtype="str").str.extract(_PARTS, flags=re.ASCII)
    dated = parts["first"].notna().to_numpy()
    timed = parts["hour"].notna().to_numpy()
    for bad, wanted in (
        (~(dated | timed), "a date or a time of day"),
        (dated != dated[0], "stamps of one form"),
        (timed != timed[0], "stamps of one form"),
    ):
        if bad.any():
            row = int(np.argmax(bad))
            raise ClockError(f"row {row + 1} of the time column {head!r} holds {texts[row][:40]!r}", wanted)
    clock = np.zeros(len(texts), dtype=np.int64)
    if timed[0]:
        clock = _time_of_day(parts, texts, head)
    if not dated[0]:
        return clock + DAY * np.cumsum(np.diff(clock, prepend=clock[0]) < -DAY // 2), "times of day", ""
    return _with_dates(parts, clock, order, texts, head)


def _whole(column: "pd.Series[str]") -> IntArray:
    import pandas as pd  # noqa: PLC0415  heavy, wanted only for written dates

    return np.asarray(pd.to_numeric(column.fillna("0")), dtype=np.int64)


def _time_of_day(parts: "pd.DataFrame", texts: Sequence[str], head: str) -> IntArray:
    hour, minute, second = (_whole(parts[name]) for name in ("hour", "minute", "second_of_minute"))
    half = parts["half"].str.lower()
    if half.notna().any():
        _refuse(half.isna().to_numpy(dtype=bool), texts, head, "am or pm in every row")
        _refuse((hour > 12) | (hour < 1), texts, head, "hours from 1 to 12 beside am and pm")  # noqa: PLR2004
        hour = hour % 12 + 12 * (half == "p").to_numpy()
    # 24:00:00 ends a day, and 60 is the second that is put in.
    _refuse((hour > 24) | (minute > 59) | (second > 60), texts, head, "a time that exists")  # noqa: PLR2004
    fraction = _whole(parts["fraction"].fillna("0").str.ljust(9, "0").str.slice(0, 9))
    return np.asarray((3600 * hour + 60 * minute + second) * 10**9 + fraction)


def _refuse(bad: BoolArray, texts: Sequence[str], head: str, wanted: str) -> None:
    if bad.any():
        row = int(np.argmax(bad))
        raise ClockError(f"row {row + 1} of the time column {head!r} holds {texts[row][:40]!r}", wanted)


def _with_dates(
    parts: "pd.DataFrame", clock: IntArray, order: str | None, texts: Sequence[str], head: str
) -> tuple[IntArray, str, str]:
    first, third = _whole(parts["first"]), _whole(parts["third"])
    lettered = not parts["second"].str.isdecimal().any()
    if lettered:
        names = {name: number for number, name in enumerate(MONTHS, start=1)}
        second = np.asarray(parts["second"].str.slice(0, 3).str.lower().map(names).fillna(0), dtype=np.int64)
    else:
        _refuse(~parts["second"].str.isdecimal().to_numpy(dtype=bool), texts, head, "stamps of one form")
        second = _whole(parts["second"])
    if (first > 31).all():  # noqa: PLR2004  the year stands first
        return _days(first, second, third, texts, head) * DAY + clock, "date-times, year first", ""
    _refuse(third < 1000, texts, head, "years of four digits")  # noqa: PLR2004
    if lettered:
        return _days(third, second, first, texts, head) * DAY + clock, "date-times with the month in letters", ""
    if order is None:
        order = _order(first, second, third, clock, texts[0], head)
    day, month = (second, first) if order == "month-first" else (first, second)
    told = order if order != EITHER else ""
    words = told.replace("-", " ") or "day and month as may be"
    return _days(third, month, day, texts, head) * DAY + clock, f"date-times, {words}", told


def _order(first: IntArray, second: IntArray, year: IntArray, clock: IntArray, example: str, head: str) -> str:
    """Which of the two is the day: what no month can be, or else what makes a log of the night and not of months."""
    if first.max() > 12:  # noqa: PLR2004  months of a year
        return "day-first"
    if second.max() > 12:  # noqa: PLR2004
        return "month-first"
    if (first == first[0]).all() and (second == second[0]).all():
        return EITHER  # one date: the time that passes is the same
    lengths = {}
    for order, day, month in (("day-first", first, second), ("month-first", second, first)):
        instants = _days(year, month, day, [example] * first.size, head) * DAY + clock
        lengths[order] = float(np.abs(np.diff(instants)).sum())
    shorter, longer = sorted(lengths, key=lengths.__getitem__)
    if lengths[longer] < CLEARLY_SHORTER * lengths[shorter]:
        raise ClockError(
            f"the dates of the time column {head!r} may be read in two ways: in {example!r} the day or the month may stand first",
            "one order",
            "give --time-unit day-first or --time-unit month-first",
        )
    return shorter


def _days(year: IntArray, month: IntArray, day: IntArray, texts: Sequence[str], head: str) -> IntArray:
    """Days from 1970-01-01."""
    _refuse((year < FIRST_YEAR) | (year > LAST_YEAR), texts, head, f"a year from {FIRST_YEAR} to {LAST_YEAR}")
    _refuse((month < 1) | (month > 12) | (day < 1) | (day > 31), texts, head, "a date that exists")  # noqa: PLR2004
    months = (year - 1970).astype("M8[Y]").astype("M8[M]") + (month - 1)
    days = months.astype("M8[D]") + (day - 1)
    _refuse(days.astype("M8[M]") != months, texts, head, "a date that exists")
    return np.asarray(days.astype(np.int64))
