"""understand_log: what a log is taken for, how to say otherwise, and the log sheet that says it outright."""

from collections.abc import Mapping, Sequence
from pathlib import Path

import numpy as np

from stillbench.foundation.errors import ClockError, LogError, UnitError
from stillbench.foundation.progress import SILENT, Progress
from stillbench.foundation.suggestions import listed
from stillbench.foundation.units import parse_unit
from stillbench.logs.clock import audit_clock
from stillbench.logs.dates import is_stamp
from stillbench.logs.layout import DELIMITER_WORDS
from stillbench.logs.read import check_rate, open_log, time_column
from stillbench.logs.stamps import read_stamps, split_head
from stillbench.logs.table import Table
from stillbench.logs.text import TextTable
from stillbench.vocabulary.log_sheet import LogSheet
from stillbench.vocabulary.sensor_log import SensorLog, Source, Stamps
from stillbench.vocabulary.understanding import ColumnUnderstanding, Understanding

SHOWN = 3
MOST_TRIED = 16
"""Columns; of wider logs none is tried for a clock."""
STEADY = 0.5
SPELLED = {"\t": "tab", " ": "blank"}


def understand_log(
    log: Path | Sequence[Path],
    *,
    sheet: LogSheet | None = None,
    units: Mapping[str, str] | None = None,
    rate: float | None = None,
    time: str | int | None = None,
    time_unit: str | None = None,
    progress: Progress = SILENT,
) -> Understanding:
    """Say what a log is understood to be; nothing is computed from its samples.

    Parameters
    ----------
    log : path, or paths of files that make one night
    sheet : LogSheet, optional
    units : mapping of column to unit, optional
        The empty key stands for all.
    rate, time, time_unit
        As for ``read_log``.
    progress : Progress

    Returns
    -------
    Understanding

    Raises
    ------
    StillbenchError
        When it cannot be read; a clock that is missing or unclear is said and no error.
    """
    progress.stage("reading")
    sheet, units = sheet or LogSheet(), dict(units or {})
    rate = rate if rate is not None else sheet.clock.rate
    check_rate(rate)
    table, _ = open_log(log, sheet, "")
    try:
        index = time_column(table, time, sheet)
        stamps, sentence = None, ""
        if index is not None:
            try:
                stamps, _, sentence = read_stamps(table, index, time_unit or sheet.clock.unit)
            except ClockError as error:
                sentence = f"no clock: {error.message}"
        elif rate or table.rate:
            rate = rate or table.rate
            sentence = f"{rate:.9g} Hz, " + ("declared" if rate != table.rate else "as the file itself says")
        else:
            hint = _rising(table)
            sentence = f"no clock: no column is known for time; give --time COLUMN with --time-unit, or --rate HZ{hint}"
        rows = stamps.seconds.size if stamps else None
        columns = _columns(table, index, sheet, units)
        data = [column.number - 1 for column in columns if column.role == "data"]
        if rows is None and rate and data:
            rows = table.numbers(data[:1])[0].size
        first, last = table.edge_rows(SHOWN)
        findings, interval, jitter, duration = None, None, None, None
        if rows and (stamps or rate):
            source = Source(table.format, 0, "", rows, table.format)
            grid = audit_clock(SensorLog(source, (), stamps, rate, (), tuple(table.restarts)))
            findings, interval, jitter = grid.findings, grid.sample_interval, grid.jitter
            duration = float(grid.seconds[-1]) + interval
        return Understanding(
            ", ".join(path.name for path in ([log] if isinstance(log, Path) else log)),
            table.format,
            rows,
            columns,
            tuple(map(tuple, first)),
            tuple(map(tuple, last)),
            sentence,
            interval,
            duration,
            jitter,
            findings or (),
            tuple(table.remarks),
            _overrides(table),
            _sheet(table, columns, stamps, rate, sheet),
        )
    finally:
        table.close()


def _rising(table: Table) -> str:
    """Name the columns that rise from row to row, as stamps do."""
    if len(table.heads) > MOST_TRIED:
        return ""
    found = []
    for index, head in enumerate(table.heads):
        if index not in table.empty:
            try:
                steps = np.diff(table.numbers([index])[0])
            except LogError:
                continue
            if steps.size and (steps >= 0).all() and (steps > 0).mean() > STEADY:
                found.append(repr(head))
    return f" ({listed(found)} {'rises' if len(found) == 1 else 'rise'} from row to row)" if found else ""


