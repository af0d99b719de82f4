"""From readings to a rate: every part of the front end, each against the arithmetic written out by hand."""

from pathlib import Path
from typing import Any

import numpy as np
import pytest

from stillbench.foundation.errors import StillbenchError, UsageError
from stillbench.foundation.units import parse_unit
from stillbench.logs.cut import cut_record
from stillbench.logs.read import read_log
from stillbench.logs.side import aligned
from stillbench.pipeline import characterize, load_log_sheet
from stillbench.vocabulary.log_sheet import LogSheet
from stillbench.vocabulary.record import Record
from stillbench.vocabulary.sensor_log import SideSeries

DEG = np.pi / 180.0
N = 400
RATE = np.random.default_rng(2).normal(0.02, 0.01, N)
"""deg/s."""


def sheet(front_end: dict[str, Any], unit: str = "V", **more: Any) -> LogSheet:
    return LogSheet.model_validate({"channel": {"out": {"unit": unit, "front_end": front_end}}, **more})


def record(columns: dict[str, Any], log_sheet: LogSheet) -> Record:
    log = read_log(columns, sheet=log_sheet, channels=["out"], rate=10.0, time="none")
    return cut_record(log, "out", sheet=log_sheet)


VOLTS = {"zero": "2.5 V", "scale_factor": "48.2 mV/(deg/s)", "scale_factor_uncertainty": "0.4 %"}
VOLTS_OF_RATE = 2.5 + 0.0482 * RATE


def test_volts() -> None:
    made = record({"out": VOLTS_OF_RATE}, sheet(VOLTS))
    assert made.values == pytest.approx(RATE * DEG, rel=1e-11)
    assert made.quantity == "angular rate"


def test_sign_turned_over_and_origin_of_the_uncertainty() -> None:
    made = record(
        {"out": 5.0 - VOLTS_OF_RATE}, sheet(VOLTS | {"sign": "-", "scale_factor_origin": "table test of March"})
    )
    assert made.values == pytest.approx(RATE * DEG, rel=1e-11)
    assert made.front_end is not None
    assert "table test of March" in made.front_end.text


@pytest.mark.parametrize(
    ("range_text", "codes", "low", "span"),
    [("0 V to 5 V", None, 0.0, 5.0), ("+-10 V", "signed", None, 20.0), ("+-10 V", "from zero", -10.0, 20.0)],
)
def test_counts_through_range_and_bits(range_text: str, codes: str | None, low: float | None, span: float) -> None:
    step = span / 2**24
    counts = np.rint((VOLTS_OF_RATE - (low or 0.0)) / step)
    front_end = VOLTS | {"range": range_text, "bits": 24} | ({"codes": codes} if codes else {})
    made = record({"out": counts}, sheet(front_end, "count"))
    assert made.values == pytest.approx(RATE * DEG, abs=step / 0.0482 * DEG)
    assert made.step == pytest.approx(step / 0.0482 * DEG, rel=1e-12)
    assert made.limits is not None
    assert made.limits[0] < made.values.min() < made.values.max() < made.limits[1]


def test_codes_that_may_be_either_are_asked_about() -> None:
    with pytest.raises(UsageError, match='codes = "signed" or codes = "from zero"'):
        record({"out": np.arange(N) % 7 + 100.0}, sheet(VOLTS | {"range": "+-10 V", "bits": 16}, "count"))
    with pytest.raises(UsageError, match="range and bits"):
        record({"out": np.arange(N) % 7 + 100.0}, sheet(VOLTS, "count"))


def test_ratiometric_output() -> None:
    """The supply of bridge and converter wanders by five percent; readings count at the nominal reference."""
    reference = 2.5 * (1.0 + 0.05 * np.sin(np.arange(N) / 40.0))
    columns = {"out": VOLTS_OF_RATE * reference / 2.5, "ref": reference}
    made = record(columns, sheet(VOLTS | {"reference": "ref", "reference_nominal": "2500 mV"}))
    assert made.values == pytest.approx(RATE * DEG, rel=1e-9)
    with pytest.raises(UsageError, match="reference_nominal"):
        record(columns, sheet(VOLTS | {"reference": "ref"}))
    with pytest.raises(StillbenchError, match="no column 'reg'"):
        record(columns, sheet(VOLTS | {"reference": "reg", "reference_nominal": "2.5 V"}))


def test_earth_rate_is_no_bias() -> None:
    """At 30 degrees north, axis up: 7.520533 deg/h (WGS 84)."""
    log_sheet = sheet(VOLTS, conditions={"latitude": "30 N", "attitude": "input axis up"})
    result = characterize({"out": VOLTS_OF_RATE}, log_sheet=log_sheet, rate=10.0, time="none", made_at="2026-01-01")
    plain = characterize({"out": VOLTS_OF_RATE}, log_sheet=sheet(VOLTS), rate=10.0, time="none", made_at="2026-01-01")
    (channel,), (other,) = result.channels, plain.channels
    shift = (other.bias.value - channel.bias.value) / DEG * 3600
    assert shift == pytest.approx(7.520533, abs=1e-6)
    (finding,) = [finding for finding in channel.findings if finding.kind == "earth_rate"]
    assert "+7.5205 deg/h" in finding.because
    assert channel.noise.terms["angle_random_walk"] == other.noise.terms["angle_random_walk"]


