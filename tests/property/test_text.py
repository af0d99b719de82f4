"""Delimited text of any common layout gives the numbers that were written."""

import itertools
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from stillbench.foundation.errors import StillbenchError
from stillbench.logs.read import read_log
from stillbench.vocabulary.log_sheet import LogSheet


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("text")


@settings(max_examples=120)
@given(
    delimiter=st.sampled_from([",", ";", "\t", "  ", " \t "]),
    decimal=st.sampled_from([".", ","]),
    line_end=st.sampled_from(["\n", "\r\n"]),
    encoding=st.sampled_from(["utf-8", "utf-8-sig", "utf-16", "utf-16-le", "utf-16-be", "latin-1"]),
    head=st.booleans(),
    comments=st.integers(0, 3),
    trailing=st.booleans(),
    last_end=st.booleans(),
)
@example(
    delimiter=",", decimal=".", line_end="\r\n", encoding="utf-16", head=True, comments=2, trailing=True, last_end=False
)
def test_layouts(
    *,
    folder: Path,
    delimiter: str,
    decimal: str,
    line_end: str,
    encoding: str,
    head: bool,
    comments: int,
    trailing: bool,
    last_end: bool,
) -> None:
    if delimiter == "," and decimal == ",":
        return  # no such text can be written
    numbers = np.round(np.random.default_rng(3).normal(2.5, 0.1, (40, 2)), 6)
    time = np.arange(40) * 0.02
    end = delimiter if trailing and delimiter.strip() else ""
    lines = [f"# logged by hand, line {i}" for i in range(comments)]
    if head:
        lines.append(
            delimiter.join(["time", "rate", "µ volts" if delimiter.strip() or "\t" in delimiter else "volts"]) + end
        )
    rows = ([f"{t:.2f}", f"{a:.6f}", f"{b:.6f}"] for t, (a, b) in zip(time, numbers, strict=True))
    lines += [delimiter.join(cell.replace(".", decimal) for cell in row) + end for row in rows]
    text = line_end.join(lines) + (line_end if last_end else "")
    path = folder / "log.txt"
    path.write_bytes(text.encode(encoding))
    if delimiter == " \t ":
        head = False  # the head of blanks and tabs splits as its rows do; taken by number below
    log = read_log(path, channels=["2", "3"], units={"": "deg/s"}, time=1, time_unit="s")
    assert log.source.rows == 40
    for i in range(2):
        assert np.array_equal(log.channels[i].values, numbers[:, i])
    assert log.stamps is not None
    assert np.allclose(log.stamps.seconds, time, atol=1e-12)


STAMPS: dict[str, tuple[Any, dict[str, Any]]] = {
    "seconds": (lambda i: f"{i * 0.5:.1f}", {"time_unit": "s"}),
    "milliseconds that roll over": (lambda i: str((64_000 + 500 * i) % 65_536), {"time_unit": "ms"}),
    "iso": (lambda i: f"2025-03-01 23:59:{i // 2:02d}.{5 * (i % 2)}", {}),
    "day first": (lambda i: f"01.03.2025 23:59:{i // 2:02d}.{5 * (i % 2)}", {"time_unit": "day-first"}),
    "month first, am and pm": (lambda i: f"3/1/2025 11:59:{i // 2:02d}.{5 * (i % 2)} PM", {"time_unit": "month-first"}),
    "time of day": (lambda i: f"23:59:{i // 2:02d}.{5 * (i % 2)}", {}),
    "none": (None, {"rate": 2.0, "time": "none"}),
}
ENDS = ("\n", "\r\n", "\r", "\r\r\n")
HEADS = ("none", "names", "names and units", "prose and names")


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "latin-1"])
@pytest.mark.parametrize("stamp", STAMPS)
def test_matrix_of_layouts(folder: Path, encoding: str, stamp: str) -> None:
    """Delimiter x decimal mark x line end x encoding x head x form of the stamps: the numbers that were written, or asked about."""
    written, declared = STAMPS[stamp]
    numbers = np.round(np.random.default_rng(3).normal(2.5, 0.1, (40, 2)), 6)
    path = folder / f"{encoding}.txt"
    read = 0
    for delimiter, decimal, end, head in itertools.product((",", ";", "\t"), ".,", ENDS, HEADS):
        if delimiter == "," and decimal == ",":
            continue
        names = ["time"] * (written is not None) + ["a", "b"]
        units = ["s"] * (written is not None) + ["deg/s", "deg/s"]
        lines = ["Logger of the launch, switched on by hand", "all is well"] if head == "prose and names" else []
        lines += [delimiter.join(names)] if head != "none" else []
        lines += [delimiter.join(units)] if head == "names and units" else []
        for i, row in enumerate(numbers.tolist()):
            cells = [f"{value:.6f}".replace(".", decimal) for value in row]
            stamped = written(i) if written is not None else ""
            plain = stamped.replace(".", decimal) if stamp == "seconds" else stamped
            lines.append(delimiter.join([plain] * (written is not None) + cells))
        path.write_bytes((end.join(lines) + end).encode(encoding))
        first = 2 if written is not None else 1
        given = {"time": "1"} | declared if written is not None and "time" not in declared else declared
        log = read_log(path, channels=[str(first), str(first + 1)], units={"": "deg/s"}, **given)
        where = (delimiter, decimal, end, head)
        assert log.source.rows == 40, where
        for i in range(2):
            assert np.array_equal(log.channels[i].values, numbers[:, i]), where
        if log.stamps is not None:
            assert np.allclose(log.stamps.seconds, np.arange(40) * 0.5, atol=1e-9), where
        read += 1
    assert read == 5 * len(ENDS) * len(HEADS)


@settings(max_examples=150)
@given(st.binary(max_size=3_000))
@example(b"\xff\xfe")
@example(b"1,2\n" * 20 + b'"')
@example(b"\x93NUMPY\x01\x00\xff\xff")
@example(b"PK\x03\x04rest")
@example(b"\x1f\x8b\x08\x00")
def test_any_bytes_end_in_a_log_or_one_clear_error(folder: Path, content: bytes) -> None:
    path = folder / "any.csv"
    path.write_bytes(content)
    try:
        log = read_log(path, sheet=LogSheet(), channels=["1"], units={"": "deg/s"}, rate=1.0, time="none")
    except StillbenchError as error:
        assert error.message
        assert "\n" not in error.message
    else:
        assert log.channels[0].values.size >= 16


def test_a_large_text_is_read_block_by_block_to_the_same_numbers(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Torn lines want the whole table, and get it."""
    rows = np.round(np.random.default_rng(6).normal(2.5, 0.1, (30_000, 2)), 6)
    lines = [f"{i / 100:.2f};{a:.6f};{b:.6f}" for i, (a, b) in enumerate(rows.tolist())]
    lines[5_000] = "50.00;9.9e37;2.5"
    sheet = LogSheet.model_validate({"log": {"missing": ["9.9e37"]}})
    for torn in (False, True):
        text = [*lines[:-1], "299.99;2.4"] if torn else lines
        (tmp_path / "log.csv").write_text("time [s];a;b\n" + "\n".join(text) + "\n")
        logs = []
        for large in (1 << 26, 1_000):
            monkeypatch.setattr("stillbench.logs.text.LARGE", large)
            logs.append(read_log(tmp_path / "log.csv", sheet=sheet, channels=["a", "b"], units={"": "V"}))
        for first, second in zip(logs[0].channels, logs[1].channels, strict=True):
            assert np.array_equal(first.values, second.values, equal_nan=True)
        assert logs[0].source == logs[1].source
        assert np.isnan(logs[1].channels[0].values[5_000])
