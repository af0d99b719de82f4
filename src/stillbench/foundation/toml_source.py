"""TOML files read with the line of every key, so that faults can be pointed at."""

import re
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import TypeVar

from pydantic import BaseModel, ValidationError

from stillbench.foundation.errors import TextFileError, UsageError
from stillbench.foundation.suggestions import did_you_mean

Model = TypeVar("Model", bound=BaseModel)
Location = tuple[str | int, ...]

_HEADER = re.compile(r"^\s*(\[\[?)\s*(.+?)\s*\]\]?\s*(?:#.*)?$")
_KEY = re.compile(r"""^\s*((?:[A-Za-z0-9_-]+|"[^"]*"|'[^']*')(?:\s*\.\s*(?:[A-Za-z0-9_-]+|"[^"]*"|'[^']*'))*)\s*=""")
_PART = re.compile(r"""[A-Za-z0-9_-]+|"[^"]*"|'[^']*'""")
_TRIPLE = re.compile(r'"""|' + "'''")


def _parts(dotted: str) -> list[str]:
    return [part.strip("\"'") for part in _PART.findall(dotted)]


def key_lines(text: str) -> dict[Location, int]:
    """Map the path of every table and key to its line number, from 1. Text inside multi-line strings is passed over."""
    lines: dict[Location, int] = {}
    counts: dict[Location, int] = {}
    table: Location = ()
    inside = False
    for number, line in enumerate(text.splitlines(), start=1):
        quotes = len(_TRIPLE.findall(line))
        was_inside, inside = inside, inside ^ (quotes % 2 == 1)
        if was_inside:
            continue
        header = _HEADER.match(line)
        key = _KEY.match(line)
        if header and not key:
            path: Location = tuple(_parts(header.group(2)))
            if header.group(1) == "[[":
                counts[path] = counts.get(path, -1) + 1
                path = (*path, counts[path])
            table = path
            lines.setdefault(table, number)
        elif key:
            lines.setdefault((*table, *_parts(key.group(1))), number)
    return lines


def _line_of(location: Location, lines: dict[Location, int]) -> int | None:
    for length in range(len(location), 0, -1):
        if location[:length] in lines:
            return lines[location[:length]]
    return None


def _known_names(model: type[BaseModel], location: Location) -> list[str]:
    """Names allowed where ``location`` points, following nested models."""
    current: type[BaseModel] | None = model
    for part in location[:-1]:
        if current is None or isinstance(part, int) or part not in current.model_fields:
            continue
        current = next(_models_in(current.model_fields[part].annotation), None)
    return sorted(current.model_fields) if current is not None else []


def _models_in(annotation: object) -> Iterator[type[BaseModel]]:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        yield annotation
    for inner in getattr(annotation, "__args__", ()):
        yield from _models_in(inner)


def _spoken(location: Location) -> str:
    text = ""
    for part in location:
        text += f"[{part + 1}]" if isinstance(part, int) else (f".{part}" if text else part)
    return text or "the file"


def explain(error: ValidationError, model: type[BaseModel], lines: dict[Location, int]) -> list[str]:
    """Turn validation errors into one sentence each, with the line and the nearest known name."""
    faults: list[tuple[int, str]] = []
    for entry in error.errors():
        location: Location = entry["loc"]
        line = _line_of(location, lines)
        where = f"line {line}: " if line else ""
        if entry["type"] == "extra_forbidden":
            known = _known_names(model, location)
            hint = did_you_mean(str(location[-1]), known) or f"known here: {', '.join(known)}"
            what = f"{_spoken(location)} is not a known key ({hint})"
        elif entry["type"] == "missing":
            what = f"{_spoken(location)} is missing"
        else:
            message = entry["msg"].removeprefix("Value error, ").removesuffix(".")
            what = f"{_spoken(location)}: {message[0].lower()}{message[1:]}"
            if not isinstance(entry["input"], dict | list):
                what += f" (found {_shown(entry['input'])!r})"
        faults.append((line or 0, where + what))
    return [text for _, text in sorted(faults, key=lambda fault: fault[0])]


def _shown(value: object) -> str:
    try:
        return str(value)[:60]
    except ValueError:  # an integer of thousands of digits
        return "a number of very many digits"


def load_toml(path: Path, model: type[Model], kind: str) -> Model:
    """Read a TOML file into a pydantic model, reporting every fault at once.

    Raises
    ------
    UsageError
        When the file is not there or cannot be read.
    TextFileError
        With all faults, each with its line.
    """
    import tomlkit  # noqa: PLC0415  loaded only when a file is given
    from tomlkit.exceptions import TOMLKitError  # noqa: PLC0415

    try:
        text = path.read_bytes().decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise TextFileError(path.name, [f"byte {error.start}: not UTF-8"]) from error
    except ValueError as error:  # a name that no file can have
        raise UsageError(
            f"cannot read the {kind} {str(path)!r}: {error}", f"a TOML file ({kind})", "check the name"
        ) from error
    except OSError as error:
        raise UsageError(
            f"cannot read the {kind} {str(path)!r}: {error.strerror}", f"a TOML file ({kind})", "check the name"
        ) from error
    try:
        content = tomlkit.parse(text).unwrap()
    except TOMLKitError as error:
        raise TextFileError(path.name, [str(error)]) from error
    try:
        return model.model_validate(content)
    except ValidationError as error:
        raise TextFileError(path.name, explain(error, model, key_lines(text))) from error


def check_all(model: type[Model], content: dict[str, object], name: str, extra: Sequence[str] = ()) -> Model:
    """Validate content that did not come from a file."""
    try:
        return model.model_validate(content)
    except ValidationError as error:
        raise TextFileError(name, [*explain(error, model, {}), *extra]) from error
