"""NPY and NPZ files as a table (no pickled objects)."""

import io
import tokenize
import zipfile
from collections.abc import Sequence

import numpy as np

from stillbench.foundation.arrays import FloatArray, IntArray
from stillbench.foundation.errors import LogError
from stillbench.foundation.scratch import LARGE, blocks, large_array
from stillbench.logs.contents import LARGEST_EXPANDED, LARGEST_RATIO, RATIO_COUNTS_FROM, ZIP_MAGIC, Contents
from stillbench.logs.dates import FIRST_YEAR, LAST_YEAR
from stillbench.logs.formats import Format
from stillbench.logs.table import Table
from stillbench.vocabulary.log_sheet import LogSection

NPY_MAGIC = b"\x93NUMPY"
MOST_CHANNELS = 64
"""A 2-D array with at most this many rows, and more columns than rows, holds one channel a row."""


class ArrayTable(Table):
    """Named columns already in memory or mapped."""

    def __init__(self, columns: dict[str, np.ndarray], format_: str, *, has_heads: bool, utc: bool = False) -> None:
        super().__init__(list(columns), format_, has_heads=has_heads)
        self._utc = utc
        self._columns = list(columns.values())

    def numbers(self, indices: Sequence[int]) -> list[FloatArray]:
        arrays = []
        for index in indices:
            column = self._columns[index]
            if column.dtype.kind not in "iufb":
                raise LogError(
                    f"column {self.heads[index]!r} holds {column.dtype}, not real numbers", "integers or floats"
                )
            if column.size < LARGE or (column.dtype == np.float64 and column.flags.c_contiguous):
                arrays.append(np.ascontiguousarray(column, dtype=np.float64))
                continue
            values = large_array(column.size)
            for part in blocks(column.size):
                values[part] = column[part]
            arrays.append(values)
        return arrays

    def instants(self, index: int) -> tuple[IntArray, bool] | None:
        column = self._columns[index]
        if column.dtype.kind != "M":
            return None
        years = column.astype("M8[Y]").astype(np.int64) + 1970
        if np.isnat(column).any() or years.min() < FIRST_YEAR or years.max() > LAST_YEAR:
            raise LogError(
                f"the time column {self.heads[index]!r} holds no instant in a row, or one outside {FIRST_YEAR} to {LAST_YEAR}",
                "a date-time in every row",
            )
        return column.astype("M8[ns]").astype(np.int64), self._utc

    def texts(self, index: int) -> Sequence[str]:
        return [str(value) for value in self._columns[index]]

    def edge_cells(self, index: int, count: int) -> tuple[Sequence[str], Sequence[str]]:
        column = self._columns[index]
        return [str(value) for value in column[:count]], [str(value) for value in column[-count:]]

    def first_text(self, index: int) -> str:
        return str(self._columns[index][0])


def columns_of(array: np.ndarray, name: str, prefix: str = "") -> dict[str, np.ndarray]:
    """Split an array into columns: structured fields, one dimension, or rows of samples.

    Raises
    ------
    LogError
        For more than two dimensions, none, or no rows.
    """
    if array.dtype.names:
        made = {f"{prefix}{field}": np.atleast_1d(array[field]) for field in array.dtype.names}
        if any(column.ndim != 1 for column in made.values()):
            raise LogError(f"{name!r} holds fields of more than one number", "fields of single numbers")
        return made
    if array.ndim == 1:
        return {prefix.rstrip(".") or "1": array}
    if array.ndim == 2:  # noqa: PLR2004
        if array.shape[0] < array.shape[1] and array.shape[0] <= MOST_CHANNELS:
            array = array.T
        return {f"{prefix}{i + 1}": array[:, i] for i in range(array.shape[1])}
    raise LogError(f"{name!r} holds an array of shape {array.shape}", "one or two dimensions")


