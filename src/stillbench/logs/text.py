"""Delimited text as a table. Only the columns that are asked for are converted; types are never inferred."""

import io
import itertools
import mmap
import re
from collections.abc import Iterator, Sequence
from typing import Any

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.errors import CellError, LogError
from stillbench.foundation.scratch import LARGE, blocks, large_array
from stillbench.foundation.suggestions import plural
from stillbench.logs.contents import Contents
from stillbench.logs.formats import Format
from stillbench.logs.layout import (
    SAMPLE_BYTES,
    SAMPLE_LINES,
    Layout,
    find_encoding,
    find_layout,
    is_comment,
    is_number,
    split_cells,
)
from stillbench.logs.lines import matching_rows, pattern_of
from stillbench.logs.table import Table
from stillbench.vocabulary.log_sheet import LogSection

NULLS = ("", "nan", "NaN", "NAN", "-nan", "-NaN", "null", "NULL", "None", "NA", "N/A", "n/a", "#N/A", "-", "--")
_BLANKS = re.compile(rb"[ \t]+")
_EDGE_BLANKS = re.compile(rb"(?m)^[ \t]+|(?<![ \t])[ \t]+(?=\r?$)")
_ROWS = re.compile(rb"(?m)^[^\r\n]*[^\s][^\r\n]*")
_COMMENT_LINES = re.compile(rb"(?m)^[ \t]*(?:#|%|!|//).*(?:\r?\n|\r|$)")
BLOCK_BYTES = 1 << 20
MISFITS = 3
MISFIT_SHARE = 1e-3
"""Torn lines that are taken as missing samples; with more than these it is not a table."""
MOST_DEVICES = 16
INTERLEAVE_SAMPLE = 500
FEWEST_TURNS = 8
INTERLEAVE_RATIO = 5.0


def _float(cell: str, decimal: str) -> float:
    try:
        return float(cell.replace(decimal, "."))
    except ValueError:
        return float("nan")


