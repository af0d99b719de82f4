"""Time stamps: which column, in which unit, as seconds from the first."""

import re
from collections.abc import Sequence
from datetime import UTC, datetime

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray, IntArray
from stillbench.foundation.errors import ClockError, UnitError
from stillbench.foundation.suggestions import plural
from stillbench.foundation.units import TIME, parse_unit
from stillbench.logs.dates import ISO, is_bare_date, is_iso, is_stamp, is_time_of_day, read_stamps_text
from stillbench.logs.table import Table
from stillbench.vocabulary.sensor_log import Stamps

TIME_HEADS = frozenset({"time", "timestamp", "t", "date", "datetime"})
UNIT_SECONDS = {"s": 1.0, "ms": 1e-3, "us": 1e-6, "ns": 1e-9, "unix": 1.0}
UNIX_YEARS = (978_307_200.0, 2_145_916_800.0)
"""2001 to 2037: a bare number in this range can only be unix seconds."""

WRITTEN = ("iso", "day-first", "month-first")
"""Time units that say that the stamps are written dates."""
POWERS_OF_TWO = tuple(2.0**bits for bits in (8, 12, 16, 20, 24, 31, 32, 48))
POWERS_OF_TEN = tuple(10.0**power for power in range(2, 13))
CLOCKS = (60.0, 3_600.0, 86_400.0, 604_800.0)
"""Seconds at which clocks begin anew: the minute, the hour, the day, the week."""
ROLL_STEPS = 20.0
"""Usual steps that may be missing where a counter rolls over."""
LONGEST_HEAD = 200
LONGEST_LOG = 1e11
"""Seconds (three thousand years)."""
RESOLUTION_SAMPLE = 10_000
FEW_ABSENT = 3
ABSENT_SHARE = 1e-3
"""Rows without a stamp that are left out; with more the column is refused."""

_SPLIT_HEAD = re.compile(r"^\s*(.*?)\s*(?:[\[(](.*?)[\])]|[_ ](s|ms|us|ns|sec|seconds|unix|utc))?\s*$", re.IGNORECASE)
_ZONED = re.compile(r"\d(?:Z|:\d{2}\s?[+-]\d{2}:?\d{2}|:\d{2}[.,]\d+\s?[+-]\d{2}:?\d{2})$|\s(?:Z|[+-]\d{2}:?\d{2})$")


def split_head(head: str) -> tuple[str, str | None]:
    """Split ``'gyro x [deg/s]'`` into name and unit text."""
    match = _SPLIT_HEAD.match(head[:LONGEST_HEAD])
    if match is None:
        return head, None
    name, bracketed, suffix = match.groups()
    return name, bracketed or suffix


def _folded(name: str) -> str:
    return re.sub(r"[^a-z0-9]", "", name.lower())


def find_time_column(table: Table) -> int | None:
    """Return the column whose head is time, timestamp, t, date, datetime, or one of these with a unit; or one of dates."""
    if table.has_heads:
        for index, head in enumerate(table.heads):
            if _folded(split_head(head)[0]) in TIME_HEADS or _folded(head) in TIME_HEADS:
                return index
    # A column of dates can be nothing else.
    return next((index for index in range(len(table.heads)) if is_stamp(table.first_text(index))), None)


def unit_of_time(table: Table, index: int) -> str | None:
    """Return s, ms, us or ns when the head, or the row of units below it, says so."""
    text = split_head(table.heads[index])[1] or table.units[index]
    if text is None:
        return None
    if text.lower() in ("unix", "utc"):
        return "unix" if text.lower() == "unix" else None
    try:
        unit = parse_unit(text)
    except UnitError:
        return None
    return unit.text if unit.dimension == TIME and unit.text in UNIT_SECONDS else None


