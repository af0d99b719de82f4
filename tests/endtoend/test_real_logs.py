"""Recordings of real instruments; what is known of each stands in the README of their folder.

The figures were computed there once with a plain numpy overlapping estimate.
"""

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from stillbench.foundation.errors import ClockError, LogError
from stillbench.pipeline import characterize
from stillbench.report.render import render_report
from stillbench.vocabulary.characterization import ChannelResult
from stillbench.vocabulary.log_sheet import LogSheet

Find = Callable[[str], Path]


def only(path: Path, **choices: object) -> ChannelResult:
    (channel,) = characterize(path, made_at="2026-01-01", **choices).channels  # type: ignore[arg-type]
    return channel


def kinds(channel: ChannelResult) -> set[str]:
    return {finding.kind for finding in channel.findings}


def test_reference_meter_22h(real_log: Find) -> None:
    """Lowest deviation about 0.56 uV near 540 s; 0.193 Hz; stays in volts."""
    channel = only(real_log("reference_meter_22h/meter_log.csv"), channels=["microvolts"], unit="uV")
    usable = channel.curve.tau < channel.duration / 10
    lowest = int(np.argmin(channel.curve.deviation[usable]))
    assert 100 < channel.curve.tau[lowest] < 2_000
    assert 0.45e-6 < channel.curve.deviation[lowest] < 0.7e-6
    assert f"{1 / channel.sample_interval:.3f}" == "0.193"
    assert channel.unit == "V"
    assert "scale_factor_unknown" in kinds(channel)


def test_desk_board_81h(real_log: Find) -> None:
    """A gap of 11.9 h, two restarts, the board turned over once, 263 rows missing, most of them singly."""
    path = real_log("desk_board_81h/desk_board.zip")
    channel = only(path, channels=["accel_x"], unit="g")
    assert {"gap", "motion", "missing_samples"} <= kinds(channel)
    gap = max((f for f in channel.findings if f.kind == "gap"), key=lambda f: f.measure or 0)
    assert (gap.measure or 0) / 3_600 == pytest.approx(11.9, abs=0.05)
    turn = next(f for f in channel.findings if f.kind == "motion")
    assert "the level afterwards differs" in turn.because
    missing = next(f for f in channel.findings if f.kind == "missing_samples")
    assert missing.measure == pytest.approx(263, abs=5)
    assert channel.sample_interval == pytest.approx(10.0, rel=1e-6)

    steady = only(path, channels=["accel_x"], unit="g", start="row:3903")
    assert len(steady.clock.runs) == 1
    assert steady.curve.tau[-1] > 5 * 3_600
    assert "motion" not in kinds(steady)
    assert not {f.kind for f in steady.findings if f.kind == "gap" and f.start and f.start > 83_000}


@pytest.mark.parametrize("column", ["3", "4", "5", "6", "7", "8"])
def test_bench_handled_is_never_taken_for_a_still_log(real_log: Find, column: str) -> None:
    """Still for 30 s, then handled, then still."""
    unit = "rad/s" if int(column) < 6 else "m/s^2"
    result = characterize(
        real_log("bench_handled/imu.txt"), channels=[column], unit=unit, time=1, time_unit="ms", made_at="2026-01-01"
    )
    (channel,) = result.channels
    moved = [finding for finding in channel.findings if finding.kind == "motion"]
    assert moved
    assert all(finding.excluded for finding in moved)
    assert min(finding.start or 0 for finding in moved) > 28
    assert channel.clock.runs[0][0] == 0
    page = render_report(result).decode()
    assert "This is not one still log" in page


def test_five_devices_60s_is_refused(real_log: Find) -> None:
    path = real_log("five_devices_60s/serial_capture.txt")
    with pytest.raises(LogError, match="5 devices are interleaved"):
        characterize(path, channels=["5"], unit="count", rate=25)


@pytest.mark.parametrize(
    ("name", "column"),
    [("probe_unit.csv", "G_X [dps]"), ("vehicle_unit.csv", "gyro_z[dps]"), ("wearable_unit.txt", "G_X [dps]")],
)
def test_still_no_stamps(real_log: Find, name: str, column: str) -> None:
    path = real_log(f"still_no_stamps/{name}")
    with pytest.raises(ClockError, match="--rate HZ"):
        characterize(path, channels=[column], unit="dps")
    channel = only(path, channels=[column], unit="dps", rate=104)
    assert channel.quantity == "angular rate"
    assert channel.clock.source == "declared rate"
    assert channel.curve.tau[0] == pytest.approx(1 / 104)


