"""The readers: one file each, chosen by content. Others are plugged in through the entry point group stillbench.readers."""

import importlib
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from importlib import metadata

from stillbench.foundation.errors import LogError, StillbenchError, UsageError
from stillbench.foundation.suggestions import did_you_mean, listed
from stillbench.logs.contents import Contents
from stillbench.logs.table import Table
from stillbench.vocabulary.log_sheet import LogSection

GROUP = "stillbench.readers"
BUILT_IN = ("arrays", "columnar", "wav", "hdf5", "mat", "mcap", "bags", "raw")
"""Modules of this folder, each with a ``FORMAT``; text, which takes what no other does, comes last."""


@dataclass(frozen=True)
class Format:
    """A reader.

    Attributes
    ----------
    names : tuple of str
        By which a log sheet may ask for it (``[log] format``).
    recognizes : callable
        Whether it takes the contents, from their first bytes; never raises.
    read : callable
        Contents and the section ``[log]`` of the sheet to a table.
    """

    names: tuple[str, ...]
    recognizes: Callable[[Contents], bool]
    read: Callable[[Contents, LogSection], Table]


def _built_in() -> list[Format]:
    return [importlib.import_module(f"stillbench.logs.{name}").FORMAT for name in BUILT_IN]


def _plugged_in() -> list[Format]:
    return [found for point in metadata.entry_points(group=GROUP) if isinstance(found := point.load(), Format)]


def _text() -> Format:
    from stillbench.logs.text import FORMAT  # noqa: PLC0415  it is asked last

    return FORMAT


def read_table(contents: Contents, section: LogSection) -> Table:
    """Read a log by the reader that is declared, or by the first that knows its content.

    Raises
    ------
    UsageError
        When the declared format does not exist.
    LogError
        When the content is not what was declared, or is damaged.
    """
    formats = [*_built_in(), *_plugged_in(), _text()]
    if section.format is not None:
        names = [name for known in formats for name in known.names]
        chosen = next((known for known in formats if section.format in known.names), None)
        if chosen is None:
            hint = did_you_mean(section.format, names) or f"the formats are {listed(names)}"
            raise UsageError(f"there is no format {section.format!r}", "a format that can be read", hint)
        return _read(chosen, contents, section)
    return _read(next(known for known in formats if known.recognizes(contents)), contents, section)


def _read(known: Format, contents: Contents, section: LogSection) -> Table:
    """Read by one format; whatever a damaged binary file brings about in a library is said as damage."""
    if "text" in known.names:
        return known.read(contents, section)
    with damage_said(contents.name):
        return known.read(contents, section)


@contextmanager
def damage_said(name: str) -> Iterator[None]:
    """Turn the errors of libraries over damaged binary files into one that says so; our own pass."""
    try:
        yield
    except (StillbenchError, MemoryError):
        raise
    except Exception as error:
        reason = f"{type(error).__name__}: {str(error).splitlines()[0][:80] if str(error) else 'no more is known'}"
        raise LogError(
            f"{name!r} is damaged or cannot be read ({reason})", "a whole file", "fetch the log again"
        ) from error


def missing_library(what: str, library: str, extra: str) -> LogError:
    """Return the error for a format whose library is not installed, with the line that installs it.

    Parameters
    ----------
    what : str
        That needs it, in words.
    library : str
        By its name on the package index.
    extra : str
        Of this package, that brings it.
    """
    return LogError(
        f"{what} needs the library {library}, which is not installed",
        f"the extra [{extra}] of stillbench, or {library} itself",
        f"install it: python -m pip install {library}",
    )
