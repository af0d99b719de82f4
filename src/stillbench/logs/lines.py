"""Captures where only some lines are data: those that a pattern with named groups matches become rows."""

import re

from stillbench.foundation.errors import LogError, UsageError
from stillbench.foundation.suggestions import plural


def pattern_of(text: str) -> re.Pattern[str]:
    """Compile ``line_pattern`` of a log sheet.

    Raises
    ------
    UsageError
        When it is no regular expression, or names no group.
    """
    try:
        pattern = re.compile(text)
    except (re.error, OverflowError, RecursionError) as error:
        raise UsageError(
            f"line_pattern {text!r} is no regular expression ({error})", "a regular expression with named groups"
        ) from error
    if not pattern.groupindex:
        raise UsageError(
            f"line_pattern {text!r} names no group",
            "one named group for each column",
            r"write it like ^1,(?P<time>\d+),(?P<rate>-?\d+)",
        )
    return pattern


def matching_rows(text: str, pattern: re.Pattern[str], name: str) -> tuple[str, str]:
    """Return the rows that match as a table parted by tabs, with a head, and a sentence on what was passed over.

    Parameters
    ----------
    text : str
        The whole capture.
    pattern : re.Pattern
        Searched in every line; each named group is a column.
    name : str
        Of the file, for messages.

    Raises
    ------
    LogError
        When no line matches.
    """
    heads = sorted(pattern.groupindex, key=pattern.groupindex.__getitem__)
    rows, passed = ["\t".join(heads)], 0
    for line in text.splitlines():
        match = pattern.search(line)
        if match is None:
            passed += bool(line.strip())
            continue
        rows.append("\t".join((match[head] or "").strip().replace("\t", " ") for head in heads))
    if len(rows) == 1:
        sample = next((line for line in text.splitlines()[passed // 2 :] if line.strip()), "")
        raise LogError(
            f"no line of {name!r} matches line_pattern; one of them is {sample[:60]!r}",
            "lines of data",
            "correct line_pattern under [log] in the log sheet",
        )
    return "\n".join(rows) + "\n", f"{plural(passed, 'line')} that do not match line_pattern passed over"
