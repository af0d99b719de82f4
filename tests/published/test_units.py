"""Unit conversions worked by hand from the definitions (SI brochure; g = 9.80665 m/s^2, CGPM 1901)."""

import math

import pytest

from stillbench.foundation.units import parse_unit

PINNED = [
    # 1 deg/sqrt(h) = (pi/180)/60 rad/sqrt(s)
    ("deg/sqrt(h)", math.pi / 10_800),
    # 1 deg/h/sqrt(h) in deg/s/sqrt(s): 1/3600/60
    ("deg/h/sqrt(h)", math.radians(1 / 216_000)),
    ("deg/h/h", math.radians(1 / 12_960_000)),
    ("deg/h", math.radians(1 / 3_600)),
    ("arcsec", math.radians(1 / 3_600)),
    ("arcsec/s", math.radians(1 / 3_600)),
    ("ug/sqrt(Hz)", 9.80665e-6),
    ("mg", 9.80665e-3),
    ("mG", 1e-7),
    ("m/s/sqrt(h)", 1 / 60),
]


@pytest.mark.parametrize(("text", "factor"), PINNED)
def test_factor(text: str, factor: float) -> None:
    assert parse_unit(text).factor == pytest.approx(factor, rel=1e-15)


def test_printed_conversions() -> None:
    def ratio(one: str, other: str) -> float:
        first, second = parse_unit(one), parse_unit(other)
        assert first.dimension == second.dimension
        return first.factor / second.factor

    assert f"{ratio('deg/s/sqrt(Hz)', 'deg/sqrt(h)'):.10g}" == "60"
    assert f"{ratio('rad/s/sqrt(Hz)', 'deg/sqrt(h)'):.11f}" == "3437.74677078494"
    assert f"{ratio('deg/h/sqrt(h)', 'deg/s/sqrt(s)'):.7e}" == "4.6296296e-06"
    assert f"{ratio('deg/h/h', 'deg/s^2'):.7e}" == "7.7160494e-08"
    assert f"{ratio('ug/sqrt(Hz)', 'm/s/sqrt(h)'):.5e}" == "5.88399e-04"
    assert f"{ratio('arcsec', 'deg'):.6e}" == "2.777778e-04"
    assert f"{ratio('dps', 'deg/s'):.10g}" == "1"
