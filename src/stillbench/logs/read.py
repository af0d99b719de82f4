"""read_log: from a file, or an array, to a SensorLog."""

import hashlib
from collections.abc import Callable, Mapping, Sequence
from contextlib import nullcontext
from pathlib import Path
from typing import Any

import numpy as np

from stillbench.foundation.errors import ClockError, ColumnError, LogError, UnitError, UnitMissingError, UsageError
from stillbench.foundation.progress import SILENT, Progress
from stillbench.foundation.suggestions import did_you_mean, listed, plural
from stillbench.foundation.units import Unit, parse_unit
from stillbench.logs.arrays import ArrayTable, columns_of
from stillbench.logs.contents import open_contents
from stillbench.logs.dates import is_stamp
from stillbench.logs.formats import damage_said, read_table
from stillbench.logs.joined import JoinedTable
from stillbench.logs.side import side_file, side_series
from stillbench.logs.stamps import find_time_column, read_stamps, split_head
from stillbench.logs.table import Table
from stillbench.logs.text import TextTable
from stillbench.vocabulary.log_sheet import LogSheet
from stillbench.vocabulary.sensor_log import Channel, SensorLog, SideSeries, Source, Stamps

FEWEST_ROWS = 16
SPREADSHEET_SUFFIXES = (".xlsx", ".xls", ".ods", ".xlsm")


def _open_table(path: Path, sheet: LogSheet) -> tuple[Table, Callable[[int], Source]]:
    """Return the table of a file, and what names its source once its rows are counted."""
    if path.suffix.lower() in SPREADSHEET_SUFFIXES and path.is_file():
        raise LogError(
            f"{path.name!r} is a spreadsheet file",
            "a text file of numbers",
            "open it where it was made, save the sheet as CSV (UTF-8), and give that; check that no digits were cut",
        )
    contents = open_contents(path)
    table = read_table(contents, sheet.log)
    return table, lambda rows: Source(path.name, contents.file_bytes, contents.hashing.result(), rows, table.format)


def _open_joined(paths: Sequence[Path], sheet: LogSheet) -> tuple[Table, Callable[[int], Source]]:
    """Return several files as one table; the digest is that of their bytes one behind the other."""
    opened = [_open_table(path, sheet) for path in paths]
    names = [path.name for path in paths]
    table = JoinedTable([part for part, _ in opened], names)

    def source(rows: int) -> Source:
        digest, size = hashlib.sha256(), 0
        for path in paths:
            with path.open("rb") as stream:
                while chunk := stream.read(1 << 20):
                    digest.update(chunk)
                    size += len(chunk)
        return Source(", ".join(names), size, digest.hexdigest(), rows, table.format)

    return table, source


def open_log(log: Any, sheet: LogSheet, name: str) -> tuple[Table, Callable[[int], Source]]:  # noqa: ANN401
    """Return the table of a file, of files that make one night, or of data in memory, and what names its source."""
    if isinstance(log, str | Path):
        return _open_table(Path(log), sheet)
    if _is_files(log):
        return _open_joined([Path(part) for part in log], sheet)
    return _wrap_array(log, name)


def time_column(table: Table, given: str | int | None, sheet: LogSheet) -> int | None:
    """Return the time column: the one named by flag or sheet, or the one known by its head; None for no stamps."""
    column = given if given is not None else sheet.clock.column
    if column is None:
        return find_time_column(table)
    return None if str(column).lower() == "none" else table.index_of(column)


def _folder_of(log: Any) -> Path | None:  # noqa: ANN401  whatever was handed in
    first = log[0] if _is_files(log) else log
    return Path(first).parent if isinstance(first, str | Path) else None


def _is_files(log: Any) -> bool:  # noqa: ANN401  whatever was handed in
    return isinstance(log, list | tuple) and bool(log) and all(isinstance(part, str | Path) for part in log)


def _plain(data: Any) -> np.ndarray:  # noqa: ANN401  whatever was handed in
    """Return data as an array, what is masked as NaN."""
    return np.ma.filled(data.astype(float), np.nan) if isinstance(data, np.ma.MaskedArray) else np.asarray(data)


def _wrap_array(data: Any, name: str) -> tuple[Table, Callable[[int], Source]]:  # noqa: ANN401  arrays, series, frames, mappings
    if isinstance(data, Mapping):
        columns = {str(key): _plain(value) for key, value in data.items()}
    elif hasattr(data, "columns") and hasattr(data, "to_numpy"):
        heads = [str(key) for key in data.columns]
        if len(set(heads)) < len(heads):
            raise LogError("the frame names a column twice", "distinct names")
        columns = {str(key): data[key].to_numpy() for key in data.columns}
    elif hasattr(data, "to_numpy"):
        columns = {str(getattr(data, "name", None) or "1"): data.to_numpy()}
    else:
        try:
            columns = columns_of(_plain(data), name)
        except ValueError as error:
            raise LogError(f"the data are no array ({error})", "equal columns of numbers") from error
    if any(np.ndim(column) > 1 for column in columns.values()):
        raise LogError("a column holds more than one number in a row", "columns of single numbers")
    lengths = {np.shape(column)[0] if np.ndim(column) else 0 for column in columns.values()}
    if len(lengths) != 1 or lengths == {0}:
        raise LogError("the data are empty or differ in length", "equal columns of numbers")
    digest = hashlib.sha256()
    for column in columns.values():
        digest.update(np.ascontiguousarray(column).data if column.dtype.kind in "iufb" else str(list(column)).encode())
    size = sum(int(np.asarray(column).nbytes) for column in columns.values())
    named = not all(key.isdecimal() for key in columns)
    table = ArrayTable(columns, "array in memory", has_heads=named)
    return table, lambda rows: Source(name, size, digest.hexdigest(), rows, table.format)


