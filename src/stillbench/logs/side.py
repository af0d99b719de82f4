"""Side channels: temperature, supply, excitation or a reference, in the same file or in another one, on their own clock."""

from pathlib import Path

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.errors import UnitError, UsageError
from stillbench.foundation.units import parse_unit
from stillbench.logs.stamps import find_time_column, read_stamps, split_head
from stillbench.logs.table import Table
from stillbench.vocabulary.characterization import SideSummary, Timeline
from stillbench.vocabulary.log_sheet import LogSheet, SideSection
from stillbench.vocabulary.record import Record
from stillbench.vocabulary.sensor_log import SideSeries, Stamps

PROBES = 10_000
COURSE_SPANS = 900
SUPPORT = 3.0
"""Usual steps of the side channel over which it is taken to run straight; over longer ones it is not known."""


def side_series(
    name: str,
    section: SideSection,
    table: Table,
    seconds: FloatArray,
    stamps: Stamps | None,
    other: Table | None,
    sheet: LogSheet,
) -> SideSeries:
    """Read one side channel.

    Parameters
    ----------
    name : str
    section : SideSection
        Of the log sheet.
    table : Table
        Of the log.
    seconds : (rows,) float array
        Of each row of the log from its first stamp.
    stamps : Stamps or None
        Of the log.
    other : Table or None
        Of the side channel's own file.
    sheet : LogSheet

    Raises
    ------
    UsageError
        When two files have no common clock.
    UnitError
        When no unit is declared.
    """
    source = table if other is None else other
    index = source.index_of(section.column if section.column is not None else name)
    text = section.unit
    if text is None:
        offered = split_head(source.heads[index])[1] or source.units[index]
        raise UnitError(
            name,
            f"side channel {name!r} has no unit",
            "a unit",
            f'write unit = "{offered or "degC"}" under [side.{name}] in the log sheet',
        )
    unit = parse_unit(text)
    if other is None:
        values = source.numbers([index])[0]
        return SideSeries(name, unit, seconds, unit.factor * values[: seconds.size] + unit.offset)
    time_index = source.index_of(section.time) if section.time is not None else find_time_column(source)
    if time_index is None:
        raise UsageError(
            f"the file of side channel {name!r} has no column that is known for time",
            "stamps",
            f'name it: time = "..." under [side.{name}] in the log sheet',
        )
    own, present, _ = read_stamps(source, time_index, section.time_unit or sheet.clock.unit)
    values = source.numbers([index])[0]
    values = values if present.all() else values[present]
    shift = _shift(name, own, stamps)
    return SideSeries(name, unit, own.seconds + shift, unit.factor * values + unit.offset)


def _shift(name: str, own: Stamps, stamps: Stamps | None) -> float:
    """Seconds from the first stamp of the log to the first of the side channel."""
    if stamps is not None and own.origin is not None and stamps.origin is not None and own.kind == stamps.kind:
        return own.origin - stamps.origin
    words = {None: "no stamps"} | {kind: f"{kind} stamps" for kind in ("local", "absolute", "counter")}
    raise UsageError(
        f"side channel {name!r} has {words[own.kind]} and the log {words[stamps.kind if stamps else None]}",
        "two clocks with a common origin: unix seconds or date-times in both files",
        "write the side channel into the same file",
    )


def aligned(series: SideSeries, times: FloatArray) -> FloatArray:
    """Return a side channel at other instants, by straight lines where samples on both sides support it, else NaN.

    Parameters
    ----------
    series : SideSeries
    times : (n,) float array
        Seconds from the first stamp of the log.

    Returns
    -------
    (n,) float array
        SI.
    """
    known = np.isfinite(series.values) & np.isfinite(series.seconds)
    seconds, values = series.seconds[known], series.values[known]
    if seconds.size < 2:  # noqa: PLR2004  two sides
        return np.full(times.size, np.nan)
    order = np.argsort(seconds, kind="stable")
    seconds, values = seconds[order], values[order]
    right = np.clip(np.searchsorted(seconds, times, side="left"), 1, seconds.size - 1)
    left = right - 1
    step = seconds[right] - seconds[left]
    usual = float(np.median(np.diff(seconds)))
    share = np.divide(times - seconds[left], step, out=np.zeros(times.size), where=step > 0)
    supported = (times >= seconds[0]) & (times <= seconds[-1]) & (step <= SUPPORT * usual)
    # An instant that carries a sample of its own needs no other side.
    supported |= np.isclose(share, 1.0, rtol=0, atol=1e-9) | np.isclose(share, 0.0, rtol=0, atol=1e-9)
    return np.where(supported, values[left] + share * (values[right] - values[left]), np.nan)


def side_file(section: SideSection, folder: Path | None) -> Path | None:
    """Return where the file of a side channel lies: as declared, or in the folder of the log."""
    if section.file is None:
        return None
    path = Path(section.file)
    if not path.is_absolute() and not path.exists() and folder is not None:
        return folder / path
    return path


def side_summary(series: SideSeries, record: Record) -> SideSummary:
    """Return the course of a side channel over a record, and the share of the record that it supports.

    Parameters
    ----------
    series : SideSeries
    record : Record

    Returns
    -------
    SideSummary
        Its course in at most 900 spans, SI; empty where no sample of it lies within the record.
    """
    times = np.concatenate(
        [run.start + np.array([0, run.n_samples - 1]) * record.sample_interval for run in record.runs]
    )
    probes = np.concatenate(
        [
            np.linspace(first, last, max(2, round(PROBES * (last - first) / max(record.duration, 1e-9))))
            for first, last in times.reshape(-1, 2)
        ]
    )
    covered = float(np.isfinite(aligned(series, probes)).mean())
    inside = (series.seconds >= times[0]) & (series.seconds <= times[-1]) & np.isfinite(series.values)
    seconds, values = series.seconds[inside], series.values[inside]
    empty = np.empty(0)
    if not values.size:
        return SideSummary(series.unit.si_text, series.unit.text, covered, Timeline(empty, empty, empty, empty))
    starts = np.unique(np.linspace(0, values.size, min(COURSE_SPANS, values.size), endpoint=False).astype(np.int64))
    counts = np.diff(np.append(starts, values.size))
    course = Timeline(
        np.add.reduceat(seconds, starts) / counts,
        np.minimum.reduceat(values, starts),
        np.add.reduceat(values, starts) / counts,
        np.maximum.reduceat(values, starts),
    )
    return SideSummary(series.unit.si_text, series.unit.text, covered, course)
