"""From messages of a bag to columns: the numbers in them, by the path of their field."""

from collections.abc import Callable, Iterable, Sequence
from dataclasses import fields, is_dataclass
from typing import Any

import numpy as np

from stillbench.foundation.errors import LogError
from stillbench.foundation.suggestions import listed, plural
from stillbench.logs.arrays import ArrayTable

INERTIAL = ("Imu", "AccelStamped", "TwistStamped", "Vector3Stamped", "MagneticField")
NANOSECONDS = 10**9
LARGEST_NUMBER, LARGEST_INSTANT = 1e300, 1 << 62
STAMP = "\0stamp"
"""Of the stamp within a message: no field has this name."""
DEEPEST = 4


def flat_numbers(message: Any, path: str = "", depth: int = 0) -> dict[str, int | float]:  # noqa: ANN401  of any type
    """Return the single numbers within a message, by their path; stamps in nanoseconds under STAMP, arrays left out."""
    if isinstance(message, bool | int | float | np.number):
        return {path: message if isinstance(message, int) else float(message)}
    if depth > DEEPEST:
        return {}
    if isinstance(message, dict):
        items = list(message.items())
    elif is_dataclass(message):
        items = [(entry.name, getattr(message, entry.name)) for entry in fields(message)]
    else:
        return {}
    found: dict[str, int | float] = {}
    for name, value in items:
        if str(name).startswith("__"):
            continue
        if name == "stamp":
            instant = flat_numbers(value)
            part = instant.get("nanosec", instant.get("nsec", 0))
            found[STAMP] = round(instant.get("sec", 0) * NANOSECONDS) + int(part)
            continue
        inner = "" if name == "header" else f"{path}.{name}" if path else str(name)
        found |= flat_numbers(value, inner, depth + 1)
    return found


def chosen_topic(topics: dict[str, str], counts: dict[str, int], wanted: str | None, name: str) -> str:
    """Return the topic to read: the one asked for, the only one, or the only one of inertial messages.

    Parameters
    ----------
    topics : dict of topic to type name
    counts : dict of topic to number of messages
    wanted : str or None
        ``dataset`` of the log sheet.
    name : str
        Of the file, for messages.

    Raises
    ------
    LogError
        When it does not exist or cannot be told.
    """
    shown = [f"{topic} ({kind.rsplit('/', 1)[-1]}, {counts.get(topic, 0)})" for topic, kind in topics.items()]
    if wanted is not None:
        if wanted not in topics:
            raise LogError(f"{name!r} holds no topic {wanted!r}", "a topic of the bag", f"it holds {listed(shown)}")
        return wanted
    filled = [topic for topic in topics if counts.get(topic, 0)]
    inertial = [topic for topic in filled if topics[topic].rsplit("/", 1)[-1] in INERTIAL]
    for some in (filled, inertial):
        if len(some) == 1:
            return some[0]
    raise LogError(
        f"{name!r} holds {len(inertial) or len(filled)} topics that may be meant: {listed(shown)}"
        if filled
        else f"{name!r} holds no messages",
        "one topic",
        'name it: dataset = "/topic" under [log] in a log sheet' if filled else "",
    )


def read_messages(arrived: Iterable[tuple[int, Callable[[], Any]]], format_: str, name: str) -> ArrayTable:
    """Decode messages and return them as columns; those that cannot be read are counted and left out.

    Parameters
    ----------
    arrived : iterable of (nanoseconds, function that decodes)
        In the order of their receipt.
    format_, name : str
        Of the file, for messages to the user.

    Raises
    ------
    LogError
        When none can be read.
    """
    rows, received, broken = [], [], 0
    for instant, decode in arrived:
        try:
            row = flat_numbers(decode())
            fits = instant < LARGEST_INSTANT and all(abs(value) < LARGEST_NUMBER for value in row.values())
        except Exception:  # noqa: BLE001  whatever the library says of a damaged message
            fits = False
        if not fits:
            broken += 1
            continue
        rows.append(row)
        received.append(instant)
    table = table_of_messages(rows, received, format_, name)
    if broken:
        table.remarks.append(f"{plural(broken, 'message')} could not be read and are left out")
    return table


def table_of_messages(
    rows: Sequence[dict[str, int | float]], received: Sequence[int], format_: str, name: str
) -> ArrayTable:
    """Return messages as columns; ``time`` is the stamp in the message where it has one, else when it was received.

    Parameters
    ----------
    rows : sequence of ``n`` dicts
        From ``flat_numbers``.
    received : sequence of ``n`` int
        Nanoseconds.
    format_, name : str
    """
    if not rows:
        raise LogError(f"no message of {name!r} could be read", "messages with numbers")
    columns: dict[str, np.ndarray] = {}
    for head in (head for head in rows[0] if all(head in row for row in rows)):
        values = [row[head] for row in rows]
        columns[head] = np.array(values, dtype="M8[ns]" if head == STAMP else np.float64)
    received_at = np.array(received, dtype=np.int64).astype("M8[ns]")
    stamped = columns.pop(STAMP, received_at)
    if (stamped == stamped[0]).all():
        stamped = received_at
    name = "stamp" if "time" in columns else "time"  # a field of the message may be called time
    return ArrayTable({name: stamped, **columns, "received": received_at}, format_, has_heads=True, utc=True)