def test_reference_adc_5h(real_log: Find) -> None:
    """About 14.1 counts/sqrt(Hz) in the Allan sense, lowest 2.6 counts at 57 s, 7.37 Hz, 58 gaps, drift -21 counts/h."""
    channel = only(real_log("reference_adc_5h/counts.csv"), unit="count")
    white = channel.noise.terms["white_noise"]
    assert white.coefficient == pytest.approx(14.1, rel=0.02)  # the figure known is rounded, and read from the curve
    usable = channel.curve.tau < channel.duration / 10
    lowest = int(np.argmin(channel.curve.deviation[usable]))
    assert channel.curve.deviation[lowest] == pytest.approx(2.6, rel=0.03)
    assert channel.curve.tau[lowest] == pytest.approx(57, rel=0.15)
    assert f"{1 / channel.sample_interval:.2f}" == "7.37"
    ramp = channel.noise.terms["ramp"]
    assert ramp.lower is not None
    assert ramp.upper is not None
    assert ramp.lower * 3_600 < -21 < ramp.upper * 3_600
    assert len(channel.clock.runs) == 1  # its gaps are single rows, carried
    assert channel.clock.missing == 58


def test_reference_box_18h(real_log: Find) -> None:
    channel = only(real_log("reference_box_18h/microvolts.csv"), unit="uV")
    assert channel.curve.tau[-1] > 3_600
    # The box settles for hours: the fit must not pretend to explain it, or must have found a band that it does.
    assert channel.noise.goodness < 3 or "poor_fit" in kinds(channel)


def test_still_34s_has_an_empty_stamp_and_says_so(real_log: Find) -> None:
    path = real_log("still_34s/imu.csv")
    with pytest.raises(ClockError, match="empty in 224 of 690 rows"):
        characterize(path, channels=["IMU::UncompGyro::X [rad/s]"], unit="rad/s")
    channel = only(path, channels=["IMU::UncompGyro::X [rad/s]"], unit="rad/s", time="none", rate=20)
    assert channel.duration == pytest.approx(34, abs=1)


def test_side_channels_of_reference_adc_5h_and_reference_box_18h(real_log: Find) -> None:
    """`room.csv` is a second file with its own clock: degC and %RH once a second; temperature in the room, not outside."""
    for name, column, unit in (
        ("reference_adc_5h/counts.csv", "counts", "count"),
        ("reference_box_18h/microvolts.csv", "microvolts", "uV"),
    ):
        path = real_log(name)
        sheet = LogSheet.model_validate(
            {
                "channel": {column: {"unit": unit}},
                "side": {"temperature": {"file": str(path.with_name("room.csv")), "column": "temp_c", "unit": "degC"}},
            }
        )
        channel = only(path, log_sheet=sheet)
        summary = channel.side["temperature"]
        assert summary.covered > 0.99
        assert 273.15 + 20 < summary.course.minimum.min() < summary.course.maximum.max() < 273.15 + 32


def test_one_device_out_of_five_devices_60s(real_log: Find) -> None:
    """Each sends about 24.9 times a second; the fourth cell is a count of microseconds within the second."""
    sheet = LogSheet.model_validate(
        {"log": {"line_pattern": r"^3,\d+,(?P<time>\d+),\d+,(?P<x>-?\d+),(?P<y>-?\d+),(?P<z>-?\d+),"}}
    )
    channel = only(
        real_log("five_devices_60s/serial_capture.txt"), log_sheet=sheet, channels=["z"], unit="count", time_unit="us"
    )
    assert 1 / channel.sample_interval == pytest.approx(24.9, abs=0.2)
    assert channel.duration == pytest.approx(60, abs=2)
    assert channel.n_samples == pytest.approx(24.9 * 60, rel=0.02)


def test_still_10min_is_read_from_mat_7_3(real_log: Find) -> None:
    """Row 0 is time in s; bursts: the median step is 2 ms though the mean rate is 99.3 Hz; 9 to 13 mdeg/s/sqrt(Hz) (Allan sense)."""
    channel = only(
        real_log("still_10min/gyroscope.mat"),
        channels=["gyroBuffer.2"],
        unit="deg/s",
        time="gyroBuffer.1",
        time_unit="s",
    )
    assert 1 / channel.sample_interval == pytest.approx(99.3, abs=0.1)
    assert channel.duration == pytest.approx(655, abs=1)
    assert "clock_jitter" in kinds(channel)
    white = channel.noise.terms["angle_random_walk"]
    assert white.coefficient is not None
    assert 0.009 < np.degrees(white.coefficient) < 0.013
