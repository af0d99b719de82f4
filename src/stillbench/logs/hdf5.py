"""HDF5 files, MAT 7.3 among them."""

from functools import partial

from stillbench.logs.contents import Contents
from stillbench.logs.formats import Format
from stillbench.logs.isolated import IsolatedTable

MAGIC = b"\x89HDF\r\n\x1a\n"
PLACES = (0, 512, 1024, 2048)


def _recognizes(contents: Contents) -> bool:
    return any(bytes(contents.data[place : place + len(MAGIC)]) == MAGIC for place in PLACES)


FORMAT = Format(("hdf5", "mat73"), _recognizes, partial(IsolatedTable, "hdf5"))
