"""Earth rate and normal gravity against the values of WGS 84 (NGA.STND.0036; table values recomputed from its constants)."""

import math

import pytest

from stillbench.foundation.errors import UsageError
from stillbench.logs.site import (
    earth_rate_along,
    gravity_along,
    normal_gravity,
    parse_attitude,
    parse_latitude,
)

DEGREES_AN_HOUR = 180.0 / math.pi * 3600.0


@pytest.mark.parametrize(
    ("latitude", "vertical", "horizontal", "gravity"),
    [
        (0, "0.000000", "15.041067", "9.7803253359"),
        (30, "7.520533", "13.025946", "9.793247269"),
        (45, "10.635640", "10.635640", "9.806197769"),
        (60, "13.025946", "7.520533", "9.819176953"),
        (90, "15.041067", "0.000000", "9.832184938"),
    ],
)
def test_earth_rate_and_gravity(latitude: int, vertical: str, horizontal: str, gravity: str) -> None:
    angle = math.radians(latitude)
    assert f"{earth_rate_along(angle, 0.0, 0.0) * DEGREES_AN_HOUR:.6f}" == vertical
    assert f"{earth_rate_along(angle, math.pi / 2, 0.0) * DEGREES_AN_HOUR:.6f}" == horizontal
    assert f"{earth_rate_along(angle, math.pi / 2, math.pi / 2) * DEGREES_AN_HOUR:.6f}".lstrip("-") == "0.000000"
    assert f"{normal_gravity(angle):.{len(gravity) - 2}f}" == gravity
    assert gravity_along(angle, math.pi) == -normal_gravity(angle)


@pytest.mark.parametrize(
    ("text", "degrees"), [("53.5 N", 53.5), ("53.5 deg", 53.5), ("-12.25 deg", -12.25), ("33.9 S", -33.9), ("0", 0.0)]
)
def test_latitudes(text: str, degrees: float) -> None:
    assert math.degrees(parse_latitude(text)) == pytest.approx(degrees, abs=1e-12)


@pytest.mark.parametrize("text", ["91 deg", "north", "", "5 3", "53.5 E", "1.2.3"])
def test_no_latitude(text: str) -> None:
    with pytest.raises(UsageError, match="the latitude is"):
        parse_latitude(text)


def test_attitudes() -> None:
    assert parse_attitude("axis up") == (0.0, 0.0)
    assert parse_attitude("input axis down") == (math.pi, 0.0)
    assert parse_attitude("input axis up, within 0.5 deg") == (0.0, 0.0)
    assert parse_attitude("East") == (math.pi / 2, math.pi / 2)
    tilt, azimuth = parse_attitude("tilt 30 deg, azimuth 0.5 rad") or (0.0, 0.0)
    assert tilt == pytest.approx(math.pi / 6)
    assert azimuth == 0.5
    assert parse_attitude("on the pier, label up") is None
    with pytest.raises(UsageError, match="an angle as tilt"):
        parse_attitude("tilt 30 s, azimuth 1 deg")