class TextTable(Table):
    """A delimited text file, laid out as found or as declared."""

    def __init__(self, contents: Contents, section: LogSection) -> None:
        self.name = contents.name
        self._path = contents.path
        raw = contents.data
        sample = raw[:SAMPLE_BYTES]
        encoding = section.encoding or find_encoding(sample, contents.name)
        self._bytes: bytes | mmap.mmap = raw
        marked = raw[:3] == b"\xef\xbb\xbf"
        if encoding.lower().replace("_", "-") in ("utf-8", "utf8", "ascii", "us-ascii"):
            encoding = "utf-8"
        elif encoding.lower() == "utf-8-sig":
            self._path = None
        else:
            self._bytes = self._transcode(raw[:], encoding, contents.name)
        if marked and self._bytes[:3] == b"\xef\xbb\xbf":
            self._bytes, self._path = self._bytes[3:], None
        if b"\r" in self._bytes[:SAMPLE_BYTES] and b"\n" not in self._bytes[:SAMPLE_BYTES]:
            self._bytes = self._bytes[:].replace(b"\r", b"\n")  # lines ended in the old way
        if b"\r\r\n" in self._bytes[:SAMPLE_BYTES]:
            self._bytes, self._path = self._bytes[:].replace(b"\r\r\n", b"\n"), None
        remarks = []
        if section.line_pattern is not None:
            whole = self._bytes[:].decode("utf-8", "replace")
            rows, remark = matching_rows(whole, pattern_of(section.line_pattern), contents.name)
            self._bytes = rows.encode()
            remarks.append(remark)
            section = section.model_copy(update={"delimiter": "tab", "head_lines": None})
        # Lines end where the library reader ends them, whatever else may stand in a cell.
        lines = [line.rstrip("\r") for line in self._bytes[:SAMPLE_BYTES].decode("utf-8", "replace").split("\n")]
        if len(self._bytes) > SAMPLE_BYTES:
            lines = lines[:-1]  # the last one is cut
        self.layout: Layout = find_layout(lines[:SAMPLE_LINES], encoding, section, contents.name)
        heads = self.layout.heads or [str(i + 1) for i in range(self.layout.columns)]
        wrapping = f", {contents.wrapping}" if contents.wrapping else ""
        super().__init__(heads, self.layout.spoken + wrapping, has_heads=self.layout.heads is not None)
        self.remarks += remarks
        self.units = [cell.strip("[]() ") or None for cell in self.layout.units or [""] * self.layout.columns]
        self._missing = (*NULLS, *section.missing)
        self._marks = [number for text in section.missing if np.isfinite(number := _float(text, self.layout.decimal))]
        self._sample = lines[self.layout.body_line : SAMPLE_LINES]
        # Quotes count only where they stand in pairs: a stray one would swallow all lines up to the next.
        self._quoted = any('"' in line for line in self._sample) and not any(
            line.count('"') % 2 for line in self._sample
        )
        self._say_what_is_passed_over(lines[section.head_lines or 0 : self.layout.body_line])
        self._first_row: list[str] | None = None
        self.words = self.layout.words
        self.empty = self._empty_columns()
        self._head = [line.strip().encode() for line in lines[: self.layout.body_line] if not is_comment(line)]
        self._body = self._find_body()
        self._expected: list[int] = []
        self._waiting: dict[int, object] = {}
        self._clean = False
        self._numbered = False

    def _say_what_is_passed_over(self, lines: Sequence[str]) -> None:
        """Say which lines above the first whole row hold numbers, where no head tells what they are."""
        above = [line for line in lines if not is_comment(line)]
        if self.layout.heads is None and any(
            is_number(cell, self.layout.decimal) for line in above for cell in split_cells(line, self.layout.delimiter)
        ):
            self.remarks.append(
                f"{plural(len(above), 'line')} above the first whole row passed over: {above[-1][:40]!r}"
            )

    @staticmethod
    def _transcode(raw: bytes, encoding: str, name: str) -> bytes:
        try:
            return raw.decode(encoding).lstrip("\N{ZERO WIDTH NO-BREAK SPACE}").encode("utf-8")
        except (ValueError, LookupError) as error:
            raise LogError(
                f"{name!r} does not decode as {encoding}: {error}", "text in one encoding", "name it in the log sheet"
            ) from error

    def _empty_columns(self) -> frozenset[int]:
        """Columns in which no row of the sample has anything."""
        rows = [split_cells(line, self.layout.delimiter) for line in self._sample if not is_comment(line)]
        return frozenset(
            i for i in range(self.layout.columns) if not any(row[i] for row in rows if len(row) == self.layout.columns)
        )

    def _find_body(self) -> memoryview:
        """Return the bytes from the first row of data on."""
        offset = 0
        for _ in range(self.layout.body_line):
            end = self._bytes.find(b"\n", offset)
            if end < 0:
                break
            offset = end + 1
        body = memoryview(self._bytes)[offset:]
        if self.layout.delimiter == " ":
            if self._comes_again(offset):
                body = self._without_heads(bytes(body))
            body = memoryview(_BLANKS.sub(b"\t", _EDGE_BLANKS.sub(b"", bytes(body))))
            self._head = []
        return body

    def _comes_again(self, offset: int) -> bool:
        return bool(self.layout.heads and self._head) and self._bytes.find(self._head[-1], offset) >= 0

    def _take_heads_out(self) -> bool:
        """Take the head out of the rows where it comes again, once; whether it did."""
        offset = len(self._bytes) - len(self._body)
        if self._clean or not self._comes_again(offset):
            return False
        self._body = self._without_heads(bytes(self._body))
        self._head = []
        return bool(self.restarts)

    def _without_heads(self, body: bytes) -> memoryview:
        """Take out the head where it comes again: the logger was started again there."""
        lines = b"|".join(re.escape(line) for line in sorted(set(self._head), key=len, reverse=True))
        parts, done = [], 0
        for match in re.finditer(rb"(?m)(?:^[ \t]*(?:" + lines + rb")[ \t\r]*(?:\n|\Z))+", body):
            parts.append(body[done : match.start()])
            done = match.end()
            row = sum(len(_ROWS.findall(part)) for part in parts[-1:]) + (self.restarts[-1] if self.restarts else 0)
            self.restarts.append(row)
        parts.append(body[done:])
        if self.restarts:
            where = ", ".join(str(row + 1) for row in self.restarts[:5])
            self.remarks.append(
                f"the head comes again {plural(len(self.restarts), 'time')} (before row {where}): the logger was started"
                " again there"
            )
        return memoryview(b"".join(parts))

    def _convert(self, indices: Sequence[int], *, as_text: bool) -> list[object]:  # noqa: PLR0911  one a thing that is mended first
        """Convert columns by the library reader; rows that do not fit are refused, but for a torn last line."""
        import pyarrow as pa  # noqa: PLC0415  heavy, wanted only when a file is read
        from pyarrow import csv  # noqa: PLC0415

        misfits: list[tuple[int, str]] = []
        if as_text:
            self._take_heads_out()
        if 0 not in indices and not self._clean and self._may_hold_comments():
            return self._without_comments(
                indices, as_text=as_text
            )  # no other cell would tell a row behind a comment mark
        numbered = as_text or self._numbered
        try:
            table = csv.read_csv(
                self._stream(), **self._options(indices, misfits, as_text=as_text, threads=not numbered)
            )
        except pa.ArrowInvalid as error:
            if self._take_heads_out():
                return self._convert(indices, as_text=as_text)
            if not self._clean and _COMMENT_LINES.search(self._body):
                return self._without_comments(indices, as_text=as_text)
            self._explain(indices, error)
        true_misfits = [(number, text) for number, text in misfits if not is_comment(text)]
        if true_misfits and not self._clean and _COMMENT_LINES.search(self._body):
            return self._without_comments(indices, as_text=as_text)
        if true_misfits and not numbered:
            self._numbered = True  # once more, so that the place of each is known
            return self._convert(indices, as_text=as_text)
        columns = [table.column(str(i)) for i in indices]
        if self._quoted and len(columns[0]) + len(misfits) < self._row_lines():
            self._quoted = False  # a quote spans lines: none of them is taken for one then
            return self._convert(indices, as_text=as_text)
        return self._with_holes(columns, true_misfits) if true_misfits else columns

    def _options(
        self, indices: Sequence[int], misfits: list[tuple[int, str]], *, as_text: bool, threads: bool
    ) -> dict[str, Any]:
        """Return the options of the library reader; rows that do not fit go into ``misfits``."""
        import pyarrow as pa  # noqa: PLC0415  heavy, wanted only when a file is read
        from pyarrow import csv  # noqa: PLC0415

        def misfit(row: csv.InvalidRow) -> str:
            misfits.append((row.number or 0, row.text))
            return "skip"

        kind = pa.string() if as_text else pa.float64()
        delimiter = "\t" if self.layout.delimiter == " " else self.layout.delimiter
        names = [str(i) for i in range(self.layout.columns)]
        return {
            "read_options": csv.ReadOptions(column_names=names, use_threads=threads, block_size=BLOCK_BYTES),
            "parse_options": csv.ParseOptions(
                delimiter=delimiter,
                invalid_row_handler=misfit,
                # A stray quote far down would swallow all lines up to the next one.
                quote_char='"' if self._quoted else False,
                # In a single column an empty line is a missing sample; between several it is nothing.
                ignore_empty_lines=self.layout.columns > 1,
            ),
            "convert_options": csv.ConvertOptions(
                include_columns=[str(i) for i in indices],
                column_types={str(i): kind for i in indices},
                null_values=list(self._missing),
                strings_can_be_null=False,
                decimal_point=self.layout.decimal,
                check_utf8=False,
            ),
        }

    def _streamed(self, indices: Sequence[int]) -> list[object] | None:
        """Read columns block by block into scratch files; None where a row does not fit, which wants the whole table."""
        import pyarrow as pa  # noqa: PLC0415  heavy, wanted only when a file is read
        from pyarrow import csv  # noqa: PLC0415

        if 0 not in indices and self._may_hold_comments():
            return None
        room = self._rows_at_most()
        arrays, rows = [large_array(room) for _ in indices], 0
        misfits: list[tuple[int, str]] = []
        try:
            with csv.open_csv(self._stream(), **self._options(indices, misfits, as_text=False, threads=True)) as reader:
                for batch in reader:
                    if misfits or rows + batch.num_rows > room:
                        return None
                    for array, column in zip(arrays, batch.columns, strict=True):
                        array[rows : rows + batch.num_rows] = column.to_numpy(zero_copy_only=False)
                    rows += batch.num_rows
        except pa.ArrowInvalid:
            return None
        return None if misfits else [array[:rows] for array in arrays]

    def _rows_at_most(self) -> int:
        """Return more rows than the body can hold, from the shortest lines of its sample."""
        shortest = min((len(line.encode()) for line in self._sample if line.strip()), default=1)
        return len(self._body) // max(1, shortest - 2) + 1

    def _is_large(self) -> bool:
        lines = [len(line.encode()) + 1 for line in self._sample if line.strip()]
        return bool(lines) and len(self._body) / (sum(lines) / len(lines)) >= LARGE

    def _stream(self) -> Any:  # noqa: ANN401  of the library
        """Return the rows of data: from the file itself where they stand there as they are, so that no page is mapped twice."""
        import pyarrow as pa  # noqa: PLC0415  heavy, wanted only when a file is read

        if self._path is None or not isinstance(self._bytes, mmap.mmap) or self._body.obj is not self._bytes:
            return pa.BufferReader(pa.py_buffer(self._body))
        file = pa.OSFile(str(self._path))
        file.seek(len(self._bytes) - len(self._body))
        return file

    def _may_hold_comments(self) -> bool:
        """Whether a row stands behind a comment mark; a log of numbers has none of these signs at all."""
        offset = len(self._bytes) - len(self._body) if self._body.obj is self._bytes else 0
        whole = self._bytes if self._body.obj is self._bytes else bytes(self._body)
        if all(whole.find(mark, offset) < 0 for mark in (b"#", b"%", b"!", b"//")):
            return False
        return _COMMENT_LINES.search(self._body) is not None

    def _without_comments(self, indices: Sequence[int], *, as_text: bool) -> list[object]:
        self._body = memoryview(_COMMENT_LINES.sub(b"", bytes(self._body)))
        self._clean = True
        self.remarks.append("comment lines within the data were passed over")
        return self._convert(indices, as_text=as_text)

    def _with_holes(self, columns: list[object], misfits: Sequence[tuple[int, str]]) -> list[object]:
        """Give rows that do not fit an empty cell in their place, so that no time is lost; refuse when they are many."""
        import pyarrow as pa  # noqa: PLC0415  heavy, wanted only when a file is read

        rows = len(columns[0]) if isinstance(columns[0], pa.ChunkedArray) else 0
        text = misfits[0][1].strip()
        line = next((number for number, found in self._lines() if found.strip() == text), misfits[0][0])
        if len(misfits) > max(MISFITS, MISFIT_SHARE * rows):
            raise LogError(
                f"{len(misfits)} lines of {self.name!r} do not have {plural(self.layout.columns, 'column')};"
                f" the first is line {line}: {text[:60]!r}",
                "rows with the same columns all through",
                "cut the lines of one device into a file of their own, or remove the lines that are no data",
            )
        remark = (
            f"{plural(len(misfits), 'torn line')} taken as missing samples; the first is line {line}: {text[:40]!r}"
        )
        if remark not in self.remarks:
            self.remarks.append(remark)
        filled = []
        for column in columns:
            if not isinstance(column, pa.ChunkedArray):
                raise TypeError(type(column))
            pieces, done = [], 0
            for before, (number, _) in enumerate(sorted(misfits)):
                place = number - 1 - before  # rows that fit, above this one
                pieces += [column.slice(done, place - done), pa.chunked_array([pa.nulls(1, column.type)])]
                done = place
            pieces.append(column.slice(done))
            filled.append(pa.chunked_array([chunk for piece in pieces for chunk in piece.chunks], type=column.type))
        return filled

    def interleaved(self) -> tuple[int, int] | None:
        """Return a column whose few values take turns from row to row and part the readings of another one.

        Several devices in one file look like this: a number of the device, then its readings.

        Returns
        -------
        (column, values) or None
        """
        rows = [split_cells(line, self.layout.delimiter) for line in self._sample if not is_comment(line)]
        rows = [row for row in rows if len(row) == self.layout.columns][-INTERLEAVE_SAMPLE:]
        cells = np.array([[_float(cell, self.layout.decimal) for cell in row] for row in rows])
        for column in range(self.layout.columns):
            values = [row[column] for row in rows]
            kinds = sorted(set(values))
            if not 2 <= len(kinds) <= MOST_DEVICES or not all(value.isdecimal() for value in kinds):  # noqa: PLR2004
                continue
            if sum(a != b for a, b in itertools.pairwise(values)) < len(values) / 2:
                continue
            members = [cells[[value == kind for value in values]] for kind in kinds]
            if min(len(member) for member in members) < FEWEST_TURNS:
                continue
            inner = np.median([member.std(axis=0) for member in members], axis=0)
            outer = np.std([member.mean(axis=0) for member in members], axis=0)
            parted = outer > INTERLEAVE_RATIO * inner
            parted[column] = False
            if parted.any():
                return column, len(kinds)
        return None

    def _lines(self) -> Iterator[tuple[int, str]]:
        """Lines of the body with their numbers in the file, from 1."""
        stream = io.BytesIO(self._bytes[:])
        for number, line in enumerate(stream, start=1):
            if number > self.layout.body_line:
                yield number, line.decode("utf-8", "replace")

    def _row_lines(self) -> int:
        """Return how many lines of the body hold something."""
        return len(_ROWS.findall(self._body))

    def _explain(self, indices: Sequence[int], error: Exception) -> None:
        """Find the first cell that is no number and raise CellError; otherwise say what the reader said."""
        for number, line in self._lines():
            if is_comment(line):
                continue
            blank = self.layout.delimiter == " "
            plain = line.split() if blank else [cell.strip() for cell in line.split(self.layout.delimiter)]
            cells = split_cells(line, self.layout.delimiter) if self._quoted else plain
            for index in indices:
                if index < len(cells) and cells[index] not in self._missing:
                    cell = cells[index]
                    if not is_number(cell, self.layout.decimal):
                        raise CellError(self.heads[index], number, cell, decimal=self.layout.decimal) from error
        raise LogError(f"{self.name!r} cannot be read as a table ({error})", "rows of numbers") from error

    def expect(self, indices: Sequence[int]) -> None:
        self._expected = list(dict.fromkeys(indices))

    def numbers(self, indices: Sequence[int]) -> list[FloatArray]:
        import pyarrow as pa  # noqa: PLC0415  heavy, wanted only when a file is read

        wanted, indices = indices, list(dict.fromkeys(indices))
        together = list(dict.fromkeys([*(index for index in indices if index not in self._waiting), *self._expected]))
        self._expected = []
        if any(index not in self._waiting for index in indices):
            found = self._streamed(together) if self._is_large() else None
            self._waiting |= dict(
                zip(together, found if found is not None else self._convert(together, as_text=False), strict=True)
            )
        columns = [self._waiting.pop(index) for index in indices]
        if isinstance(self._bytes, mmap.mmap) and hasattr(mmap, "MADV_DONTNEED"):
            self._bytes.madvise(mmap.MADV_DONTNEED)  # its pages have been read; the system may have them back
        arrays: list[FloatArray] = []
        while columns:  # each is let go before the next is copied
            column = columns.pop(0)
            array = np.asarray(column.to_numpy() if isinstance(column, pa.ChunkedArray) else column, dtype=np.float64)
            del column
            if self._marks and not array.flags.writeable:
                array = array.copy()
            self._take_marks_out(array)
            arrays.append(array)
        pa.default_memory_pool().release_unused()
        by_index = dict(zip(indices, arrays, strict=True))
        return [by_index[index] for index in wanted]

    def _take_marks_out(self, array: FloatArray) -> None:
        """Make NaN of the marks of missing samples, however they are written in the file."""
        for mark in self._marks:
            for part in blocks(array.size):
                array[part][array[part] == mark] = np.nan

    def texts(self, index: int) -> Sequence[str]:
        import pyarrow as pa  # noqa: PLC0415  heavy, wanted only when a file is read

        (column,) = self._convert([index], as_text=True)
        if not isinstance(column, pa.ChunkedArray):
            raise TypeError(type(column))
        return [str(value) for value in column.to_pylist()]

    def edge_rows(self, count: int) -> tuple[list[list[str]], list[list[str]]]:
        delimiter = "\t" if self.layout.delimiter == " " else self.layout.delimiter
        edges = []
        for part in (self._body[:SAMPLE_BYTES], self._body[-SAMPLE_BYTES:]):
            lines = [line for line in bytes(part).decode("utf-8", "replace").splitlines() if not is_comment(line)]
            rows = [split_cells(line, delimiter) for line in lines]
            edges.append([row for row in rows if len(row) == self.layout.columns])
        return edges[0][:count], edges[1][-count:]

    def first_text(self, index: int) -> str:
        if self._first_row is not None:
            return self._first_row[index] if index < len(self._first_row) else ""
        first = bytes(self._body[:SAMPLE_BYTES]).decode("utf-8", "replace").splitlines()
        delimiter = "\t" if self.layout.delimiter == " " else self.layout.delimiter
        for line in first:
            if not is_comment(line):
                self._first_row = cells = split_cells(line, delimiter)
                return cells[index] if index < len(cells) else ""
        return ""


FORMAT = Format(("text",), lambda _: True, TextTable)
