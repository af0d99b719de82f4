"""Spans of a log as a user says them: seconds from the start, clock time, or row:N."""

import re
from datetime import UTC, datetime

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray
from stillbench.foundation.errors import UsageError
from stillbench.vocabulary.sensor_log import Stamps

_ROW = r"row:\d+"
_DATE_TIME = r"\d{4}-\d{2}-\d{2}(?:[T ]\d{2}:\d{2}(?::\d{2}(?:\.\d+)?)?(?:Z|[+-]\d{2}:\d{2})?)?"
_TIME_OF_DAY = r"\d{1,2}:\d{2}(?::\d{2}(?:\.\d+)?)?"
_SECONDS = r"\d+(?:\.\d*)?(?:[eE][-+]?\d+)?"
_INSTANT = re.compile(f"(?:{_ROW}|{_DATE_TIME}|{_TIME_OF_DAY}|{_SECONDS})$")
_FORMS = (_ROW, _DATE_TIME, _TIME_OF_DAY, _SECONDS)
DAY = 86_400.0


def _fault(text: str, found: str) -> UsageError:
    return UsageError(
        found,
        "seconds from the start (120.5), clock time (03:15:00 or 2025-03-01 03:15:00), or row:N",
        f"write {text!r} in one of these forms",
    )


class Instants:
    """Turns what a user says into seconds from the first sample; clock times are those of the log's own clock.

    Parameters
    ----------
    seconds : (rows,) float array
        Of each row.
    stamps : Stamps or None
        For clock times.
    """

    def __init__(self, seconds: FloatArray, stamps: Stamps | None) -> None:
        self.seconds = seconds
        self.origin = stamps.origin if stamps is not None else None
        self.zone = stamps.zone if stamps is not None else 0.0

    def instant(self, text: str) -> float:
        """Return seconds from the first sample.

        Raises
        ------
        UsageError
            When the text has no known form, or speaks of clock time where the log has none.
        """
        text = text.strip()
        if not _INSTANT.match(text):
            raise _fault(text, f"{text!r} is no instant of a log")
        if text.startswith("row:"):
            row = int(text[4:])
            if not 1 <= row <= self.seconds.size:
                raise UsageError(f"there is no row {row}", f"row:1 to row:{self.seconds.size}")
            return float(self.seconds[row - 1])
        if re.fullmatch(_SECONDS, text):
            return float(text)
        if self.origin is None:
            raise UsageError(
                f"{text!r} is a clock time, and the stamps of this log do not tell one", "seconds or row:N"
            )
        if re.fullmatch(_DATE_TIME, text):
            moment = datetime.fromisoformat(text)
            if moment.tzinfo is not None:
                return moment.timestamp() - self.origin
            return moment.replace(tzinfo=UTC).timestamp() - self.zone - self.origin
        hours, minutes, *rest = text.split(":")
        of_day = int(hours) * 3600.0 + int(minutes) * 60.0 + (float(rest[0]) if rest else 0.0)
        after = (of_day - self.zone - self.origin) % DAY
        # A time of day just before the start is the start's own evening, not the next.
        before_start = after > float(self.seconds[-1]) and DAY - after < DAY / 2.0
        return after - DAY if before_start else after

    def end(self, text: str) -> float:
        """Return the instant at which a span ends that names it: after a row, at a time.

        Raises
        ------
        UsageError
            As for ``instant``.
        """
        at = self.instant(text)
        if not text.strip().startswith("row:"):
            return at
        row = int(text.strip()[4:])
        return float(self.seconds[row]) if row < self.seconds.size else float(self.seconds[-1]) + 1e-6

    def span(self, text: str) -> tuple[float, float]:
        """Return start and stop of ``T1:T2``.

        Raises
        ------
        UsageError
            When it does not split into two instants in one way, or runs backwards.
        """
        readings = set()
        for form in _FORMS:
            match = re.fullmatch(f"({form}):({form})", text.strip())
            if match:
                readings.add(match.groups())
        if len(readings) != 1:
            raise _fault(text, f"the span {text!r} cannot be read as T1:T2")
        first, second = next(iter(readings))
        start, stop = self.instant(first), self.end(second)
        if not stop > start:
            raise UsageError(f"the span {text!r} stops before it starts", "T1 before T2")
        return start, stop


def within(seconds: FloatArray, start: float | None, stop: float | None) -> BoolArray:
    """Rows from ``start`` up to but not including ``stop``."""
    keep = np.ones(seconds.size, dtype=bool)
    if start is not None:
        keep &= seconds >= start - 1e-9
    if stop is not None:
        keep &= seconds < stop - 1e-9
    return keep
