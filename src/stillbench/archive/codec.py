"""encode and decode: a Characterization as JSON (schema "stillbench/characterization").

The JSON mirrors the nouns: one object a dataclass, arrays as lists, numbers in SI and shortest round trip, strings ASCII.
A number that is not finite is written as null.
"""

import dataclasses
import functools
import json
import math
import types
import typing
from collections.abc import Mapping
from typing import Any

import numpy as np

from stillbench.foundation.errors import StillbenchError
from stillbench.vocabulary.characterization import SCHEMA, SCHEMA_VERSION, Characterization


class ArchiveError(StillbenchError):
    """A result file that is not one, is damaged, or is of a later version."""


def _json_names(kind: type) -> Mapping[str, str]:
    names: Mapping[str, str] = getattr(kind, "__json_names__", {})
    return names


def _plain(value: Any) -> Any:  # noqa: ANN401, PLR0911  any field of any noun; one return a kind
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        names = _json_names(type(value))
        return {names.get(f.name, f.name): _plain(getattr(value, f.name)) for f in dataclasses.fields(value)}
    if isinstance(value, np.ndarray):
        return [_plain(item) for item in value.tolist()]
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, tuple | list):
        return [_plain(item) for item in value]
    if isinstance(value, np.generic):
        return _plain(value.item())
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    return value


def to_plain(result: Characterization) -> dict[str, Any]:
    """Return the content of result.json as plain dicts and lists, schema and version first."""
    content = _plain(result)
    return {"schema": content.pop("schema"), "version": content.pop("version"), **content}


def encode(result: Characterization) -> bytes:
    """Return a Characterization as JSON, ASCII, one line at the end."""
    return json.dumps(to_plain(result), ensure_ascii=True, allow_nan=False, separators=(", ", ": ")).encode() + b"\n"


def encode_noun(noun: Any, schema: str, version: int, extra: Mapping[str, Any]) -> bytes:  # noqa: ANN401  any noun
    """Return any noun as JSON of a schema of its own, with ``extra`` beside its fields."""
    content = {"schema": schema, "version": version, **_plain(extra), **_plain(noun)}
    return json.dumps(content, ensure_ascii=True, allow_nan=False, separators=(", ", ": ")).encode() + b"\n"


@functools.cache
def _hints(kind: type) -> dict[str, Any]:
    return typing.get_type_hints(kind)


def _rebuild(value: Any, hint: Any, where: str) -> Any:  # noqa: ANN401, C901, PLR0911  one branch a kind of hint
    origin = typing.get_origin(hint)
    if origin in (typing.Union, types.UnionType):
        options = typing.get_args(hint)
        if value is None:
            return None
        structured = [option for option in options if option is not types.NoneType]
        if len(structured) == 1:
            return _rebuild(value, structured[0], where)
        return tuple(value) if isinstance(value, list) else value
    if dataclasses.is_dataclass(hint):
        return _rebuild_noun(value, hint, where)  # type: ignore[arg-type]
    if origin is np.ndarray:
        kind = np.int64 if "int" in str(hint) else np.float64
        return np.array([np.nan if item is None else item for item in value], dtype=kind)
    if origin is tuple:
        arguments = typing.get_args(hint)
        if len(arguments) == 2 and arguments[1] is Ellipsis:  # noqa: PLR2004  tuple[X, ...]
            return tuple(_rebuild(item, arguments[0], where) for item in value)
        return tuple(_rebuild(item, argument, where) for item, argument in zip(value, arguments, strict=True))
    if origin is not None and issubclass(origin, Mapping):
        inner = typing.get_args(hint)[1]
        return {key: _rebuild(item, inner, f"{where}.{key}") for key, item in value.items()}
    if hint is float:
        return float("nan") if value is None else float(value)
    if hint in (int, str, bool) and not isinstance(value, hint):
        raise TypeError(where)
    return value


def _rebuild_noun(value: Any, kind: type, where: str) -> Any:  # noqa: ANN401  any noun
    hints = _hints(kind)
    names = _json_names(kind)
    given = {}
    for field in dataclasses.fields(kind):
        key = names.get(field.name, field.name)
        if key in value:
            given[field.name] = _rebuild(value[key], hints[field.name], f"{where}.{key}")
        elif field.default is dataclasses.MISSING and field.default_factory is dataclasses.MISSING:
            raise KeyError(f"{where}.{key}")
    return kind(**given)


def decode(content: bytes, name: str = "result.json") -> Characterization:
    """Read a Characterization from JSON.

    Raises
    ------
    ArchiveError
        When it is not JSON, not of this schema, of a later version, or lacks a field.
    """
    way_out = "make the result again with stillbench characterize"
    try:
        plain = json.loads(content)
    except (ValueError, RecursionError) as error:
        raise ArchiveError(f"{name!r} is not JSON ({error})", "a result.json", way_out) from error
    if not isinstance(plain, dict) or plain.get("schema") != SCHEMA:
        raise ArchiveError(f"{name!r} is not of the schema {SCHEMA!r}", "a result.json", way_out)
    if plain.get("version") != SCHEMA_VERSION:
        raise ArchiveError(
            f"{name!r} is of version {plain.get('version')!r}", f"version {SCHEMA_VERSION}", "use a later stillbench"
        )
    try:
        result = _rebuild(plain, Characterization, "result")
    except (KeyError, TypeError, ValueError, AttributeError) as error:
        raise ArchiveError(f"{name!r} is damaged at {error}", "a whole result.json", way_out) from error
    if not isinstance(result, Characterization):
        raise TypeError(type(result))
    return result
