"""The interval of a scale factor covers: made logs of turns by hand, steady rates and positions with a known factor."""

import numpy as np
import pytest
from scipy.stats import binom

from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.errors import LogError, UsageError
from stillbench.logs.cut import cut_record
from stillbench.logs.read import read_log
from stillbench.scale.calibrate import calibrate_scale
from stillbench.scale.plan import read_plan
from stillbench.terms.catalogue import BY_ROLE
from stillbench.vocabulary.record import Record

DEG = np.pi / 180.0
FACTOR = 48.2e-3 / DEG
"""V per rad/s."""
ZERO = 2.5012
INTERVAL = 0.02
EARTH = 7.292115e-5
TRIALS = 300


def noise(size: int, generator: np.random.Generator) -> FloatArray:
    """White, flicker and walk of an analog rate gyro, V."""
    white = 1e-3 * generator.standard_normal(size)
    flicker = 5e-5 * np.asarray(BY_ROLE["flicker"].generate(size, generator))
    return np.asarray(white + flicker + 1e-6 * np.cumsum(generator.standard_normal(size)))


def turned(angles: list[float], generator: np.random.Generator, asymmetry: float = 0.0) -> FloatArray:
    """Make readings of a sensor that is turned by hand, with stops of 6 to 10 s; the Earth turns all the while."""
    parts = [np.zeros(400)]
    for angle in angles:
        count = int(generator.uniform(2.0, 5.0) / INTERVAL)
        course = np.sin(np.pi * (np.arange(count) + 0.5) / count) ** 2
        worth = 1.0 + (asymmetry / 2.0 if angle > 0 else -asymmetry / 2.0)
        parts += [
            course / course.sum() / INTERVAL * angle * worth,
            np.zeros(int(generator.uniform(6.0, 10.0) / INTERVAL)),
        ]
    rate = np.concatenate(parts)
    return np.asarray(ZERO + FACTOR * (rate + 0.8 * EARTH) + noise(rate.size, generator))


def record_of(readings: FloatArray) -> Record:
    log = read_log({"out": readings}, units={"": "V"}, rate=1.0 / INTERVAL, channels=["out"])
    return cut_record(log, "out")


@pytest.mark.parametrize("spread", [0.0, 0.05])
def test_turns_by_hand(spread: float) -> None:
    """With and without an error of 0.05 deg in each angle, independent from turn to turn."""
    covered, zeros = 0, []
    for trial in range(TRIALS):
        generator = np.random.default_rng([21, trial, int(1e3 * spread)])
        angles = [(sign * 90.0 + generator.normal(0.0, spread)) * DEG for sign in (1, -1) * 4]
        found = calibrate_scale(
            record_of(turned(angles, generator)), "turns", [90 * DEG, -90 * DEG], quantity_unit="deg/s"
        )
        covered += found.lower <= FACTOR <= found.upper
        zeros.append(found.zero)
    low, high = binom.interval(0.999, TRIALS, 0.95)
    assert low <= covered <= high, covered
    # The null of the stops holds the Earth's part, which no --latitude took off here.
    assert np.mean(zeros) == pytest.approx(ZERO + FACTOR * 0.8 * EARTH, abs=4 * np.std(zeros) / np.sqrt(TRIALS) + 1e-6)


def test_asymmetry_is_seen() -> None:
    generator = np.random.default_rng(3)
    angles = [sign * 90 * DEG for sign in (1, -1) * 6]
    found = calibrate_scale(
        record_of(turned(angles, generator, asymmetry=0.01)), "turns", angles, quantity_unit="deg/s"
    )
    assert found.asymmetry is not None
    assert found.asymmetry_uncertainty is not None
    assert found.asymmetry == pytest.approx(0.01, abs=4 * found.asymmetry_uncertainty)
    assert found.asymmetry_uncertainty < 0.002


def plateaus(inputs: list[float], factor: float, generator: np.random.Generator) -> FloatArray:
    """Make readings that stand still for 8 s at each input, with ramps of 1 s between."""
    parts = []
    for first, second in zip(inputs, [*inputs[1:], inputs[-1]], strict=True):
        parts += [np.full(400, first), np.linspace(first, second, 50)]
    course = np.concatenate(parts)
    return np.asarray(ZERO + factor * course + noise(course.size, generator))


def test_steady_rates_with_the_earth_taken_off() -> None:
    """Latitude 53.5 degrees, axis up: the zero is that of the sensor."""
    covered, zeros = 0, []
    plan = read_plan(None, "-20 deg/s, -10 deg/s, 10 deg/s, 20 deg/s, 5 deg/s", None, latitude="53.5 N", attitude="up")
    felt = [value + EARTH * np.sin(53.5 * DEG) for value in plan.applied]
    for trial in range(TRIALS):
        readings = plateaus(felt, FACTOR, np.random.default_rng([22, trial]))
        found = calibrate_scale(
            record_of(readings), plan.method, plan.applied, quantity_unit="deg/s", known_input=plan.known_input
        )
        covered += found.lower <= FACTOR <= found.upper
        zeros.append((found.zero - ZERO) / found.zero_uncertainty)
    low, high = binom.interval(0.999, TRIALS, 0.95)
    assert low <= covered <= high, covered
    # Student's t with three degrees of freedom has a standard deviation of root three.
    assert abs(np.mean(zeros)) < 4 * np.sqrt(3.0 / TRIALS)


def test_positions_under_gravity() -> None:
    plan = read_plan(None, None, "up, down, level, up, down", latitude="45 N", attitude=None)
    readings = plateaus(list(plan.applied), 1.2 / 9.80665, np.random.default_rng(4))
    found = calibrate_scale(record_of(readings), plan.method, plan.applied, quantity_unit="g")
    assert found.lower <= 1.2 / 9.80665 <= found.upper
    assert found.relative < 1e-3


def test_no_plateau_is_left_out_in_silence() -> None:
    """Ten plateaus, two declared: taken five times over; with three declared they do not fit."""
    inputs = [sign * 10 * DEG for sign in (1, -1) * 5]
    record = record_of(plateaus(inputs, FACTOR, np.random.default_rng(8)))
    found = calibrate_scale(record, "rates", inputs[:2], quantity_unit="deg/s")
    assert [step.applied for step in found.steps] == inputs
    # With rates of one size the asymmetry cannot be told from the null.
    assert found.asymmetry is None
    assert found.lower <= FACTOR <= found.upper
    with pytest.raises(LogError, match="10 plateaus are seen and 3 declared"):
        calibrate_scale(record, "rates", inputs[:3], quantity_unit="deg/s")


def test_a_list_that_does_not_fit_the_log() -> None:
    readings = turned([90 * DEG, -90 * DEG] * 2, np.random.default_rng(5))
    with pytest.raises(LogError, match="4 turns are seen and 3 declared"):
        calibrate_scale(record_of(readings), "turns", [1.0, 1.0, 1.0], quantity_unit="deg/s")
    with pytest.raises(LogError, match=r"no turn is seen|begins or ends"):
        calibrate_scale(record_of(ZERO + noise(4_000, np.random.default_rng(6))), "turns", [1.0], quantity_unit="deg/s")
    with pytest.raises(UsageError, match="at least 4"):
        calibrate_scale(record_of(readings[:2_100]), "turns", [1.0], quantity_unit="deg/s")
