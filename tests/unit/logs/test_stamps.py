"""Written dates, times of day, counters that roll over, and heads that come again. Made logs with a known course of time."""

from datetime import datetime, timedelta
from pathlib import Path

import numpy as np
import pytest

from stillbench.foundation.errors import ClockError, LogError, UsageError
from stillbench.logs.clock import audit_clock
from stillbench.logs.read import read_log
from stillbench.logs.understand import understand_log
from stillbench.pipeline import load_log_sheet
from stillbench.vocabulary.log_sheet import LogSection, LogSheet
from stillbench.vocabulary.sensor_log import SensorLog

N = 300
VALUES = np.random.default_rng(3).normal(0.1, 0.02, N).round(5)
BEGIN = datetime(2025, 3, 25, 23, 59, 50)  # noqa: DTZ001  the wall clock of a logger
MOMENTS = [BEGIN + timedelta(milliseconds=100 * i) for i in range(N)]
"""Over midnight."""


def written(path: Path, stamps: list[str], head: str = "time,rate") -> Path:
    rows = "\n".join(f"{stamp},{value}" for stamp, value in zip(stamps, VALUES.tolist(), strict=True))
    path.write_text(f"{head}\n{rows}\n")
    return path


def read(path: Path, **declared: object) -> SensorLog:
    return read_log(path, channels=["rate"], units={"": "V"}, **declared)  # type: ignore[arg-type]


FORMS = {
    "day first": ("%d/%m/%Y %H:%M:%S.%f", "day first"),
    "day first, points": ("%d.%m.%Y %H:%M:%S.%f", "day first"),
    "month first": ("%m/%d/%Y %H:%M:%S.%f", "month first"),
    "month in letters": ("%d-%b-%Y %H:%M:%S.%f", "month in letters"),
    "year first, strokes": ("%Y/%m/%d %H:%M:%S.%f", "year first"),
    "iso": ("%Y-%m-%d %H:%M:%S.%f", "date-times"),
    "iso, T": ("%Y-%m-%dT%H:%M:%S.%f", "date-times"),
    "time of day": ("%H:%M:%S.%f", "times of day"),
}


@pytest.mark.parametrize("form", FORMS)
def test_written_stamps_over_midnight(tmp_path: Path, form: str) -> None:
    pattern, words = FORMS[form]
    log = read(written(tmp_path / "log.csv", [moment.strftime(pattern) for moment in MOMENTS]))
    assert log.stamps is not None
    assert np.array_equal(log.stamps.seconds, np.arange(N) / 10.0)
    assert any(words in sentence for sentence in log.understood)
    if "time of day" not in form:
        assert log.stamps.origin == pytest.approx((BEGIN - datetime(1970, 1, 1)).total_seconds(), abs=1e-6)  # noqa: DTZ001


@pytest.mark.parametrize("form", FORMS)
def test_the_sheet_that_check_writes_reads_the_stamps_the_same(tmp_path: Path, form: str) -> None:
    path = written(tmp_path / "log.csv", [moment.strftime(FORMS[form][0]) for moment in MOMENTS])
    (tmp_path / "sheet.toml").write_text(understand_log(path).sheet)
    log = read(path, sheet=load_log_sheet(tmp_path / "sheet.toml"))
    assert log.stamps is not None
    assert np.array_equal(log.stamps.seconds, np.arange(N) / 10.0)


def test_am_and_pm(tmp_path: Path) -> None:
    moments = [BEGIN + timedelta(seconds=i) for i in range(N)]
    log = read(written(tmp_path / "log.csv", [moment.strftime("%m/%d/%Y %I:%M:%S %p") for moment in moments]))
    assert log.stamps is not None
    assert np.array_equal(log.stamps.seconds, np.arange(N))


def test_date_and_time_of_day_in_columns_of_their_own(tmp_path: Path) -> None:
    stamps = [moment.strftime("%d.%m.%Y,%H:%M:%S.%f") for moment in MOMENTS]
    log = read_log(written(tmp_path / "log.csv", stamps, "date,clock,rate"), units={"": "V"})  # neither is a channel
    assert log.channels[0].label == "rate"
    assert log.stamps is not None
    assert np.array_equal(log.stamps.seconds, np.arange(N) / 10.0)


def test_order_of_day_and_month_is_told_by_what_makes_one_night(tmp_path: Path) -> None:
    """From 5 to 6 March or from 3 May to 3 June: the night is the shorter one."""
    moments = [datetime(2025, 3, 5, 23, 59, 50) + timedelta(seconds=i) for i in range(N)]  # noqa: DTZ001
    log = read(written(tmp_path / "log.csv", [moment.strftime("%d/%m/%Y %H:%M:%S") for moment in moments]))
    assert log.stamps is not None
    assert log.stamps.seconds[-1] == N - 1


def test_order_of_day_and_month_that_cannot_be_told_is_asked_about(tmp_path: Path) -> None:
    stamps = [f"0{1 + i // 100}/0{1 + i // 100}/2025 10:00:{i % 60:02d}" for i in range(N)]
    with pytest.raises(ClockError, match="day-first or --time-unit month-first"):
        read(written(tmp_path / "log.csv", stamps))
    log = read(
        written(tmp_path / "log.csv", ["05/03/2025 10:00:00", *["03/05/2025 10:00:01"] * (N - 1)]),
        time_unit="day-first",
    )
    assert log.stamps is not None
    assert log.stamps.seconds[-1] == 59 * 86_400 + 1