def _load(contents: Contents) -> dict[str, np.ndarray]:
    try:
        if bytes(contents.data[:6]) == NPY_MAGIC:
            return columns_of(_view(contents), contents.name)
        with zipfile.ZipFile(io.BytesIO(contents.data)) as archive:
            for member in archive.infolist():
                ratio = member.file_size / max(1, member.compress_size)
                if member.file_size > LARGEST_EXPANDED or (
                    ratio > LARGEST_RATIO and member.file_size > RATIO_COUNTS_FROM
                ):
                    raise LogError(
                        f"{member.filename!r} in {contents.name!r} expands {ratio:.0f} times",
                        f"at most {LARGEST_RATIO} times",
                    )
        columns: dict[str, np.ndarray] = {}
        with np.load(io.BytesIO(contents.data), allow_pickle=False) as bundle:
            for key in bundle.files:
                made = columns_of(np.asanyarray(bundle[key]), contents.name, prefix=f"{key}.")
                if set(made) & set(columns):
                    raise LogError(
                        f"{contents.name!r} names {', '.join(sorted(set(made) & set(columns)))} twice", "distinct names"
                    )
                columns |= made
    except (
        ValueError,
        OSError,
        EOFError,
        zipfile.BadZipFile,
        KeyError,
        SyntaxError,
        MemoryError,
        tokenize.TokenError,
    ) as error:
        reason = "it holds pickled objects" if "pickle" in str(error) else str(error).split("\n", maxsplit=1)[0]
        raise LogError(
            f"{contents.name!r} cannot be read: {reason}", "plain numeric arrays", "save it again with numpy.save"
        ) from error
    return columns


def _view(contents: Contents) -> np.ndarray:
    """Return the array of an NPY file as it lies in the file, without a copy."""
    stream = io.BytesIO(contents.data[: 1 << 16])
    version = np.lib.format.read_magic(stream)
    reader = np.lib.format.read_array_header_1_0 if version == (1, 0) else np.lib.format.read_array_header_2_0
    shape, fortran, dtype = reader(stream)
    if dtype.hasobject:
        raise LogError(
            f"{contents.name!r} cannot be read: it holds pickled objects",
            "plain numeric arrays",
            "save it again with numpy.save",
        )
    if any(length < 0 for length in shape):
        raise LogError(f"{contents.name!r} declares the shape {shape}", "a shape of whole numbers", "save it again")
    declared = int(np.prod(shape, dtype=object)) * dtype.itemsize
    if declared + stream.tell() > len(contents.data):
        raise LogError(
            f"{contents.name!r} declares {declared} bytes of samples and holds {len(contents.data) - stream.tell()}",
            "a whole file",
            "copy it again",
        )
    count = declared // max(1, dtype.itemsize)
    flat = np.frombuffer(contents.data, dtype=dtype, count=count, offset=stream.tell())
    return flat.reshape(shape, order="F" if fortran else "C")


def read_arrays(contents: Contents, section: LogSection) -> ArrayTable:  # noqa: ARG001  a reader's signature
    """Read an NPY or NPZ file.

    Raises
    ------
    LogError
        For pickled objects, damage, unequal lengths, or nothing inside.
    """
    columns = _load(contents)
    lengths = {column.shape[0] for column in columns.values()}
    if not columns or lengths == {0}:
        raise LogError(f"{contents.name!r} holds no samples", "an array of numbers")
    if len(lengths) > 1:
        shown = ", ".join(f"{name} {column.shape[0]}" for name, column in columns.items())
        raise LogError(f"the arrays of {contents.name!r} differ in length ({shown})", "equal lengths")
    kind = "NPY" if bytes(contents.data[:6]) == NPY_MAGIC else "NPZ"
    named = kind == "NPZ" or not all(name.isdecimal() for name in columns)
    return ArrayTable(columns, f"{kind}, {len(columns)} columns", has_heads=named)


def _recognizes(contents: Contents) -> bool:
    head = bytes(contents.data[:6])
    return head == NPY_MAGIC or head.startswith(ZIP_MAGIC)


FORMAT = Format(("npy", "npz"), _recognizes, read_arrays)
