"""Odd and damaged inputs: each is read rightly, said, or refused in one line; none is read wrongly in silence."""

import io
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pytest
from pyarrow import feather, parquet
from scipy import io as scipy_io

from stillbench.foundation.errors import LogError, StillbenchError, UsageError
from stillbench.foundation.units import parse_unit
from stillbench.logs.read import read_log
from stillbench.logs.understand import understand_log
from stillbench.pipeline import characterize, load_log_sheet
from stillbench.vocabulary.log_sheet import LogSheet

N = 60


def text(path: Path, lines: list[str], end: str = "\n") -> Path:
    path.write_bytes((end.join(lines) + end).encode())
    return path


def column(log: Any, name: str, **declared: Any) -> np.ndarray:
    chosen: dict[str, Any] = {"units": {"": "V"}, "rate": 100.0, "time": "none"} | declared
    return read_log(log, channels=[name], **chosen).channels[0].values


def test_a_stray_quote_swallows_no_lines(tmp_path: Path) -> None:
    rows = [f"{i}.5,{i}.25" for i in range(2_500)]
    rows[2_100] = '2100.5,"5'
    rows[2_300] = '2300.5,"5'
    log = text(tmp_path / "log.csv", rows)
    assert column(log, "1").size == 2_500
    with pytest.raises(LogError, match="in column '2'"):
        column(log, "2")


@pytest.mark.parametrize("places", [(20,), (20, 60), (2, 2_900)])
def test_a_stray_quote_near_the_start(tmp_path: Path, places: tuple[int, ...]) -> None:
    rows = [f'{i}.5,{i}.25,"word"' for i in range(3_000)]
    for place in places:
        rows[place] = f'{place}.5,{place}.25,"word'
    assert column(text(tmp_path / "log.csv", rows), "2").tolist() == [i + 0.25 for i in range(3_000)]


def test_a_column_of_words_beside_the_readings(tmp_path: Path) -> None:
    """A state, as many loggers write it; it is no channel, and asking for it says why."""
    rows = [f"{i / 10:.1f};{'OK' if i % 7 else 'WARM UP'};{i}.5;on" for i in range(N)]
    log = text(tmp_path / "log.csv", ["time [s];state;rate;light", *rows])
    assert read_log(log, units={"": "V"}).channels[0].values.tolist() == [i + 0.5 for i in range(N)]
    with pytest.raises(LogError, match="'WARM UP' in column 'state'"):
        column(log, "state")
    assert [part.role for part in understand_log(log).columns] == ["time", "words", "data", "words"]


def test_lines_that_end_twice_in_a_single_column(tmp_path: Path) -> None:
    assert column(text(tmp_path / "log.csv", ["g", *(f"{i}.5" for i in range(N))], "\r\r\n"), "g").size == N


def test_a_torn_first_row_without_a_head_is_said(tmp_path: Path) -> None:
    log = text(tmp_path / "log.csv", ["1.5,2.5", *(f"{i},{i}.5,{i}.25" for i in range(N))])
    made = read_log(log, channels=["2"], units={"": "V"}, rate=1.0, time="none")
    assert any("above the first whole row" in sentence for sentence in made.understood)


def test_stamps_from_end_to_end_of_the_numbers(tmp_path: Path) -> None:
    rows = [f"{i}.0,{i}.5" for i in range(N)]
    rows[20], rows[30] = "-1e308,20.5", "1e308,30.5"
    log = text(tmp_path / "log.csv", ["time,x", *rows])
    with pytest.raises(StillbenchError, match="reach over more"):
        characterize(log, unit="V", time_unit="s")
    assert "reach over more" in understand_log(log, time_unit="s").clock


def test_blanks_within_stamps_between_tabs(tmp_path: Path) -> None:
    rows = [f"2024-01-05 10:00:{i:02d}\t{i}.5\t{i}.25" for i in range(N)]
    log = text(tmp_path / "log.txt", ["time\tx\ty", *rows])
    assert column(log, "3", time=None, rate=None).tolist() == [i + 0.25 for i in range(N)]
    assert column(log, "y", time=None, rate=None)[1] == 1.25


def test_one_odd_line_does_not_settle_a_doubt(tmp_path: Path) -> None:
    log = text(tmp_path / "log.csv", ["rate", *(f"{i},5" for i in range(N - 1)), "3,-1"])
    with pytest.raises(StillbenchError):
        column(log, "1")


def test_rows_behind_a_comment_mark_are_no_rows(tmp_path: Path) -> None:
    rows = [f"{i},{i}.5" for i in range(3_000)]
    rows.insert(2_500, "# 20,9999")
    assert column(text(tmp_path / "log.csv", rows), "2").tolist() == [i + 0.5 for i in range(3_000)]


def test_a_comma_before_milliseconds_is_asked_about(tmp_path: Path) -> None:
    log = text(tmp_path / "log.csv", [f"2025-01-01 10:00:{i:02d},100,{i}.5" for i in range(N)])
    with pytest.raises(UsageError, match="milliseconds"):
        column(log, "2", time=None, rate=None)


