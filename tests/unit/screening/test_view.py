"""What several checks share: quick medians, the slow course, the step of the converter."""

from dataclasses import replace

import numpy as np
import pytest

from stillbench.logs.cut import cut_record
from stillbench.logs.read import read_log
from stillbench.screening.level import row_medians, take_level_off
from stillbench.screening.view import RecordView


@pytest.mark.parametrize("length", [1, 2, 63, 64])
def test_medians_of_rows_are_those_of_numpy(length: int) -> None:
    rows = np.random.default_rng(length).standard_normal((200, length))
    assert np.array_equal(row_medians(rows), np.median(rows, axis=1))
    rows[np.random.default_rng(7).random(rows.shape) < 0.3] = np.nan
    rows[5] = np.nan
    known = ~np.isnan(rows).all(axis=1)
    assert np.array_equal(np.isnan(row_medians(rows)), ~known)
    assert np.allclose(row_medians(rows)[known], np.nanmedian(rows[known], axis=1), rtol=1e-15, atol=0)


@pytest.mark.parametrize("n_samples", [64 * 50, 64 * 50 + 31])
def test_a_slow_course_is_taken_off(n_samples: int) -> None:
    """A straight course leaves nothing but the ends, which are held level for half a block."""
    values = np.asarray(3.0 + 0.25 * np.arange(n_samples), dtype=np.float64)
    residual = np.empty(n_samples)
    take_level_off(values, residual)
    assert np.abs(residual[40:-40]).max() < 1e-9


def test_the_declared_step_stands_in_where_readings_look_continuous() -> None:
    log = read_log({"x": np.random.default_rng(3).standard_normal(5_000)}, units={"": "V"}, rate=1.0, channels=["x"])
    record = cut_record(log, "x")
    assert RecordView(record).step is None
    assert RecordView(replace(record, step=0.01)).step == 0.01
    rounded = replace(record, values=np.round(record.values, 1), step=0.01)
    assert RecordView(rounded).step == pytest.approx(0.1)