def read_stamps(table: Table, index: int, declared: str | None) -> tuple[Stamps, BoolArray, str]:
    """Read the time column.

    Parameters
    ----------
    table : Table
    index : int
        Of the time column.
    declared : str or None
        Unit from flag or sheet.

    Returns
    -------
    Stamps
        Of the rows that have one.
    (rows,) bool array
        Which rows those are.
    str
        One sentence on how it was understood, with the flag that overrides it.

    Raises
    ------
    ClockError
        When the stamps do not parse, or their unit is not known and cannot be told.
    """
    head = table.heads[index]
    typed = table.instants(index) if declared in (None, "iso") else None
    if typed is not None:
        nanoseconds, absolute = typed
        seconds = (nanoseconds - nanoseconds[0]) / 1e9
        zone = "with zone" if absolute else "local time, no zone given"
        stamps = Stamps(
            seconds,
            head,
            "iso",
            "absolute" if absolute else "local",
            float(nanoseconds[0]) * 1e-9,
            _resolution(seconds),
        )
        sentence = f"time from column {head!r}, date-times {zone}; override with --time and --time-unit"
        return stamps, np.ones(seconds.size, dtype=bool), sentence
    if declared in WRITTEN or (declared is None and is_stamp(table.first_text(index))):
        return _read_dates(table, index, declared)
    unit = declared or unit_of_time(table, index)
    (numbers,) = table.numbers([index])
    if not np.isfinite(numbers).any():
        raise ClockError(f"the time column {head!r} holds no numbers", "time stamps", "name another with --time")
    present = _present(np.isfinite(numbers), head)
    numbers = numbers if present.all() else numbers[present]
    said = "declared" if declared else f"its head says {unit}"
    numbers, rolled = _unrolled(numbers, UNIT_SECONDS.get(unit or ""))
    if unit is None:
        unit, said = _guess_unit(numbers, head)
    if unit not in UNIT_SECONDS:
        raise ClockError(f"the unit of time is {unit!r}", f"{', '.join(UNIT_SECONDS)}, {' or '.join(WRITTEN)}")
    scale = UNIT_SECONDS[unit]
    origin = float(numbers[0]) if unit == "unix" else None
    resolution = _resolution(numbers) * scale
    seconds = numbers - numbers[0]
    del numbers
    seconds *= scale
    if not max(float(seconds.max()), -float(seconds.min())) < LONGEST_LOG:
        raise ClockError(f"the stamps of {head!r} reach over more than {LONGEST_LOG:g} s", "time stamps")
    kind = "absolute" if unit == "unix" else "counter"
    stamps = Stamps(seconds, head, unit, kind, origin, resolution)  # type: ignore[arg-type]
    return (
        stamps,
        present,
        f"time from column {head!r} in {_unit_words(unit)} ({said}){rolled}; override with --time and --time-unit",
    )


def _present(present: BoolArray, head: str) -> BoolArray:
    """Return which rows have a stamp; refuse a column with many empty cells."""
    absent = int(np.count_nonzero(~present))
    if absent > max(FEW_ABSENT, ABSENT_SHARE * present.size):
        first = int(np.flatnonzero(~present)[0]) + 1
        raise ClockError(
            f"the time column {head!r} is empty in {absent} of {present.size} rows, first in row {first}",
            "a stamp in every row",
            "name another column with --time, or use --time none --rate HZ if the rows are evenly spaced",
        )
    return present


def _unit_words(unit: str) -> str:
    return {"unix": "unix seconds"}.get(unit, unit)


def _guess_unit(numbers: FloatArray, head: str) -> tuple[str, str]:
    lowest, highest = float(numbers.min()), float(numbers.max())
    if UNIX_YEARS[0] <= lowest <= highest <= UNIX_YEARS[1]:
        first = datetime.fromtimestamp(lowest, UTC).strftime("%Y-%m-%d")
        return "unix", f"its numbers are dates of {first}"
    steps = np.diff(numbers)
    mean_step = float(np.abs(steps).mean()) if steps.size else 0.0
    options = (
        ", ".join(f"{unit} means {1.0 / (mean_step * scale):.4g} Hz" for unit, scale in list(UNIT_SECONDS.items())[:4])
        if mean_step > 0
        else "s, ms, us or ns"
    )
    raise ClockError(
        f"the unit of the time column {head!r} is not known",
        "--time-unit s, ms, us, ns, iso or unix",
        f"for comparison, {options}",
    )


def _resolution(numbers: FloatArray) -> float:
    """Largest power of ten of which all stamps (the first ten thousand) are multiples, in the unit of the stamps."""
    part = numbers[:RESOLUTION_SAMPLE] - np.floor(numbers[0])
    spacing = float(np.spacing(np.abs(numbers[:RESOLUTION_SAMPLE]).max()))
    for power in range(3, -10, -1):
        step = 10.0**power
        off = np.abs(part / step - np.rint(part / step)).max() * step
        if off <= max(4.0 * spacing, 1e-6 * step):
            return step
    return spacing