@pytest.mark.parametrize("declared", [None, "utf-8", "utf-8-sig"])
@pytest.mark.parametrize("mark", [b"", b"\xef\xbb\xbf"])
def test_the_mark_of_byte_order_is_taken_off_where_it_is(tmp_path: Path, declared: str | None, mark: bytes) -> None:
    path = tmp_path / "log.csv"
    path.write_bytes(mark + "\n".join(f"{1000 + i}.5" for i in range(N)).encode())
    sheet = LogSheet.model_validate({"log": {"encoding": declared} if declared else {}})
    assert column(path, "1", sheet=sheet).tolist() == [1000.5 + i for i in range(N)]


@pytest.mark.parametrize(
    "bad",
    ["2024", "2024-01", "20240105", "now", "today", "31/12/2924 10:00:00", "2024-01-05 10:00:00+01:00", "9999-12-31 00:00:00",
     "0001-01-01 00:00:00", "٢٠٢٤-01-05 10:00:00"],
)  # fmt: skip
def test_no_stamp_is_guessed(tmp_path: Path, bad: str) -> None:
    rows = [f"2024-01-05 10:00:{i:02d};{i}.5" for i in range(N)]
    rows[30] = f"{bad};30.5"
    with pytest.raises(StillbenchError):
        column(text(tmp_path / "log.csv", ["time;x", *rows]), "x", time=None, rate=None)


def test_am_and_pm_in_some_rows_only(tmp_path: Path) -> None:
    rows = [f"11:59:{i:02d} pm,{i}.5" for i in range(N)]
    rows[30] = "11:59:30,30.5"
    with pytest.raises(StillbenchError, match="am or pm in every row"):
        column(text(tmp_path / "log.csv", ["time,x", *rows]), "x", time=None, rate=None)


def test_stamps_that_are_not_finite(tmp_path: Path) -> None:
    rows = [f"{i}.0,{i}.5" for i in range(2_000)]
    rows[1_500] = "inf,1500.5"
    log = read_log(text(tmp_path / "log.csv", ["time [s],x", *rows]), channels=["x"], units={"": "V"})
    assert log.stamps is not None
    assert np.isfinite(log.stamps.seconds).all()
    assert any("1 row without a stamp" in sentence for sentence in log.understood)


def test_instants_that_are_none() -> None:
    times = np.arange(N).astype("M8[s]")
    times[7] = "NaT"
    for data in (
        {"time": times, "x": np.arange(N) * 1.0},
        {"time": np.arange(N).astype("M8[Y]") + 3000, "x": np.ones(N)},
    ):
        with pytest.raises(LogError, match="no instant in a row"):
            column(data, "x", time=None, rate=None)


def test_columns_of_one_name(tmp_path: Path) -> None:
    table = pa.table([pa.array([0.0] * N), pa.array([1.0] * N)], names=["x", "x"])
    parquet.write_table(table, tmp_path / "log.parquet")
    assert column(tmp_path / "log.parquet", "2").tolist() == [1.0] * N
    nested = pa.table({"s.a": [2.0] * N, "s": [{"a": 3.0}] * N})
    parquet.write_table(nested, tmp_path / "nested.parquet")
    assert column(tmp_path / "nested.parquet", "s.a").tolist() == [2.0] * N
    arrays: dict[str, Any] = {"a": np.ones((N, 2)), "a.1": np.zeros(N)}
    np.savez(tmp_path / "log.npz", **arrays)
    with pytest.raises(LogError, match=r"a\.1"):
        column(tmp_path / "log.npz", "a.1")


def test_masked_and_many_dimensional_arrays() -> None:
    masked = np.ma.array(np.arange(N) * 1.0, mask=np.arange(N) == 3)
    assert np.flatnonzero(np.isnan(column({"x": masked}, "x"))).tolist() == [3]
    assert np.isnan(column(masked, "1")[3])
    with pytest.raises(LogError, match="more than one number"):
        column({"x": np.ones((N, 2))}, "x")
    with pytest.raises(LogError):
        column([[1, 2], [3]], "1")


def test_the_first_row_is_torn(tmp_path: Path) -> None:
    rows = ["1,2", *(f"{i},{i}.5,{i}.25" for i in range(1, N))]
    log = read_log(
        text(tmp_path / "log.csv", ["t [s],x,y", *rows]), channels=["y"], units={"": "V"}, rate=1.0, time="none"
    )
    assert log.channels[0].values.size == N
    assert np.isnan(log.channels[0].values[0])
    rows = ["ERR,ERR", "ERR,ERR", *(f"{i}.5,{i}.25" for i in range(2, N))]
    sheet = LogSheet.model_validate({"log": {"missing": ["ERR"]}})
    values = column(text(tmp_path / "log.csv", ["x,y", *rows]), "y", sheet=sheet)
    assert values.size == N
    assert np.isnan(values[:2]).all()


def test_an_empty_line_in_a_single_column_is_a_missing_sample(tmp_path: Path) -> None:
    rows = [f"{i}.5" for i in range(N)]
    rows[10] = ""
    assert np.flatnonzero(np.isnan(column(text(tmp_path / "log.csv", ["x", *rows]), "x"))).tolist() == [10]


