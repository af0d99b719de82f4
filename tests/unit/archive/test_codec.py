"""Results are read for ever; what is damaged is refused in one line."""

import json
from importlib import resources
from pathlib import Path

import jsonschema
import pytest

from stillbench.archive.codec import ArchiveError, decode, encode
from stillbench.report.render import render_report

FROZEN = Path(__file__).with_name("frozen-1.json")
SCHEMA = json.loads((resources.files("stillbench.archive") / "schema" / "characterization-1.json").read_text())


def test_the_frozen_result_of_version_1_is_read() -> None:
    result = decode(FROZEN.read_bytes())
    assert result.version == 1
    assert result.channels[0].label == "rate"
    again = json.loads(encode(result))
    for channel in again["channels"]:
        assert channel.pop("converter") is None  # came later, and is null in results that lack it
    assert again == json.loads(FROZEN.read_bytes())
    assert b"<svg" in render_report(result)


def test_the_frozen_result_fits_the_schema() -> None:
    jsonschema.validate(json.loads(FROZEN.read_bytes()), SCHEMA, cls=jsonschema.Draft202012Validator)


@pytest.mark.parametrize("content", [b"", b"{", b"[]", b"{}", b'{"schema": "other"}', b"\xff\xfe", b"[" * 100_000])
def test_what_is_no_result_is_refused(content: bytes) -> None:
    with pytest.raises(ArchiveError) as caught:
        decode(content)
    assert "\n" not in str(caught.value)


def test_a_later_version_is_refused() -> None:
    content = json.loads(FROZEN.read_bytes())
    content["version"] = 2
    with pytest.raises(ArchiveError, match="version 2"):
        decode(json.dumps(content).encode())


@pytest.mark.parametrize("path", [["source"], ["channels", 0, "noise", "terms"], ["channels", 0, "curve", "tau_s"]])
def test_a_missing_part_is_named(path: list[str | int]) -> None:
    content = json.loads(FROZEN.read_bytes())
    part = content
    for key in path[:-1]:
        part = part[key]
    del part[path[-1]]
    with pytest.raises(ArchiveError, match=str(path[-1])):
        decode(json.dumps(content).encode())