def _unrolled(numbers: FloatArray, scale: float | None) -> tuple[FloatArray, str]:
    """Undo the roll-over of a counter: falls from near a usual limit to near zero, all by the same; and say so."""
    falls = np.flatnonzero(numbers[1:] < numbers[:-1])
    if not falls.size:
        return numbers, ""
    steps = np.diff(numbers)
    if not (steps > 0).any():
        return numbers, ""
    usual = float(np.median(steps[steps > 0]))
    limits = [*POWERS_OF_TWO, *POWERS_OF_TEN]
    if scale is not None:
        limits += [clock / scale for clock in CLOCKS]
    for limit in sorted(limits):
        left = steps[falls] + limit
        near = (left > 0) & (left <= ROLL_STEPS * usual)
        if near.all() and float(numbers.max()) < limit and float(numbers.min()) >= 0:
            turns = np.zeros(numbers.size)
            turns[falls + 1] = limit
            return numbers + np.cumsum(
                turns
            ), f", a counter that rolls over at {limit:.12g}, {plural(falls.size, 'time')}"
    return numbers, ""


def _read_dates(table: Table, index: int, declared: str | None) -> tuple[Stamps, BoolArray, str]:
    head = table.heads[index]
    cells = table.texts(index)
    # Date and time of day may stand in columns of their own, side by side.
    beside = None
    if is_bare_date(table.first_text(index)) and index + 1 < len(table.heads):
        beside = index + 1 if is_time_of_day(table.first_text(index + 1)) else None
    elif is_time_of_day(table.first_text(index)) and index > 0:
        beside = index - 1 if is_bare_date(table.first_text(index - 1)) else None
    if beside is not None:
        first, second = min(index, beside), max(index, beside)
        head = f"{table.heads[first]}, {table.heads[second]}"
        dates, clocks = (cells, table.texts(second)) if first == index else (table.texts(first), cells)
        cells = [f"{date} {clock}" for date, clock in zip(dates, clocks, strict=True)]
    present = _present(np.array([bool(cell.strip()) and "None" not in cell for cell in cells]), head)
    texts = [cell for cell, there in zip(cells, present, strict=True) if there]
    zoned = bool(_ZONED.search(texts[0].strip())) and ":" in texts[0]
    if declared == "iso" or (declared is None and is_iso(texts[0])):
        nanoseconds, words, unit = _iso_nanoseconds(texts, head), "date-times", "iso"
    else:
        nanoseconds, words, unit = read_stamps_text(texts, declared, head)
    seconds = (nanoseconds - nanoseconds[0]) / 1e9
    kind = "absolute" if zoned else "local"
    offset = _offset(texts[0].strip()) if zoned else 0.0
    stamps = Stamps(seconds, head, unit, kind, float(nanoseconds[0]) * 1e-9, _resolution(seconds), offset)  # type: ignore[arg-type]
    zone = f"with zone, the first {offset / 3600.0:+g} h of UTC" if zoned else "local time, no zone given"
    where = f"columns {head!r}" if beside is not None else f"column {head!r}"
    return stamps, present, f"time from {where}, {words}, {zone}; override with --time and --time-unit"


def _offset(text: str) -> float:
    """Return how far a stamp with a zone is ahead of UTC, s."""
    match = re.search(r"([+-])(\d{2}):?(\d{2})$", text)
    if match is None:
        return 0.0
    seconds = 3600.0 * int(match.group(2)) + 60.0 * int(match.group(3))
    return -seconds if match.group(1) == "-" else seconds


def _iso_nanoseconds(texts: Sequence[str], head: str) -> IntArray:
    import pandas as pd  # noqa: PLC0415  heavy, wanted only for date-times

    series = pd.Series(texts, dtype="str").str.strip()
    bad = ~series.str.fullmatch(ISO).to_numpy(dtype=bool)
    if not bad.any():
        zoned = series.str.contains(_ZONED.pattern, regex=True).to_numpy(dtype=bool)
        bad = zoned != zoned[0]  # a zone in some rows only: an hour would be lost or won there
    if bad.any():
        row = int(np.argmax(bad))
        raise ClockError(
            f"row {row + 1} of the time column {head!r} holds {texts[row][:40]!r}",
            "an ISO date-time such as 2025-03-01 22:15:00.25, all with a zone or none",
        )
    try:
        times = pd.to_datetime(series, format="ISO8601", utc=True).astype("datetime64[ns, UTC]")
    except (ValueError, OverflowError) as error:
        for row, text in enumerate(texts, start=1):
            if not is_iso(text):
                raise ClockError(
                    f"row {row} of the time column {head!r} holds {text[:40]!r}",
                    "an ISO date-time such as 2025-03-01 22:15:00.25",
                ) from error
        raise ClockError(
            f"the time column {head!r} does not parse ({str(error)[:80]})", "ISO date-times in every row"
        ) from error
    if times.isna().any():
        row = int(np.flatnonzero(times.isna().to_numpy())[0]) + 1
        raise ClockError(f"row {row} of the time column {head!r} is empty", "a stamp in every row")
    return np.asarray(times.astype("datetime64[ns, UTC]").astype("int64"), dtype=np.int64)
