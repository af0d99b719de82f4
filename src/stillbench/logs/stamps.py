"""Time stamps: which column, in which unit, as seconds from the first."""

import re
from datetime import UTC, datetime

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray
from stillbench.foundation.errors import ClockError, UnitError
from stillbench.foundation.units import TIME, parse_unit
from stillbench.logs.table import Table
from stillbench.vocabulary.sensor_log import Stamps

TIME_HEADS = frozenset({"time", "timestamp", "t", "date", "datetime"})
UNIT_SECONDS = {"s": 1.0, "ms": 1e-3, "us": 1e-6, "ns": 1e-9, "unix": 1.0}
UNIX_YEARS = (978_307_200.0, 2_145_916_800.0)
"""2001 to 2037: a bare number in this range can only be unix seconds."""

RESOLUTION_SAMPLE = 10_000
FEW_ABSENT = 3
ABSENT_SHARE = 1e-3
"""Rows without a stamp that are left out; with more the column is refused."""

_SPLIT_HEAD = re.compile(r"^\s*(.*?)\s*(?:[\[(](.*?)[\])]|[_ ](s|ms|us|ns|sec|seconds|unix|utc))?\s*$", re.IGNORECASE)
_ISO = re.compile(r"\s*\d{4}-\d{1,2}-\d{1,2}")
_ZONED = re.compile(r"(?:Z|[+-]\d{2}:?\d{2})\s*$")


def split_head(head: str) -> tuple[str, str | None]:
    """Split ``'gyro x [deg/s]'`` into name and unit text."""
    match = _SPLIT_HEAD.match(head)
    if match is None:
        return head, None
    name, bracketed, suffix = match.groups()
    return name, bracketed or suffix


def _folded(name: str) -> str:
    return re.sub(r"[^a-z]", "", name.lower())


def find_time_column(table: Table) -> int | None:
    """Return the column whose head is time, timestamp, t, date, datetime, or one of these with a unit."""
    if not table.has_heads:
        return None
    for index, head in enumerate(table.heads):
        if _folded(split_head(head)[0]) in TIME_HEADS or _folded(head) in TIME_HEADS:
            return index
    return None


def unit_of_time(head: str) -> str | None:
    """Return s, ms, us or ns when the head says so."""
    text = split_head(head)[1]
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
    if declared == "iso" or (declared is None and _ISO.match(table.first_text(index))):
        return _read_dates(table, index)
    unit = declared or unit_of_time(head)
    (numbers,) = table.numbers([index])
    if not np.isfinite(numbers).any():
        raise ClockError(f"the time column {head!r} holds no numbers", "time stamps", "name another with --time")
    present = _present(~np.isnan(numbers), head)
    numbers = numbers if present.all() else numbers[present]
    said = "declared" if declared else f"its head says {unit}"
    if unit is None:
        unit, said = _guess_unit(numbers, head)
    scale = UNIT_SECONDS[unit]
    seconds = (numbers - numbers[0]) * scale
    origin = float(numbers[0]) if unit == "unix" else None
    resolution = _resolution(numbers) * scale
    kind = "absolute" if unit == "unix" else "counter"
    stamps = Stamps(seconds, head, unit, kind, origin, resolution)  # type: ignore[arg-type]
    return (
        stamps,
        present,
        f"time from column {head!r} in {_unit_words(unit)} ({said}); override with --time and --time-unit",
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


def _read_dates(table: Table, index: int) -> tuple[Stamps, BoolArray, str]:
    import pandas as pd  # noqa: PLC0415  heavy, wanted only for date-times

    head = table.heads[index]
    cells = table.texts(index)
    present = _present(np.array([bool(cell.strip()) and cell != "None" for cell in cells]), head)
    texts = [cell for cell, there in zip(cells, present, strict=True) if there]
    zoned = bool(_ZONED.search(texts[0].strip())) and ":" in texts[0]
    try:
        times = pd.to_datetime(pd.Series(texts, dtype="str"), format="ISO8601", utc=True)
    except (ValueError, OverflowError) as error:
        for row, text in enumerate(texts, start=1):
            if not _ISO.match(text):
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
    nanoseconds = times.astype("datetime64[ns, UTC]").astype("int64").to_numpy()
    seconds = (nanoseconds - nanoseconds[0]) / 1e9
    kind = "absolute" if zoned else "local"
    ahead = datetime.fromisoformat(texts[0].strip()).utcoffset() if zoned else None
    offset = ahead.total_seconds() if ahead is not None else 0.0
    stamps = Stamps(seconds, head, "iso", kind, float(nanoseconds[0]) * 1e-9, _resolution(seconds), offset)  # type: ignore[arg-type]
    zone = f"with zone, the first {offset / 3600.0:+g} h of UTC" if zoned else "local time, no zone given"
    return stamps, present, f"time from column {head!r}, date-times {zone}; override with --time and --time-unit"