def _chosen(
    table: Table, sheet: LogSheet, channels: Sequence[str], units: Mapping[str, str], time_index: int | None
) -> list[tuple[str, int]]:
    """Labels and columns of the channels that are wanted."""
    declared = {name: table.index_of(section.column or name) for name, section in sheet.channel.items()}
    idle = table.empty | table.words
    data = [index for index in range(len(table.heads)) if index != time_index and index not in idle]
    data = [index for index in data if not is_stamp(table.first_text(index))]
    if "all" in channels:
        named = {table.index_of(name): name for name in units if name}
        by_sheet = {index: name for name, index in declared.items() if sheet.channel[name].unit}
        wanted = {**{index: table.heads[index] for index in named}, **by_sheet}
        if not wanted and "" in units:
            wanted = {index: table.heads[index] for index in data}
        if not wanted:
            raise UsageError(
                "--channel all takes every column that has a unit, and none has one",
                "units",
                "give --unit NAME=UNIT for each, or --unit UNIT if all columns share it",
            )
        return [(label, index) for index, label in sorted(wanted.items())]
    if channels:
        return [(name, declared[name]) if name in declared else _named(table, name) for name in channels]
    if declared:
        return list(declared.items())
    if len(data) == 1:
        return [(table.heads[data[0]], data[0])]
    raise ColumnError(
        "",
        table.heads,
        f"the log has {len(data)} data columns: {listed([table.heads[i] for i in data])}",
        "choose with --channel NAME (or --channel all, for all that have a unit)",
    )


def _named(table: Table, name: str) -> tuple[str, int]:
    index = table.index_of(name)
    return table.heads[index], index


def _unit_for(label: str, table: Table, index: int, sheet: LogSheet, units: Mapping[str, str]) -> Unit:
    section, head = sheet.channel.get(label), table.heads[index]
    text = units.get(label) or units.get(head) or units.get("") or (section.unit if section else None)
    if text is None:
        offered = split_head(head)[1] or table.units[index]
        try:
            offered = parse_unit(offered).text if offered else None
        except UnitError:
            offered = None
        raise UnitMissingError(label, offered)
    return parse_unit(text)


def _refuse_interleaved(table: Table) -> None:
    found = table.interleaved() if isinstance(table, TextTable) else None
    if found is not None:
        column, devices = found
        raise LogError(
            f"column {table.heads[column]!r} takes {devices} values in turn from row to row, and the readings differ"
            f" between them: {devices} devices are interleaved in one file",
            "the rows of one device",
            "cut the lines of one device into a file of their own",
        )


def check_rate(rate: float | None) -> None:
    """Refuse a rate that is not a positive number.

    Raises
    ------
    ClockError
    """
    if rate is not None and not (isinstance(rate, int | float | np.number) and np.isfinite(rate) and rate > 0):
        raise ClockError(f"the rate is {rate} Hz", "a number above zero", "give --rate in samples per second")


def read_log(
    log: Any,  # noqa: ANN401  a path, an array, a series, a frame or a mapping of columns
    *,
    sheet: LogSheet | None = None,
    channels: Sequence[str] = (),
    units: Mapping[str, str] | None = None,
    rate: float | None = None,
    time: str | int | None = None,
    time_unit: str | None = None,
    name: str = "array",
    progress: Progress = SILENT,
) -> SensorLog:
    """Read one log.

    Parameters
    ----------
    log : path, list of paths, array, pandas Series or DataFrame, or mapping of column name to array
        A file in a format of ``logs/formats.py``, plain or compressed; files that make one night, in their order; or the
        data themselves, rows of samples.
    sheet : LogSheet, optional
        What is declared; the arguments below override it.
    channels : sequence of str
        Heads or numbers of the columns wanted, or ``all``.
    units : mapping of channel to unit
        The empty key stands for all channels.
    rate : float, optional
        Hz, where there are no stamps.
    time : str or int, optional
        Time column; ``none`` ignores stamps.
    time_unit : str, optional
        s, ms, us, ns, iso or unix.
    name : str
        Of data that are not a file.
    progress : Progress

    Returns
    -------
    SensorLog

    Raises
    ------
    StillbenchError
        One line that says what was found, what was wanted, and the way out.
    """
    progress.stage("reading")
    sheet = sheet or LogSheet()
    units = dict(units or {})
    rate = rate if rate is not None else sheet.clock.rate
    check_rate(rate)
    table, source_of = open_log(log, sheet, name)
    try:
        guarded = _folder_of(log) is not None and not isinstance(table, TextTable)
        with damage_said(table.format) if guarded else nullcontext():
            return _read(table, source_of, sheet, channels, units, rate, time, time_unit, _folder_of(log))
    finally:
        table.close()


