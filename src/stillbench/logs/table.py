"""What a reader gives: columns by name, read only when asked for."""

from abc import ABC, abstractmethod
from collections.abc import Sequence

from stillbench.foundation.arrays import FloatArray, IntArray
from stillbench.foundation.errors import ColumnError
from stillbench.foundation.suggestions import did_you_mean, listed


class Table(ABC):
    """Columns of equal length.

    Attributes
    ----------
    heads : list of str
        Names; ``'1'``, ``'2'``, ... where the file has no head.
    has_heads : bool
        Whether the names come from the file.
    format : str
        What the file was understood to be.
    remarks : list of str
        What the reader passed over or concluded.
    units : list of str or None
        What the file itself says of each column's unit; it is offered, never taken without being confirmed.
    empty : frozenset of int
        Columns without a value.
    words : frozenset of int
        Columns that hold words, not numbers.
    restarts : list of int
        Rows (from 0) before which the logger was started again; complete once the numbers were read.
    rate : float or None
        Hz, where the file itself says so.
    """

    def __init__(self, heads: Sequence[str], format_: str, *, has_heads: bool) -> None:
        self.heads = list(heads)
        self.has_heads = has_heads
        self.format = format_
        self.remarks: list[str] = []
        self.units: list[str | None] = [None] * len(self.heads)
        self.empty: frozenset[int] = frozenset()
        self.words: frozenset[int] = frozenset()
        self.restarts: list[int] = []
        self.rate: float | None = None

    def expect(self, indices: Sequence[int]) -> None:  # noqa: B027  most readers need not know
        """Say which columns will be asked for as numbers, so that a reader may take them in one pass over the file."""

    @abstractmethod
    def numbers(self, indices: Sequence[int]) -> list[FloatArray]:
        """Return columns as float64, empty cells as NaN."""

    def edge_rows(self, count: int) -> tuple[list[list[str]], list[list[str]]]:
        """Return the first and the last rows as text, for the eye."""
        columns = [self.edge_cells(index, count) for index in range(len(self.heads))]
        rows = [[list(row) for row in zip(*edges, strict=True)] for edges in zip(*columns, strict=True)]
        return rows[0], rows[1]

    def edge_cells(self, index: int, count: int) -> tuple[Sequence[str], Sequence[str]]:
        """Return the first and the last cells of a column as text; readers of large files do it without all between."""
        texts = self.texts(index)
        return texts[:count], texts[-count:]

    def instants(self, index: int) -> tuple[IntArray, bool] | None:  # noqa: ARG002  for those that have a type for it
        """Return a column of date-times as nanoseconds from 1970 and whether they are UTC; None for any other column."""
        return None

    def close(self) -> None:  # noqa: B027  most readers hold nothing open
        """Let go of files and processes."""

    @abstractmethod
    def texts(self, index: int) -> Sequence[str]:
        """Return a column as text."""

    @abstractmethod
    def first_text(self, index: int) -> str:
        """Return the first cell of a column as text."""

    def index_of(self, column: str | int) -> int:
        """Return the position of a column given by its head, or by its number from 1.

        Raises
        ------
        ColumnError
            When there is none, with the nearest name.
        """
        name = str(column).strip()
        if name in self.heads:
            return self.heads.index(name)
        folded = [head.strip().casefold() for head in self.heads]
        if folded.count(name.casefold()) == 1:
            return folded.index(name.casefold())
        if name.isdecimal() and 1 <= int(name) <= len(self.heads):
            return int(name) - 1
        if name.isdecimal():
            raise ColumnError(
                name, self.heads, f"there is no column number {name}; the log has {len(self.heads)} columns", ""
            )
        hint = did_you_mean(name, self.heads)
        way_out = hint or f"the columns are {listed(self.heads)}"
        raise ColumnError(name, self.heads, f"there is no column {name!r}", way_out)
