"""Nearest names, for messages that offer a way out."""

import difflib
from collections.abc import Iterable


def nearest(name: str, known: Iterable[str]) -> str | None:
    """Return the known name closest to ``name`` in spelling, or None when none is close."""
    names = list(known)
    folded = {candidate.casefold(): candidate for candidate in names}
    close = difflib.get_close_matches(name.casefold(), folded, n=1, cutoff=0.5)
    return folded[close[0]] if close else None


def did_you_mean(name: str, known: Iterable[str]) -> str:
    """Return ``'did you mean 'x'?'`` or an empty string."""
    close = nearest(name, known)
    return f"did you mean {close!r}?" if close is not None else ""


def plural(count: int, noun: str) -> str:
    """Write a count with its noun: 1 row, 2 rows."""
    return f"{count} {noun}" + ("" if count == 1 else "s")


def listed(names: Iterable[str], most: int = 12) -> str:
    """Join quoted names with commas, at most ``most`` of them, saying how many more there are."""
    quoted = [repr(name) for name in names]
    more = f" and {len(quoted) - most} more" if len(quoted) > most else ""
    return ", ".join(quoted[:most]) + more
