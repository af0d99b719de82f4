import pytest

from stillbench.foundation.errors import UnitError
from stillbench.foundation.units import parse_quantity, parse_unit

SPELLINGS = [
    ("°/s", "deg/s", "°/s"),
    ("dps", "deg/s", "°/s"),
    ("deg / sec", "deg/s", "°/s"),
    ("deg/sqrt(h)", "deg/sqrt(h)", "°/√h"),
    ("°/√h", "deg/sqrt(h)", "°/√h"),
    ("°/√(hr)", "deg/sqrt(h)", "°/√h"),
    ("deg/rthr", "deg/sqrt(h)", "°/√h"),
    ("deg*h^-0.5", "deg/sqrt(h)", "°/√h"),
    ("deg/h/sqrt(h)", "deg/h/sqrt(h)", "°/h/√h"),
    ("(deg/h)/√h", "deg/h/sqrt(h)", "°/h/√h"),
    ("deg/h/h", "deg/h/h", "°/h/h"),
    ("µg/√Hz", "ug/sqrt(Hz)", "µg/√Hz"),
    ("μg", "ug", "µg"),
    ("m/s²", "m/s^2", "m/s²"),
    ("m/s/s", "m/s^2", "m/s²"),
    ("m*s**-2", "m/s^2", "m/s²"),
    ("mV/(deg/s)", "mV*s/deg", "mV⋅s/°"),
    ("Gauss", "G", "G"),
    ("°C", "degC", "°C"),
    ("counts", "count", "count"),
    ("rad/s/sqrt(s)", "rad/s/sqrt(s)", "rad/s/√s"),
]


@pytest.mark.parametrize(("typed", "canonical", "printed"), SPELLINGS)
def test_spellings(typed: str, canonical: str, printed: str) -> None:
    unit = parse_unit(typed)
    assert (unit.text, unit.printed) == (canonical, printed)
    assert parse_unit(unit.text) == unit
    assert parse_unit(unit.printed).text == unit.text


def test_case_counts() -> None:
    assert parse_unit("mg").dimension != parse_unit("mG").dimension
    with pytest.raises(UnitError):
        parse_unit("MG")


@pytest.mark.parametrize(
    "text", ["", " ", "deg//s", "deg/", "(deg/s", "deg/s)", "furlong", "1.5 deg", "deg^^2", "<b>", "deg s(", "∞"]
)
def test_faults(text: str) -> None:
    with pytest.raises(UnitError) as caught:
        parse_unit(text)
    assert "\n" not in str(caught.value)


def test_quantity_needs_number_and_unit() -> None:
    value, unit = parse_quantity("0.01 deg/s", "a limit")
    assert (value, unit.text) == (0.01, "deg/s")
    assert parse_quantity("-2.5e-3V", "a zero")[0] == -2.5e-3
    for text in ("deg/s", "0.01", "", "about 3 V"):
        with pytest.raises(UnitError):
            parse_quantity(text, "a limit")


def test_temperature_has_an_offset() -> None:
    assert parse_unit("degC").to_si(20.0) == 293.15
    assert parse_unit("K").to_si(20.0) == 20.0
