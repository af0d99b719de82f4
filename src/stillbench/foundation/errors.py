"""The exception tree: an error means that the answer would be wrong or cannot be given.

Every message is one line of three parts: what was found, what was wanted, the way out. The facts stand in attributes, so
that a caller need not read the text.
"""

from collections.abc import Sequence

LONGEST_PART = 600
"""Characters of each part of a message."""


def _clipped(text: str) -> str:
    return text if len(text) <= LONGEST_PART else f"{text[: LONGEST_PART - 40]} ... ({len(text)} characters)"


class StillbenchError(Exception):
    """Base of all errors of this package.

    Attributes
    ----------
    found, wanted, way_out : str
        The three parts of the message.
    exit_code : int
        What the command line returns: 1 when the log or the analysis failed, 2 for usage.
    """

    exit_code = 1

    def __init__(self, found: str, wanted: str = "", way_out: str = "") -> None:
        self.found = found
        self.wanted = wanted
        self.way_out = way_out
        super().__init__(self.message)

    @property
    def message(self) -> str:
        """The whole message, one line, control characters made visible."""
        text = _clipped(self.found)
        if self.wanted:
            text += f"; wanted {_clipped(self.wanted)}"
        text += "."
        if self.way_out:
            text += f" {self.way_out[0].upper()}{_clipped(self.way_out[1:])}"
            if not text.endswith((".", "?")):
                text += "."
        return "".join(c if c.isprintable() else repr(c)[1:-1] for c in text)


class UsageError(StillbenchError):
    """A flag, unit, column, sheet or specification that does not exist or does not parse."""

    exit_code = 2


class UnitError(UsageError):
    """A unit that is not in the closed list, or has the wrong dimension."""

    def __init__(self, unit: str, found: str, wanted: str, way_out: str = "") -> None:
        self.unit = unit
        super().__init__(found, wanted, way_out)


class UnitMissingError(UsageError):
    """A channel without a declared unit."""

    def __init__(self, channel: str, offered: str | None) -> None:
        self.channel = channel
        self.offered = offered
        flag = f"--unit {offered!r}" if offered else "--unit deg/s (or V, m/s^2, count, ...)"
        head = f", though its head says {offered!r}" if offered else ""
        super().__init__(
            f"no unit is declared for channel {channel!r}{head}",
            "one, since there is no default unit",
            f"say {flag}, or write unit in the log sheet",
        )


class ColumnError(UsageError):
    """A column that is asked for and not there, or a choice that is not made."""

    def __init__(self, column: str, columns: Sequence[str], found: str, way_out: str) -> None:
        self.column = column
        self.columns = tuple(columns)
        super().__init__(found, "a column of the log, by its head or by its number from 1", way_out)


class ClockError(UsageError):
    """Stamps that do not make a clock, or no stamps and no rate."""


class TextFileError(UsageError):
    """A log sheet, specification or other TOML file with faults; all of them are listed, with lines."""

    def __init__(self, name: str, faults: Sequence[str]) -> None:
        self.name = name
        self.faults = tuple(faults)
        many = f"{len(faults)} faults" if len(faults) > 1 else "1 fault"
        super().__init__(f"{name}: {many}: " + " | ".join(faults), way_out="correct the file and run again")


class LogError(StillbenchError):
    """A log that cannot be read as a table of numbers."""


class CellError(LogError):
    """Text in a column of numbers."""

    def __init__(self, column: str, row: int, value: str, *, decimal: str = ".") -> None:
        self.column = column
        self.row = row
        self.value = value
        super().__init__(
            f"line {row} of the log holds {value[:60]!r} in column {column!r}",
            f"a number with decimal mark {decimal!r}",
            'cut the line out, or list such texts as missing = ["..."] under [log] in a log sheet',
        )


class RecordTooShortError(StillbenchError):
    """Too few samples for what is asked."""

    def __init__(self, n_samples: int, n_needed: int, purpose: str) -> None:
        self.n_samples = n_samples
        self.n_needed = n_needed
        self.purpose = purpose
        super().__init__(
            f"{n_samples} usable samples",
            f"at least {n_needed} for {purpose}",
            "log for longer, or choose a wider span",
        )


class NothingToMeasureError(StillbenchError):
    """A channel that is constant, empty, or never at rest."""


class OutputError(StillbenchError):
    """A file that could not be written; nothing is left behind under its name."""
