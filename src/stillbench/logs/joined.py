"""Several files that make one night: their columns one behind the other."""

from collections.abc import Sequence

import numpy as np

from stillbench.foundation.arrays import FloatArray, IntArray
from stillbench.foundation.errors import LogError
from stillbench.foundation.suggestions import plural
from stillbench.logs.table import Table


class JoinedTable(Table):
    """Tables with the same columns, in the order given; where the time between two is not known the record is split."""

    def __init__(self, tables: Sequence[Table], names: Sequence[str]) -> None:
        first = tables[0]
        for table, name in zip(tables[1:], names[1:], strict=True):
            if table.heads != first.heads:
                odd = sorted(set(table.heads) ^ set(first.heads)) or table.heads
                raise LogError(
                    f"{name!r} does not have the columns of {names[0]!r} (they differ in {', '.join(map(repr, odd[:5]))})",
                    "files with the same columns",
                    "give those of one logger only",
                )
        super().__init__(
            first.heads, f"{plural(len(tables), 'file')} joined, each {first.format}", has_heads=first.has_heads
        )
        self._tables = tables
        self.units = first.units
        self.rate = first.rate
        if any(table.rate != first.rate for table in tables):
            raise LogError(
                "the files differ in their sampling rate", "files of one rate", "give those of one logger only"
            )
        self.words = first.words
        self.empty = frozenset.intersection(*(table.empty for table in tables))
        for table, name in zip(tables, names, strict=True):
            self.remarks += [f"{name}: {remark}" for remark in table.remarks]

    def expect(self, indices: Sequence[int]) -> None:
        for table in self._tables:
            table.expect(indices)

    def numbers(self, indices: Sequence[int]) -> list[FloatArray]:
        parts = [table.numbers(indices) for table in self._tables]
        starts = np.cumsum([0, *(part[0].size for part in parts)]).tolist()
        inner = [row + restart for table, row in zip(self._tables, starts, strict=False) for restart in table.restarts]
        self.restarts = sorted([*starts[1:-1], *inner])
        return [np.concatenate(columns) for columns in zip(*parts, strict=True)]

    def instants(self, index: int) -> tuple[IntArray, bool] | None:
        parts = [table.instants(index) for table in self._tables]
        known = [part for part in parts if part is not None]
        if len(known) < len(parts):
            return None
        return np.concatenate([part[0] for part in known]), known[0][1]

    def texts(self, index: int) -> Sequence[str]:
        return [text for table in self._tables for text in table.texts(index)]

    def edge_cells(self, index: int, count: int) -> tuple[Sequence[str], Sequence[str]]:
        return self._tables[0].edge_cells(index, count)[0], self._tables[-1].edge_cells(index, count)[1]

    def first_text(self, index: int) -> str:
        return self._tables[0].first_text(index)

    def close(self) -> None:
        for table in self._tables:
            table.close()
