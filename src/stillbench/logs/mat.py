"""MAT files of versions 4 and 5 (version 7.3 is HDF5 and read as that)."""

import io
import zlib
from typing import Any

import numpy as np

from stillbench.foundation.errors import LogError
from stillbench.logs.arrays import ArrayTable, columns_of
from stillbench.logs.contents import Contents, check_expansion
from stillbench.logs.formats import Format
from stillbench.vocabulary.log_sheet import LogSection

MAGIC = b"MATLAB 5.0 MAT-file"
DEEPEST = 4
"""Structures within structures."""


def _recognizes(contents: Contents) -> bool:
    return bytes(contents.data[: len(MAGIC)]) == MAGIC


def _numeric(name: str, value: Any, depth: int = 0) -> dict[str, np.ndarray]:  # noqa: ANN401  whatever a file holds
    """Numeric vectors and tables within a variable, by their path."""
    if not isinstance(value, np.ndarray) or depth > DEEPEST:
        return {}
    if value.dtype.names and value.size == 1:
        inner: dict[str, np.ndarray] = {}
        for field in value.dtype.names:
            inner |= _numeric(f"{name}.{field}", value[field].flat[0], depth + 1)
        return inner
    plain = value.dtype.kind in "iufb" and value.size > 1 and value.ndim <= 2  # noqa: PLR2004  vectors and tables
    return {name: value} if plain else {}


def columns_by_length(arrays: dict[str, np.ndarray], name: str, wanted: str | None) -> dict[str, np.ndarray]:
    """Return the columns of all arrays that are as long as the longest one, or of the one that is wanted.

    Raises
    ------
    LogError
        When there is no array of numbers, or not the one wanted.
    """
    if wanted is not None:
        known = {path.strip("/"): path for path in arrays}
        if wanted.strip("/") not in known:
            raise LogError(
                f"{name!r} holds no array {wanted!r}",
                "a dataset of numbers",
                f"it holds {', '.join(sorted(known)[:12])}",
            )
        arrays = {known[wanted.strip("/")]: arrays[known[wanted.strip("/")]]}
    columns: dict[str, np.ndarray] = {}
    for path, array in arrays.items():
        flat = array.ravel() if 1 in array.shape else array
        columns |= columns_of(flat, name, prefix=f"{path.strip('/')}.")
    if not columns:
        raise LogError(f"{name!r} holds no array of numbers", "vectors or tables of numbers")
    longest = max(column.shape[0] for column in columns.values())
    return {path: column for path, column in columns.items() if column.shape[0] == longest}


def read_mat(contents: Contents, section: LogSection) -> ArrayTable:
    """Read a MAT file: vectors and tables of numbers, within structures too, that are as long as the longest.

    Raises
    ------
    LogError
        When it is damaged, expands beyond reason, or holds no numbers.
    """
    from scipy.io import loadmat, whosmat  # noqa: PLC0415  heavy imports stay inside functions
    from scipy.io.matlab import MatReadError  # noqa: PLC0415

    try:
        listed = whosmat(io.BytesIO(contents.data))
        declared = sum(8 * int(np.prod(shape, dtype=object)) for _, shape, _ in listed)
        check_expansion(declared, len(contents.data), contents.name)
        loaded = loadmat(io.BytesIO(contents.data), squeeze_me=False, struct_as_record=True, chars_as_strings=False)
    except LogError:
        raise
    except (
        MatReadError,
        ValueError,
        TypeError,
        KeyError,
        IndexError,
        OSError,
        MemoryError,
        zlib.error,
        NotImplementedError,
        OverflowError,
        ZeroDivisionError,
        UnicodeDecodeError,
    ) as error:
        raise LogError(
            f"{contents.name!r} is damaged or cannot be read as a MAT file ({str(error)[:80]})",
            "a whole file",
            "save it again",
        ) from error
    arrays: dict[str, np.ndarray] = {}
    for name, value in loaded.items():
        if not name.startswith("__"):
            arrays |= _numeric(name, value)
    columns = columns_by_length(arrays, contents.name, section.dataset)
    return ArrayTable(columns, f"MAT 5, {len(columns)} columns", has_heads=True)


FORMAT = Format(("mat",), _recognizes, read_mat)