def _columns(
    table: Table, time_index: int | None, sheet: LogSheet, units: Mapping[str, str]
) -> tuple[ColumnUnderstanding, ...]:
    by_sheet = {table.index_of(section.column or name): section.unit for name, section in sheet.channel.items()}
    by_flag = {table.index_of(name): unit for name, unit in units.items() if name}
    columns = []
    for index, head in enumerate(table.heads):
        role = "time" if index == time_index else "empty" if index in table.empty else "data"
        role = "time" if role == "data" and is_stamp(table.first_text(index)) else role
        role = "words" if index in table.words and role == "data" else role
        offered = split_head(head)[1] or table.units[index]
        declared = by_flag.get(index) or by_sheet.get(index) or (units.get("") if role == "data" else None)
        columns.append(ColumnUnderstanding(index + 1, head, role, offered, declared))
    return tuple(columns)


def _overrides(table: Table) -> tuple[tuple[str, str, str], ...]:
    """Return what was concluded of the file itself, and the key of a log sheet that says otherwise."""
    if not isinstance(table, TextTable):
        return (("format", table.format, '[log] format = "..."'),)
    layout = table.layout
    decimal = "comma" if layout.decimal == "," else "point"
    found = [
        ("encoding", layout.encoding, '[log] encoding = "..."'),
        ("decimal mark", decimal, '[log] decimal = "." or ","'),
        ("lines above the data", str(layout.body_line), "[log] head_lines = N"),
    ]
    if layout.columns > 1:
        found.insert(1, ("delimiter", DELIMITER_WORDS[layout.delimiter], '[log] delimiter = "..."'))
    return tuple(found)


def _quoted(text: str) -> str:
    from tomlkit import string  # noqa: PLC0415  wanted only where a sheet is written

    return string(text).as_string()


def _layout_lines(table: Table, sheet: LogSheet) -> list[str]:
    """Return the keys of the section [log]."""
    said = sheet.log
    keys: dict[str, object] = {}
    if isinstance(table, TextTable):
        layout = table.layout
        keys["encoding"] = layout.encoding
        if said.line_pattern is not None:
            keys["line_pattern"] = said.line_pattern
        else:
            if layout.columns > 1:
                keys["delimiter"] = SPELLED.get(layout.delimiter, layout.delimiter)
            keys["head_lines"] = layout.body_line
        keys["decimal"] = layout.decimal
    keys |= {
        key: getattr(said, key) for key in ("format", "dataset", "sample_type", "interleaved", "head_bytes", "bits")
    }
    if said.sample_type:
        keys |= {"byte_order": said.byte_order, "offset_binary": said.offset_binary}
    lines = [f"{key} = {_written(value)}" for key, value in keys.items() if value is not None]
    marks = ", ".join(map(_quoted, said.missing))
    return [*lines, f"missing = [{marks}]  # texts or numbers that mark a missing sample"]


def _written(value: object) -> str:
    return str(value).lower() if isinstance(value, bool | int) else _quoted(str(value))


def _sheet(
    table: Table,
    columns: Sequence[ColumnUnderstanding],
    stamps: Stamps | None,
    rate: float | None,
    sheet: LogSheet,
) -> str:
    """Return a log sheet that declares what was found; units that nobody has confirmed stand behind a comment mark."""
    lines = ["# What this log is, said outright. Lines behind a comment mark want a decision.", "", "[log]"]
    lines += [*_layout_lines(table, sheet), "", "[clock]"]
    named = next((column for column in columns if column.role == "time"), None)
    if stamps is not None and named is not None:
        lines += [f"column = {_quoted(named.head)}"]
        lines += [f"unit = {_quoted(stamps.unit)}"] if stamps.unit else []
    elif rate:
        lines += ['column = "none"', f"rate = {rate!r}  # Hz"]
    else:
        lines += ['# column = "..."', '# unit = "s"', "# rate = 100.0  # Hz, where there are no stamps"]
    shorts = [split_head(column.head)[0] or column.head for column in columns]
    for column in columns:
        if column.role != "data":
            continue
        short = split_head(column.head)[0] or column.head
        name = short if shorts.count(short) == 1 else column.head
        lines += ["", f"[channel.{_quoted(name)}]", f"column = {_quoted(column.head)}"]
        if column.declared:
            lines.append(f"unit = {_quoted(column.declared)}")
        else:
            guess = f"unit = {_quoted(column.unit)}" if column.unit else 'unit = "..."'
            lines.append(f"# {guess}{_known(column.unit)}")
    return "\n".join(lines) + "\n"


def _known(unit: str | None) -> str:
    if unit is None:
        return "  # the file does not say"
    try:
        parse_unit(unit)
    except UnitError:
        return "  # as the file writes it; no unit that is known by this name"
    return "  # as the file says; take the mark away to confirm"