def _read(
    table: Table,
    source_of: Callable[[int], Source],
    sheet: LogSheet,
    channels: Sequence[str],
    units: Mapping[str, str],
    rate: float | None,
    time: str | int | None,
    time_unit: str | None,
    folder: Path | None,
) -> SensorLog:
    """Choose the columns and read them."""
    understood = [table.format]
    time_index = time_column(table, time, sheet)
    # A column in --unit NAME=UNIT may be given by its number too.
    units = dict(units) | {
        table.heads[table.index_of(key)]: unit for key, unit in units.items() if key and key not in sheet.channel
    }
    chosen = _chosen(table, sheet, channels, units, time_index)
    spoken = {label: _unit_for(label, table, index, sheet, units) for label, index in chosen}
    stamps, present = None, None
    references = _references(table, sheet, [label for label, _ in chosen])
    wanted = [*(index for _, index in chosen), *references.values()]
    table.expect(wanted)
    if time_index is not None:
        stamps, present, sentence = read_stamps(table, time_index, time_unit or sheet.clock.unit)
        understood.append(sentence)
    elif rate is None and table.rate is not None:
        rate = table.rate
        understood.append(f"{rate:.9g} Hz, as the file itself says; override with --rate")
    elif rate is None:
        hint = "" if table.has_heads else " (the columns have no heads)"
        raise ClockError(
            f"the log has no time column that is known by its head{hint} and no rate is given",
            "stamps or a rate",
            "name the column with --time NAME (and --time-unit), or give --rate HZ",
        )
    _refuse_interleaved(table)
    columns = table.numbers(list(dict.fromkeys(wanted)))
    if present is not None and not present.all():
        columns = [column[present] for column in columns]
        understood.append(f"{plural(int((~present).sum()), 'row')} without a stamp left out")
    rows = columns[0].size
    if rows < FEWEST_ROWS:
        raise LogError(f"the log has {rows} rows", f"at least {FEWEST_ROWS}", "log for longer")
    kinds = {label: sheet.channel[label].kind if label in sheet.channel else "rate" for label, _ in chosen}
    by_index = dict(zip(dict.fromkeys(wanted), columns, strict=True))
    del columns
    made = tuple(
        Channel(
            label,
            by_index[index],
            spoken[label],
            kinds[label],
            by_index[references[label]] if label in references else None,
        )
        for label, index in chosen
    )
    by_index.clear()
    understood += table.remarks
    side = _side(table, sheet, stamps, rate, rows, folder)
    return SensorLog(source_of(rows), made, stamps, rate, tuple(understood), tuple(table.restarts), side)


def _references(table: Table, sheet: LogSheet, labels: Sequence[str]) -> dict[str, int]:
    """Columns of the references of ratiometric outputs, by channel."""
    found = {}
    for label in labels:
        section = sheet.channel.get(label)
        if section is not None and section.front_end is not None and section.front_end.reference is not None:
            found[label] = table.index_of(section.front_end.reference)
    return found


def _side(
    table: Table, sheet: LogSheet, stamps: Stamps | None, rate: float | None, rows: int, folder: Path | None
) -> tuple[SideSeries, ...]:
    """Side channels of the log sheet, each from the log itself or from a file of its own."""
    made = []
    opened: dict[Path, Table] = {}
    try:
        for name, section in sheet.side.items():
            path = side_file(section, folder)
            if path is not None and path not in opened:
                opened[path] = _open_table(path, LogSheet())[0]
            seconds = stamps.seconds if stamps is not None else np.arange(rows) / (rate or 1.0)
            other = opened[path] if path is not None else None
            made.append(side_series(name, section, table, seconds, stamps, other, sheet))
    finally:
        for other in opened.values():
            other.close()
    return tuple(made)


def unit_flags(flags: Sequence[str], columns: Sequence[str] = ()) -> dict[str, str]:
    """Turn ``UNIT`` and ``NAME=UNIT`` flags into a mapping; the empty key stands for all channels.

    Raises
    ------
    UsageError
        When two flags speak of the same channel.
    """
    units: dict[str, str] = {}
    for flag in flags:
        name, sign, unit = flag.rpartition("=")
        if sign and not unit:
            hint = did_you_mean(name, columns)
            raise UsageError(f"--unit {flag!r} names no unit", "--unit NAME=UNIT", hint)
        if name in units:
            who = f"channel {name!r}" if name else "all channels"
            raise UsageError(f"two --unit flags speak of {who}", "one", "")
        units[name] = unit
    return units
