"""MAT files of version 5, and of version 4 where the log sheet says so (7.3 is HDF5 and read as that)."""

from functools import partial

from stillbench.logs.contents import Contents
from stillbench.logs.formats import Format
from stillbench.logs.isolated import IsolatedTable

MAGIC = b"MATLAB 5.0 MAT-file"


def _recognizes(contents: Contents) -> bool:
    return bytes(contents.data[: len(MAGIC)]) == MAGIC


FORMAT = Format(("mat",), _recognizes, partial(IsolatedTable, "mat"))
