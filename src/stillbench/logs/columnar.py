"""Parquet and Feather (Arrow IPC) files."""

from collections.abc import Sequence
from typing import Any

import numpy as np

from stillbench.foundation.arrays import FloatArray, IntArray
from stillbench.foundation.errors import LogError
from stillbench.foundation.scratch import LARGE, large_array
from stillbench.logs.contents import Contents, check_expansion
from stillbench.logs.formats import Format
from stillbench.logs.layout import distinct
from stillbench.logs.table import Table
from stillbench.vocabulary.log_sheet import LogSection

PARQUET_MAGIC = b"PAR1"
ARROW_MAGIC = b"ARROW1"


class ColumnarTable(Table):
    """Columns of a Parquet or Feather file; only those asked for are read."""

    def __init__(self, contents: Contents, section: LogSection) -> None:  # noqa: ARG002  a reader's signature
        import pyarrow as pa  # noqa: PLC0415  heavy, wanted only when a file is read

        self._name = contents.name
        self._buffer = pa.py_buffer(contents.data)
        parquet = bytes(contents.data[:4]) == PARQUET_MAGIC
        try:
            if parquet:
                from pyarrow import parquet as reader  # noqa: PLC0415

                self._file: Any = reader.ParquetFile(pa.BufferReader(self._buffer))
                schema, self._rows = self._file.schema_arrow, self._file.metadata.num_rows
            else:
                self._file = pa.ipc.open_file(pa.BufferReader(self._buffer))
                schema = self._file.schema
                self._rows = sum(self._file.get_batch(i).num_rows for i in range(self._file.num_record_batches))
        except (pa.ArrowException, OSError, ValueError) as error:
            raise self._damaged(error) from error
        self._types, self._names = [field.type for field in schema], list(schema.names)
        if not self._names:
            raise LogError(f"{contents.name!r} has no columns", "columns of numbers")
        super().__init__(
            distinct(schema.names),
            f"{'Parquet' if parquet else 'Feather'}, {len(schema.names)} columns",
            has_heads=True,
        )
        if self._rows == 0:
            raise LogError(f"{contents.name!r} holds no rows", "rows of numbers")

    def _damaged(self, error: Exception) -> LogError:
        reason = str(error).split("\n", maxsplit=1)[0][:80]
        return LogError(
            f"{self._name!r} is damaged or cannot be read ({reason})", "a whole file", "fetch the log again"
        )

    def _column(self, index: int) -> Any:  # noqa: ANN401  an array of the library
        import pyarrow as pa  # noqa: PLC0415  heavy, wanted only when a file is read

        check_expansion(8 * self._rows, self._buffer.size, self._name)
        name = self.heads[index]
        try:
            if hasattr(self._file, "schema_arrow"):
                plain = self._is_plain(index)
                found = self._file.read(columns=[name]).column(0) if plain else self._file.read().column(index)
            else:
                batches = [self._file.get_batch(i).column(index) for i in range(self._file.num_record_batches)]
                found = pa.chunked_array(batches)
            found.validate(full=True)
        except (pa.ArrowException, OSError, ValueError, SystemError) as error:
            raise self._damaged(error) from error
        if len(found) != self._rows:
            raise self._damaged(ValueError(f"column {name!r} has {len(found)} of {self._rows} rows"))
        return found

    def _is_plain(self, index: int) -> bool:
        """Whether the column may be asked for by its name."""
        import pyarrow as pa  # noqa: PLC0415  heavy, wanted only when a file is read

        return self._names.count(self._names[index]) == 1 and not any(pa.types.is_nested(kind) for kind in self._types)

    def _streamed(self, index: int) -> FloatArray:
        """Read a long column batch by batch into a scratch file."""
        import pyarrow as pa  # noqa: PLC0415  heavy, wanted only when a file is read

        check_expansion(8 * self._rows, self._buffer.size, self._name)
        values, done = large_array(self._rows), 0
        if hasattr(self._file, "iter_batches"):
            batches = self._file.iter_batches(columns=[self._names[index]])
        else:
            batches = (self._file.get_batch(i).select([index]) for i in range(self._file.num_record_batches))
        for batch in batches:
            column = batch.column(0)
            column.validate(full=True)
            part = column.cast(pa.float64(), safe=False).to_numpy(zero_copy_only=False)
            values[done : done + part.size] = part
            done += part.size
        if done != self._rows:
            raise self._damaged(ValueError(f"{done} of {self._rows} rows"))
        return values

    def numbers(self, indices: Sequence[int]) -> list[FloatArray]:
        import pyarrow as pa  # noqa: PLC0415  heavy, wanted only when a file is read

        arrays = []
        for index in indices:
            kind = self._types[index]
            if not (pa.types.is_integer(kind) or pa.types.is_floating(kind) or pa.types.is_boolean(kind)):
                raise LogError(f"column {self.heads[index]!r} holds {kind}, not real numbers", "integers or floats")
            if self._rows >= LARGE and self._is_plain(index):
                arrays.append(self._streamed(index))
                continue
            column = self._column(index)
            arrays.append(np.asarray(column.cast(pa.float64(), safe=False).to_numpy(), dtype=np.float64))
        return arrays

    def instants(self, index: int) -> tuple[IntArray, bool] | None:
        import pyarrow as pa  # noqa: PLC0415  heavy, wanted only when a file is read

        kind = self._types[index]
        if not pa.types.is_timestamp(kind):
            return None
        column = self._column(index)
        if column.null_count:
            raise LogError(
                f"the time column {self.heads[index]!r} is empty in {column.null_count} rows", "a stamp in every row"
            )
        try:
            nanoseconds = column.cast(pa.timestamp("ns", kind.tz)).cast(pa.int64()).to_numpy()
        except pa.ArrowException as error:
            raise self._damaged(error) from error
        return np.asarray(nanoseconds, dtype=np.int64), kind.tz is not None

    def texts(self, index: int) -> Sequence[str]:
        return [str(value) for value in self._column(index).to_pylist()]

    def edge_cells(self, index: int, count: int) -> tuple[Sequence[str], Sequence[str]]:
        column = self._column(index)
        edges = (column.slice(0, count), column.slice(max(0, len(column) - count)))
        first, last = ([str(value) for value in edge.to_pylist()] for edge in edges)
        return first, last

    def first_text(self, index: int) -> str:
        import pyarrow as pa  # noqa: PLC0415  heavy, wanted only when a file is read

        kind = self._types[index]
        if pa.types.is_integer(kind) or pa.types.is_floating(kind):
            return "0"
        return self.texts(index)[0]


def _recognizes(contents: Contents) -> bool:
    return bytes(contents.data[:4]) == PARQUET_MAGIC or bytes(contents.data[:6]) == ARROW_MAGIC


FORMAT = Format(("parquet", "feather"), _recognizes, ColumnarTable)