def test_an_attitude_that_is_not_understood_is_said() -> None:
    log_sheet = sheet(VOLTS, conditions={"latitude": "30 N", "attitude": "as last time"})
    (channel,) = characterize(
        {"out": VOLTS_OF_RATE}, log_sheet=log_sheet, rate=10.0, time="none", made_at="2026-01-01"
    ).channels
    (finding,) = [finding for finding in channel.findings if finding.kind == "earth_rate"]
    assert "'as last time' is not one that is understood" in finding.because


def test_gravity_is_no_bias() -> None:
    values = 9.819176953 + np.random.default_rng(3).normal(0.0, 1e-4, N)
    log_sheet = LogSheet.model_validate(
        {
            "channel": {"out": {"unit": "m/s^2", "attitude": "axis up"}},
            "conditions": {"latitude": "60 deg", "attitude": "axis north"},
        }
    )
    (channel,) = characterize(
        {"out": values}, log_sheet=log_sheet, rate=10.0, time="none", made_at="2026-01-01"
    ).channels
    assert abs(channel.bias.value) < 4e-4 / np.sqrt(N)


def test_side_channel_is_not_known_where_nothing_supports_it() -> None:
    seconds = np.array([0.0, 1.0, 2.0, 3.0, 10.0, 11.0, 12.0, 13.0])
    series = SideSeries("temperature", parse_unit("V"), seconds, 2.0 * seconds)
    found = aligned(series, np.array([-0.5, 0.0, 0.5, 2.75, 3.0, 5.0, 9.0, 10.0, 12.5, 13.5]))
    assert np.array_equal(np.isnan(found), [True, False, False, False, False, True, True, False, False, True])
    assert found[[1, 2, 3, 4, 7, 8]].tolist() == [0.0, 1.0, 5.5, 6.0, 20.0, 25.0]


def test_side_channel_in_a_file_of_its_own_beside_the_sheet(tmp_path: Path) -> None:
    begin = 1_700_000_000
    rows = [f"{begin + i / 10:.1f},{value:.6f}" for i, value in enumerate(RATE)]
    (tmp_path / "night.csv").write_text("time,out\n" + "\n".join(rows))
    room = [f"{begin - 5 + i},{20 + i / 10}" for i in range(60)]
    folder = tmp_path / "sheets"
    folder.mkdir()
    (folder / "room.csv").write_text("time,warmth\n" + "\n".join(room))
    (folder / "sheet.toml").write_text(
        '[channel.out]\nunit = "deg/s"\n[side.temperature]\nfile = "room.csv"\ncolumn = "warmth"\nunit = "degC"\n'
    )
    log_sheet = load_log_sheet(folder / "sheet.toml")
    (channel,) = characterize(tmp_path / "night.csv", log_sheet=log_sheet, made_at="2026-01-01").channels
    summary = channel.side["temperature"]
    assert summary.covered == 1.0
    assert summary.course.mean[0] == pytest.approx(273.15 + 20.5)
    (folder / "sheet.toml").write_text(
        '[channel.out]\nunit = "deg/s"\n[side.temperature]\nfile = "room.csv"\ncolumn = "warmth"\n'
    )
    with pytest.raises(StillbenchError, match="side channel 'temperature' has no unit"):
        characterize(tmp_path / "night.csv", log_sheet=load_log_sheet(folder / "sheet.toml"))


def test_side_channel_without_a_common_clock(tmp_path: Path) -> None:
    (tmp_path / "night.csv").write_text("time [s],out\n" + "\n".join(f"{i / 10},{v:.6f}" for i, v in enumerate(RATE)))
    (tmp_path / "room.csv").write_text(
        "time,warmth\n" + "\n".join(f"{1_700_000_000 + i},{20 + i / 10}" for i in range(60))
    )
    side = {"temperature": {"file": str(tmp_path / "room.csv"), "column": "warmth", "unit": "degC"}}
    log_sheet = LogSheet.model_validate({"channel": {"out": {"unit": "deg/s"}}, "side": side})
    with pytest.raises(UsageError, match="two clocks with a common origin"):
        characterize(tmp_path / "night.csv", log_sheet=log_sheet)


@pytest.mark.parametrize("stamped", [True, False])
def test_a_slower_sensor_beside_a_faster_one(stamped: bool) -> None:  # noqa: FBT001  a case of the test
    """Its cells are empty in nine rows of ten, and one of its own is lost."""
    rows = 10 * N
    slow = np.full(rows, np.nan)
    slow[::10] = RATE
    slow[500] = np.nan
    columns = {"time": np.arange(rows) / 100.0, "fast": np.resize(RATE, rows), "slow": slow}
    given: dict[str, Any] = {"time_unit": "s"} if stamped else {"time": "none", "rate": 100.0}
    result = characterize(columns, channels=["fast", "slow"], unit="V", made_at="2026-01-01", **given)
    fast, other = result.channels
    assert fast.sample_interval == pytest.approx(0.01)
    assert other.sample_interval == pytest.approx(0.1)
    assert other.n_used == N - 1
    assert any("one row of 10" in str(sentence) for sentence in result.provenance.settings["understood"])  # type: ignore[union-attr]
