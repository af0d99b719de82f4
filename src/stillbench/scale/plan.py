"""What was applied to the sensor, as a user says it."""

import math
from dataclasses import dataclass

from stillbench.foundation.errors import UsageError
from stillbench.foundation.units import ACCELERATION, ANGLE, NONE, RATE, RATIO, parse_quantity
from stillbench.logs.site import earth_rate_along, gravity_along, parse_attitude, parse_latitude


@dataclass(frozen=True)
class Plan:
    """Turns, rates or positions.

    Attributes
    ----------
    method : str
    applied : tuple of float
        SI.
    quantity_unit : str
        In which the scale factor is spoken.
    known_input : float
        Earth rate along the axis, SI.
    """

    method: str
    applied: tuple[float, ...]
    quantity_unit: str
    known_input: float

    def uncertainty_of(self, text: str | None) -> float:
        """Return the standard uncertainty of what was applied, SI.

        Raises
        ------
        UsageError
        """
        if text is None:
            return 0.0
        value, unit = parse_quantity(text, "the uncertainty of what was applied")
        wanted = {"turns": ANGLE, "rates": RATE}.get(self.method, ACCELERATION)
        if unit.dimension != wanted or not value >= 0:
            raise UsageError(
                f"the uncertainty of what was applied is {text!r}", "a value in the unit of what was applied"
            )
        return value * unit.factor


def read_plan(
    turns: str | None, rates: str | None, positions: str | None, *, latitude: str | None, attitude: str | None
) -> Plan:
    """Read what was applied.

    Raises
    ------
    UsageError
        When not exactly one of the three is given, or it does not parse.
    """
    given = [text for text in (turns, rates, positions) if text is not None]
    if len(given) != 1:
        raise UsageError(
            f"{len(given)} of --turns, --rates and --positions are given", "one", 'such as --turns "90 deg, -90 deg"'
        )
    if turns is not None:
        values, unit = _quantities(turns, "a turn", ANGLE, "angles such as '90 deg, -90 deg'")
        return Plan("turns", values, {"deg": "deg/s"}.get(unit, "rad/s"), 0.0)
    where = parse_latitude(latitude) if latitude is not None else None
    if rates is not None:
        values, unit = _quantities(rates, "a rate", RATE, "rates such as '10 deg/s, -10 deg/s'")
        axis = parse_attitude(attitude) if attitude is not None else None
        if attitude is not None and (axis is None or where is None):
            raise UsageError(f"the attitude is {attitude!r}", "up, down, north, ... and --latitude beside it")
        known = earth_rate_along(where, *axis) if axis is not None and where is not None else 0.0
        return Plan("rates", values, "deg/s" if "deg" in unit or "dps" in unit else "rad/s", known)
    if where is None:
        raise UsageError(
            "--positions is given without a latitude", "--latitude, for gravity", "such as --latitude '53.5 N'"
        )
    parts = (
        (positions or "").split(";")
        if ";" in (positions or "") or "tilt" in (positions or "")
        else (positions or "").split(",")
    )
    applied = tuple(_along(part.strip(), where) for part in parts if part.strip())
    return Plan("positions", applied, "g", 0.0)


def _along(text: str, latitude: float) -> float:
    if text.lower() == "level":
        return 0.0
    attitude = parse_attitude(text)
    if attitude is None:
        raise UsageError(f"a position is {text!r}", "up, down, level, or 'tilt 30 deg, azimuth 0 deg'")
    return gravity_along(latitude, attitude[0])


def _quantities(text: str, what: str, dimension: object, wanted: str) -> tuple[tuple[float, ...], str]:
    values, spoken = [], ""
    for part in text.split(","):
        value, unit = parse_quantity(part.strip(), what)
        if unit.dimension != dimension:
            raise UsageError(f"{what} is {part.strip()!r}", wanted)
        values.append(value * unit.factor)
        spoken = unit.text
    return tuple(values), spoken


def relative_of(text: str | None) -> float:
    """Return a relative standard uncertainty such as ``20 ppm`` or ``0.1 %``.

    Raises
    ------
    UsageError
    """
    if text is None:
        return 0.0
    value, unit = parse_quantity(text, "the uncertainty of the time base")
    relative = value * unit.factor
    if unit.dimension not in (RATIO, NONE) or not 0 <= relative < 1 or math.isnan(relative):
        raise UsageError(f"the uncertainty of the time base is {text!r}", "a ratio such as '20 ppm'")
    return relative