@pytest.mark.parametrize("bad", ["31/02/2025 10:00:00", "05/13/2025 25:00:00", "05/06/25 10:00:00", "soon"])
def test_a_stamp_that_does_not_exist(tmp_path: Path, bad: str) -> None:
    stamps = [moment.strftime("%d/%m/%Y %H:%M:%S.%f") for moment in MOMENTS]
    stamps[200] = bad
    with pytest.raises(ClockError, match="row 201"):
        read(written(tmp_path / "log.csv", stamps))


@pytest.mark.parametrize(
    ("limit", "step", "unit"),
    [
        (2**16, 97, "ms"),
        (2**32, 50_000_000, "us"),
        (1_000_000, 40_013, "us"),
        (86_400, 600, "s"),
        (60_000, 1_000, "ms"),
    ],
)
def test_counter_that_rolls_over(tmp_path: Path, limit: int, step: int, unit: str) -> None:
    counts = (limit - 40 * step + step * np.arange(N)) % limit
    log = read(written(tmp_path / "log.csv", [str(count) for count in counts], f"time [{unit}],rate"))
    assert log.stamps is not None
    assert np.allclose(np.diff(log.stamps.seconds), step * {"s": 1, "ms": 1e-3, "us": 1e-6}[unit], rtol=1e-9)
    assert any(f"rolls over at {limit}" in sentence for sentence in log.understood)


def test_a_clock_set_back_is_no_roll_over(tmp_path: Path) -> None:
    counts = np.concatenate([1_000 + 10 * np.arange(N // 2), 500 + 10 * np.arange(N - N // 2)])
    log = read(written(tmp_path / "log.csv", [str(count) for count in counts], "time [ms],rate"))
    assert any(finding.kind == "backward_stamps" for finding in audit_clock(log).findings)


def test_head_that_comes_again_splits_a_log_without_stamps(tmp_path: Path) -> None:
    rows = [f"{value}" for value in VALUES.tolist()]
    path = tmp_path / "log.csv"
    path.write_text(
        "\n".join(["rate,", *[f"{row}," for row in rows[:120]], "rate,", *[f"{row}," for row in rows[120:]]])
    )
    log = read_log(path, channels=["rate"], units={"": "V"}, rate=10.0)
    assert log.restarts == (120,)
    grid = audit_clock(log)
    assert grid.segment[119] != grid.segment[120]
    assert np.array_equal(log.channels[0].values, VALUES)


def test_mark_of_missing_samples_however_it_is_written(tmp_path: Path) -> None:
    cells = [f"{value}" for value in VALUES.tolist()]
    cells[::50] = ["9.9E+37", "9.90e37", "99e36", "9.9e+037", "9.9e37", "+9.9e37"]
    path = tmp_path / "log.csv"
    path.write_text("rate\n" + "\n".join(cells))
    sheet = LogSheet(log=LogSection(missing=("9.9e37",)))
    log = read_log(path, sheet=sheet, units={"": "V"}, rate=10.0)
    assert np.flatnonzero(np.isnan(log.channels[0].values)).tolist() == list(range(0, N, 50))


@pytest.mark.parametrize("text", ["1,234;2,345\n", "12,345;999,001\n"])
def test_a_comma_that_may_part_thousands_is_asked_about(tmp_path: Path, text: str) -> None:
    path = tmp_path / "log.csv"
    path.write_text(text * 30)
    with pytest.raises(UsageError, match="thousands"):
        read_log(path, channels=["1"], units={"": "V"}, rate=1.0)
    log = read_log(path, sheet=LogSheet(log=LogSection(decimal=",")), channels=["1"], units={"": "V"}, rate=1.0)
    assert log.channels[0].values[0] == float(text.split(";", maxsplit=1)[0].replace(",", "."))


def test_a_comma_in_two_uses_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "log.csv"
    path.write_text("time,rate\n" + "\n".join(f"{i},5,0,{i % 7}" for i in range(40)))
    with pytest.raises(UsageError, match="names 2 columns and its rows have 4 cells"):
        read_log(path, channels=["1"], units={"": "V"}, rate=1.0)


def test_lines_of_one_device_out_of_many(tmp_path: Path) -> None:
    lines = ["start of the logger v2"]
    for i in range(N):
        lines += [f"A;{i * 40};{VALUES[i]}", f"B;{i * 40 + 1};9.0", "$GPGGA,,,"]
    path = tmp_path / "capture.txt"
    path.write_text("\n".join(lines))
    sheet = LogSheet(log=LogSection(line_pattern=r"^A;(?P<time>\d+);(?P<rate>[-\d.]+)$"))
    log = read_log(path, sheet=sheet, units={"": "V"}, time_unit="ms")
    assert np.array_equal(log.channels[0].values, VALUES)
    assert any(f"{2 * N + 1} lines that do not match" in sentence for sentence in log.understood)
    for pattern, words in (("^Z(?P<a>.)", "no line"), ("^A", "names no group"), ("(", "no regular expression")):
        with pytest.raises((LogError, UsageError), match=words):
            read_log(path, sheet=LogSheet(log=LogSection(line_pattern=pattern)), units={"": "V"}, rate=1.0)