def test_marks_of_missing_samples_in_a_small_log(tmp_path: Path) -> None:
    sheet = LogSheet.model_validate({"log": {"missing": ["5"]}})
    values = column(text(tmp_path / "log.csv", ["x", *(str(i % 9) for i in range(N))]), "x", sheet=sheet)
    assert np.isnan(values[5])
    assert values[15] == 6


def test_a_channel_asked_for_twice(tmp_path: Path) -> None:
    log = text(tmp_path / "log.csv", ["x,y", *(f"{i},{i}.5" for i in range(N))])
    made = read_log(log, channels=["x", "x"], units={"": "V"}, rate=1.0, time="none")
    assert np.array_equal(made.channels[0].values, made.channels[1].values)


@pytest.mark.parametrize("heads", ["x,x", "x (V),x (T)", "T1,T2"])
def test_the_sheet_that_check_writes_is_one(tmp_path: Path, heads: str) -> None:
    log = text(tmp_path / "log.csv", [heads, *(f"{i},{i}.5" for i in range(N))])
    found = understand_log(log, rate=10.0)
    (tmp_path / "sheet.toml").write_text(found.sheet)
    sheet = load_log_sheet(tmp_path / "sheet.toml")
    assert len(sheet.channel) == 2
    assert sheet.clock.column == "none"


@pytest.mark.parametrize("suffix", [".mat", ".feather", ".parquet", ".npz", ".npy", ".wav"])
def test_no_flipped_byte_brings_the_process_down(tmp_path: Path, suffix: str) -> None:
    """Bytes over the whole of a small file set to several values; the reader of MAT files crashed on some of these."""
    path = tmp_path / f"log{suffix}"
    values = np.arange(50.0)
    if suffix == ".mat":
        scipy_io.savemat(path, {"time": values})
    elif suffix in (".feather", ".parquet"):
        table = pa.table({"x": values, "s": [f"word {i}" for i in range(50)]})
        (feather.write_feather if suffix == ".feather" else parquet.write_table)(table, path)
    elif suffix == ".npz":
        np.savez(path, x=values)
    elif suffix == ".npy":
        np.save(path, values)
    else:
        from scipy.io import wavfile  # noqa: PLC0415

        wavfile.write(path, 100, values.astype(np.float32))
    whole = path.read_bytes()
    places = (
        [177, *np.linspace(0, len(whole) - 1, 12).astype(int).tolist()] if suffix == ".mat" else range(0, len(whole), 7)
    )
    for place in places:
        if place >= len(whole):
            continue
        for value in (2, 255):
            path.write_bytes(whole[:place] + bytes([value]) + whole[place + 1 :])
            try:
                read_log(path, units={"": "V"}, rate=100.0, time="none", channels=["1"])
            except StillbenchError as error:
                assert len(error.message) < 2_000


@pytest.mark.parametrize("unit", ["ms^400", "h^80*h^80", "s^(1/0)", "V^" + "9" * 5_000, "(" * 3_000, "h^1000"])
def test_units_beyond_reason(unit: str) -> None:
    with pytest.raises(StillbenchError):
        parse_unit(unit)


def test_heads_that_are_long_or_strange(tmp_path: Path) -> None:
    for head in ("x" + " " * 2_000 + "y", "(" * 20_000, "x [s^(1/0)]"):
        log = text(tmp_path / "log.csv", [head, *(f"{i}.5" for i in range(N))])
        assert column(log, "1")[0] == 0.5


def test_wide_and_blank_texts_take_no_time(tmp_path: Path) -> None:
    width = 5_000
    log = text(tmp_path / "wide.csv", [",".join(["1"] * width) for _ in range(20)])
    assert column(log, "17").tolist() == [1.0] * 20
    rows = [f"{i}.5   {i}.25" for i in range(N)]
    rows[30] = "30.5" + " " * 60_000 + "30.25"
    assert column(text(tmp_path / "blank.txt", rows), "2")[30] == 30.25


def test_sheets_that_are_beyond_reason(tmp_path: Path) -> None:
    for content in ("[log]\ninterleaved = 0x" + "f" * 6_000, "[clock]\nrate = true", "[channel.x]\ncolumn = true"):
        (tmp_path / "sheet.toml").write_text(content)
        with pytest.raises(StillbenchError):
            load_log_sheet(tmp_path / "sheet.toml")
    with pytest.raises(StillbenchError):
        load_log_sheet(Path("a\0b"))


def test_a_name_that_no_file_can_have() -> None:
    with pytest.raises(LogError, match="cannot be opened"):
        read_log("x" * 300, units={"": "V"}, rate=1.0)


def test_npy_of_objects_is_refused(tmp_path: Path) -> None:
    stream = io.BytesIO()
    np.save(stream, np.array([{"a": 1}] * N, dtype=object), allow_pickle=True)
    (tmp_path / "log.npy").write_bytes(stream.getvalue())
    with pytest.raises(LogError, match="pickled"):
        column(tmp_path / "log.npy", "1")
