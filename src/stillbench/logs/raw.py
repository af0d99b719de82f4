"""Raw binary samples, as data loggers write them; how they are laid out must be declared in a log sheet."""

from collections.abc import Sequence

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.errors import LogError, UsageError
from stillbench.foundation.scratch import blocks, large_array
from stillbench.foundation.suggestions import plural
from stillbench.logs.contents import Contents
from stillbench.logs.formats import Format
from stillbench.logs.table import Table
from stillbench.vocabulary.log_sheet import LogSection

WIDTHS = {"int8": 1, "int16": 2, "int24": 3, "int32": 4, "float32": 4, "float64": 8}


class RawTable(Table):
    """Interleaved samples of one type behind a head that is skipped."""

    def __init__(self, contents: Contents, section: LogSection) -> None:
        if section.sample_type is None:
            raise UsageError(
                f"{contents.name!r} holds raw samples whose type is not declared",
                "sample_type under [log] in a log sheet",
                f"one of {', '.join(WIDTHS)}; beside it byte_order, interleaved, head_bytes, offset_binary, bits",
            )
        self._type = section.sample_type
        self._big = section.byte_order == "big"
        self._offset = section.offset_binary
        self._bits = section.bits
        width = WIDTHS[self._type]
        integer = self._type.startswith("int")
        if (self._offset or self._bits) and not integer:
            raise UsageError(f"offset_binary and bits are declared for {self._type}", "integer samples")
        if self._bits and self._bits > 8 * width:
            raise UsageError(f"bits = {self._bits} is declared for {self._type}", f"at most {8 * width} bits")
        count = section.interleaved or 1
        head = section.head_bytes or 0
        size = len(contents.data) - head
        frames = max(0, size) // (width * count)
        if frames == 0:
            raise LogError(
                f"{contents.name!r} holds {max(0, size)} bytes behind its head, less than one sample of"
                f" {plural(count, 'channel')} of {self._type}",
                "samples",
            )
        super().__init__(
            [str(i + 1) for i in range(count)],
            f"raw {self._type}, {'big' if self._big else 'little'}-endian, {plural(count, 'channel')}",
            has_heads=False,
        )
        left = size - frames * width * count
        if left:
            self.remarks.append(f"{plural(left, 'byte')} at the end are no whole frame: passed over")
        bytes_ = np.frombuffer(contents.data, dtype=np.uint8, count=frames * width * count, offset=head)
        self._frames = bytes_.reshape(frames, count, width)

    def _converted(self, part: np.ndarray) -> np.ndarray:
        """Bytes of samples, shape (n, width), to numbers, shape (n,)."""
        width = part.shape[1]
        order = part[:, ::-1] if self._big else part
        if self._type == "int24":
            wide = np.zeros((part.shape[0], 4), dtype=np.uint8)
            wide[:, 1:] = order
            codes = wide.view("<i4")[:, 0] >> 8
        else:
            kind = "f" if self._type.startswith("float") else "i"
            codes = np.ascontiguousarray(order).view(f"<{kind}{width}")[:, 0]
        if self._offset:
            # Zero stands for the lowest code: turning the sign bit over gives two's complement.
            codes = codes.astype(np.int64)
            codes = np.where(codes < 0, codes + (1 << 8 * width), codes) - (1 << (8 * width - 1))
        return codes >> (8 * width - self._bits) if self._bits else codes

    def numbers(self, indices: Sequence[int]) -> list[FloatArray]:
        arrays = []
        for index in indices:
            values = large_array(self._frames.shape[0])
            for part in blocks(values.size):
                values[part] = self._converted(self._frames[part, index])
            arrays.append(values)
        return arrays

    def texts(self, index: int) -> Sequence[str]:
        return [str(value) for value in self.numbers([index])[0]]

    def edge_cells(self, index: int, count: int) -> tuple[Sequence[str], Sequence[str]]:
        first, last = (self._converted(self._frames[part, index]) for part in (slice(count), slice(-count, None)))
        return [str(value) for value in first], [str(value) for value in last]

    def first_text(self, index: int) -> str:
        return str(self._converted(self._frames[:1, index])[0])


FORMAT = Format(("raw",), lambda _: False, RawTable)
