"""The clock audit on made stamps: each oddity is found, sized, and does not move the grid."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.errors import ClockError
from stillbench.foundation.units import parse_unit
from stillbench.logs.clock import Grid, audit_clock
from stillbench.logs.cut import cut_record
from stillbench.pipeline import characterize
from stillbench.vocabulary.sensor_log import Channel, SensorLog, Source, StampKind, Stamps

INTERVAL = 0.01


def log_of(
    seconds: FloatArray, *, kind: StampKind = "counter", rate: float | None = None, origin: float | None = None
) -> SensorLog:
    values = np.random.default_rng(0).standard_normal(seconds.size)
    source = Source("made", 0, "0" * 64, seconds.size, "made")
    stamps = Stamps(seconds - seconds[0], "time", "s", kind, origin, 1e-6)
    return SensorLog(source, (Channel("x", values, parse_unit("V")),), stamps, rate)


def audit(seconds: FloatArray, **more: object) -> tuple[Grid, list[str]]:
    grid = audit_clock(log_of(seconds, **more))  # type: ignore[arg-type]
    return grid, [finding.kind for finding in grid.findings]


def even(n_samples: int = 5_000) -> FloatArray:
    return np.arange(n_samples, dtype=np.float64) * INTERVAL


def test_even_stamps() -> None:
    grid, kinds = audit(even())
    assert grid.sample_interval == pytest.approx(INTERVAL, rel=1e-9)
    assert kinds == []
    assert np.array_equal(grid.index, np.arange(5_000))


def test_jitter_below_a_quarter_interval() -> None:
    grid, kinds = audit(even() + np.random.default_rng(1).uniform(-0.1, 0.1, 5_000) * INTERVAL)
    assert kinds == []
    assert grid.jitter == pytest.approx(0.1 * INTERVAL / np.sqrt(3), rel=0.05)
    assert grid.sample_interval == pytest.approx(INTERVAL, rel=1e-5)
    assert np.array_equal(grid.index, np.arange(5_000))


def test_missing_rows_keep_their_place() -> None:
    keep = np.ones(5_000, dtype=bool)
    keep[[700, 1_500, 1_501]] = False
    keep[3_000:3_400] = False
    seconds = even()[keep]
    record = cut_record(log_of(seconds), "x")
    assert [run.n_samples for run in record.runs] == [3_000, 1_600]
    assert record.missing.sum() == 3
    assert record.runs[1].start == pytest.approx(34.0)
    assert record.clock.missing == 403
    assert record.clock.longest_gap == pytest.approx(4.0)
    kinds = [finding.kind for finding in record.findings]
    assert kinds.count("gap") == 1
    assert "missing_samples" in kinds


def test_many_holes_are_carried() -> None:
    keep = np.random.default_rng(3).random(20_000) > 0.08
    keep[0] = keep[-1] = True
    record = cut_record(log_of(even(20_000)[keep]), "x")
    assert len(record.runs) == 1
    assert record.missing.sum() == 20_000 - keep.sum()
    keep = np.random.default_rng(3).random(20_000) > 0.25
    record = cut_record(log_of(even(20_000)[keep]), "x")
    assert record.missing.sum() <= 0.21 * record.n_samples


def test_bursts() -> None:
    """Rows come in packets of five: the median step is far below the interval."""
    packet = np.arange(5_000) // 5
    seconds = packet * 5 * INTERVAL + (np.arange(5_000) % 5) * 0.0005
    grid, kinds = audit(seconds)
    assert kinds == ["clock_jitter"]
    assert grid.sample_interval == pytest.approx(INTERVAL, rel=1e-3)


def test_coarse_stamps() -> None:
    grid, kinds = audit(np.floor(even() * 10) / 10)
    assert kinds == ["stamp_resolution"]
    assert grid.sample_interval == pytest.approx(INTERVAL, rel=1e-4)


def test_stamps_as_coarse_as_the_interval_still_show_lost_rows() -> None:
    """Whole seconds at 1 Hz, some rows lost by chance: no beat, so the grid has a place for each."""
    keep = np.random.default_rng(1).random(20_000) > 0.01
    seconds = np.arange(20_000.0)[keep]
    log = log_of(seconds)
    assert log.stamps is not None
    grid = audit_clock(replace(log, stamps=replace(log.stamps, resolution=1.0)))
    assert grid.sample_interval == pytest.approx(1.0, rel=1e-9)
    assert np.array_equal(grid.index - grid.index[0], (seconds - seconds[0]).astype(int))


@pytest.mark.parametrize("interval", [0.98e-3, 1.0101e-3, 1.05e-3, 1.3e-3])
def test_stamps_as_coarse_as_the_interval_invent_no_lost_rows(interval: float) -> None:
    seconds = np.floor(np.arange(20_000) * interval * 1e3) * 1e-3
    log = log_of(seconds)
    assert log.stamps is not None
    grid = audit_clock(replace(log, stamps=replace(log.stamps, resolution=1e-3)))
    assert [finding.kind for finding in grid.findings] == ["stamp_resolution"]
    assert grid.sample_interval == pytest.approx(interval, rel=1e-4)
    assert grid.kept.all()
    assert grid.index[-1] == 19_999


def test_late_stamps_invent_no_lost_rows() -> None:
    """Rows stamped 0.6 intervals late now and then: none is missing, at most a few in ten thousand are misplaced."""
    late = np.random.default_rng(0).random(50_000) < 0.008
    grid, kinds = audit(even(50_000) + np.where(late, 0.6 * INTERVAL, 0.0))
    assert kinds == []
    assert abs(int(grid.index[-1]) - 49_999) <= 10
    assert grid.sample_interval == pytest.approx(INTERVAL, rel=3e-4)


def test_duplicates_are_left_out() -> None:
    seconds = np.insert(even(), 1_000, even()[999])
    grid, kinds = audit(seconds)
    assert kinds == ["duplicate_stamps"]
    assert np.count_nonzero(~grid.kept) == 1
    assert np.array_equal(grid.index[grid.kept], np.arange(5_000))


def test_restart_splits_the_record() -> None:
    seconds = np.concatenate([even(3_000), even(2_000)])
    grid, kinds = audit(seconds)
    assert kinds == ["backward_stamps"]
    assert grid.segment[-1] == 1
    record = cut_record(log_of(seconds), "x")
    assert [run.n_samples for run in record.runs] == [3_000, 2_000]


def test_stamps_that_run_backwards_are_refused() -> None:
    with pytest.raises(ClockError, match="backwards"):
        audit(even()[::-1])
    with pytest.raises(ClockError, match="do not move"):
        audit(np.zeros(100))


def test_declared_rate_that_differs() -> None:
    _, kinds = audit(even(), rate=101.0)
    assert kinds == ["rate_mismatch"]
    _, kinds = audit(even(), rate=100.3)
    assert kinds == []


MIDNIGHT = 1_743_292_800.0  # 2025-03-30 00:00 on the wall, the night the clocks go forward in Europe


def test_clocks_going_forward_are_no_gap() -> None:
    seconds = np.arange(4 * 3_600.0)
    local = np.where(seconds >= 2 * 3_600, seconds + 3_600, seconds)
    grid, kinds = audit(local, kind="local", origin=MIDNIGHT)
    assert kinds == ["clock_shift"]
    assert grid.findings[0].measure == 3_600
    assert np.array_equal(grid.index, np.arange(seconds.size))


def test_clocks_going_back_are_no_restart() -> None:
    seconds = np.arange(4 * 3_600.0)
    local = np.where(seconds >= 3 * 3_600, seconds - 3_600, seconds)
    grid, kinds = audit(local, kind="local", origin=MIDNIGHT)
    assert kinds == ["clock_shift"]
    assert np.array_equal(grid.index, np.arange(seconds.size))


def test_an_hour_missing_at_another_minute_is_a_gap() -> None:
    seconds = np.arange(4 * 3_600.0)
    local = np.where(seconds >= 2 * 3_600 + 1_234, seconds + 3_600, seconds)
    grid, kinds = audit(local, kind="local", origin=MIDNIGHT)
    assert kinds == []
    assert grid.index[-1] == seconds.size - 1 + 3_600


@pytest.mark.parametrize(("share", "ratio"), [(0.5, 1.03), (0.15, 2.0), (0.8, 0.5), (0.3, 1.015)])
def test_a_rate_that_changes_is_refused_with_the_place(share: float, ratio: float) -> None:
    """Two rates in one log: whole multiples too, which would pass for lost rows."""
    n_rows = 12_000
    jitter = np.random.default_rng(4).normal(0.0, 0.02 * INTERVAL, n_rows)
    seconds = np.cumsum(np.where(np.arange(n_rows) < share * n_rows, INTERVAL, ratio * INTERVAL)) + jitter
    with pytest.raises(ClockError, match="one sampling rate") as caught:
        audit(seconds)
    when = float(caught.value.message.split("--to ")[1].split()[0])
    assert when == pytest.approx(seconds[int(share * n_rows)], abs=0.06 * n_rows * INTERVAL)


def test_lost_rows_are_no_change_of_rate() -> None:
    """A tenth of the rows lost in the second half only; and bursts; and coarse stamps."""
    generator = np.random.default_rng(5)
    seconds = np.arange(20_000) * INTERVAL
    kept = (generator.random(seconds.size) > 0.1) | (seconds < seconds[10_000])
    grid, found = audit(seconds[kept])
    assert not found
    assert grid.index[-1] == seconds.size - 1
    bursts = np.repeat(np.arange(2_000) * 8 * INTERVAL, 8) + np.tile(np.arange(8) * 0.1 * INTERVAL, 2_000)
    assert "clock_jitter" in audit(bursts)[1]
    audit(np.floor(np.arange(20_000) * 5.47))


def test_one_part_of_a_log_of_two_rates(tmp_path: Path) -> None:
    steps = np.where(np.arange(8_000) < 4_000, 0.01, 0.02)
    seconds = np.cumsum(steps)
    values = np.random.default_rng(6).normal(0.0, 1.0, seconds.size)
    (tmp_path / "log.csv").write_text(
        "time [s],x\n" + "\n".join(f"{t:.2f},{v:.5f}" for t, v in zip(seconds, values, strict=True))
    )
    with pytest.raises(ClockError, match="--from"):
        characterize(tmp_path / "log.csv", unit="V")
    (first,) = characterize(tmp_path / "log.csv", unit="V", stop="39.5").channels
    (second,) = characterize(tmp_path / "log.csv", unit="V", start="40.5").channels
    assert first.sample_interval == pytest.approx(0.01)
    assert second.sample_interval == pytest.approx(0.02)
    assert second.clock.runs[0][0] == pytest.approx(40.5, abs=0.03)
