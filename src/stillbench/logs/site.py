"""What a sensor at rest feels all the same: the rotation of the Earth, and gravity.

References
----------
World Geodetic System 1984 (NGA.STND.0036): rotation rate 7.292115e-5 rad/s, Somigliana's formula of normal gravity at the
ellipsoid; values from memory, checked against published ones in tests/published.
"""

import math
import re

from stillbench.foundation.errors import UnitError, UsageError
from stillbench.foundation.units import ANGLE, parse_quantity
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.log_sheet import ChannelSection, LogSheet
from stillbench.vocabulary.quantity import ACCELERATION, ANGULAR_RATE

EARTH_RATE = 7.292115e-5
"""rad/s."""
EQUATOR_GRAVITY = 9.7803253359
SOMIGLIANA = 0.00193185265241
ECCENTRICITY_SQUARED = 0.00669437999013

_LATITUDE = re.compile(r"\s*([\d.]+)\s*(?:deg|\N{DEGREE SIGN})?\s*([NS])?\s*", re.IGNORECASE)
_WORDS = {
    "up": (0.0, 0.0),
    "down": (180.0, 0.0),
    "north": (90.0, 0.0),
    "east": (90.0, 90.0),
    "south": (90.0, 180.0),
    "west": (90.0, 270.0),
}
_TILTED = re.compile(r"tilt\s+(?P<tilt>[^,;]+)[,;]\s*(?:azimuth|heading)\s+(?P<azimuth>.+)", re.IGNORECASE)


def parse_latitude(text: str) -> float:
    """Return a latitude, rad, north positive, from ``53.5 deg``, ``53.5 N`` or ``-12 deg``.

    Raises
    ------
    UsageError
    """
    match = _LATITUDE.fullmatch(text.replace("-", "", 1) if text.strip().startswith("-") else text)
    value = float(match.group(1)) if match and match.group(1).count(".") <= 1 and match.group(1) != "." else math.inf
    if match is None or abs(value) > 90.0:  # noqa: PLR2004  degrees
        raise UsageError(
            f"the latitude is {text!r}", "degrees such as '53.5 N' or '-12.25 deg'", "correct [conditions]"
        )
    south = text.strip().startswith("-") != ((match.group(2) or "N").upper() == "S")
    return math.radians(-value if south else value)


def parse_attitude(text: str) -> tuple[float, float] | None:
    """Return tilt of the input axis from the vertical and its azimuth from north, rad.

    ``up``, ``down``, ``north``, ``east``, ``south``, ``west`` (with ``axis`` before them, or not), or
    ``tilt 30 deg, azimuth 90 deg``. None for any other words.

    Raises
    ------
    UsageError
        When tilt or azimuth is no angle.
    """
    plain = re.sub(r"^(?:input |sensitive )?axis\s+", "", text.strip().lower())
    word = plain.split(",")[0].strip()  # what follows, such as "within 0.5 deg", is for the reader
    if word in _WORDS:
        tilt, azimuth = _WORDS[word]
        return math.radians(tilt), math.radians(azimuth)
    match = _TILTED.fullmatch(plain)
    if match is None:
        return None
    angles = []
    for name in ("tilt", "azimuth"):
        try:
            value, unit = parse_quantity(match.group(name).strip(), f"the {name}")
        except UnitError as error:
            raise UsageError(f"the attitude is {text!r}", f"an angle as {name}, such as '30 deg'") from error
        if unit.dimension != ANGLE:
            raise UsageError(f"the attitude is {text!r}", f"an angle as {name}, such as '30 deg'")
        angles.append(value * unit.factor)
    return angles[0], angles[1]


def earth_rate_along(latitude: float, tilt: float, azimuth: float) -> float:
    """Return the rate of the Earth about an axis, rad/s, from angles in rad (azimuth from north).

    w (sin(lat) cos(tilt) + cos(lat) sin(tilt) cos(azimuth)): the two parts of w at a latitude, projected (derived here).
    """
    vertical = math.sin(latitude) * math.cos(tilt)
    return EARTH_RATE * (vertical + math.cos(latitude) * math.sin(tilt) * math.cos(azimuth))


def normal_gravity(latitude: float) -> float:
    """Return normal gravity at the ellipsoid, m/s^2, at a latitude in rad (Somigliana's formula, WGS 84)."""
    sine = math.sin(latitude) ** 2
    return EQUATOR_GRAVITY * (1.0 + SOMIGLIANA * sine) / math.sqrt(1.0 - ECCENTRICITY_SQUARED * sine)


def gravity_along(latitude: float, tilt: float) -> float:
    """Return what an accelerometer at rest reads along an axis, m/s^2, from angles in rad: the reaction to gravity, upwards positive."""
    return normal_gravity(latitude) * math.cos(tilt)


def known_input(sheet: LogSheet, section: ChannelSection | None, quantity: str, findings: list[Finding]) -> float:
    """Return what the sensor feels at rest by latitude and attitude, SI, and say so in ``findings``.

    Parameters
    ----------
    sheet : LogSheet
        Its conditions.
    section : ChannelSection or None
        Whose attitude overrides that of the conditions.
    quantity : str
        Name of a Quantity; 0 for all but angular rate and acceleration.
    findings : list of Finding
        Grows by one where latitude is declared.

    Raises
    ------
    UsageError
        When latitude, tilt or azimuth cannot be read.
    """
    where, conditions = section.attitude if section else None, sheet.conditions
    attitude = parse_attitude(where or conditions.attitude or "")
    inertial = quantity in (ANGULAR_RATE.name, ACCELERATION.name)
    if conditions.latitude is not None and attitude is None and inertial:
        said = (
            f"the attitude {where or conditions.attitude!r} is not one that is understood"
            if where or conditions.attitude
            else "no attitude is declared"
        )
        findings.append(
            Finding(
                "earth_rate",
                None,
                None,
                None,
                "",
                excluded=False,
                because=f"{said}: what of the Earth the input axis feels is not known",
                disposition='the bias contains it; write attitude = "axis up", down, north, ... or a tilt and an azimuth',
            )
        )
    if conditions.latitude is None or attitude is None:
        return 0.0
    latitude = parse_latitude(conditions.latitude)
    spoken = where or conditions.attitude
    if quantity == ANGULAR_RATE.name:
        value = earth_rate_along(latitude, *attitude)
        shown, source, degree = f"{math.degrees(value) * 3600.0:+.4f} deg/h", "Earth rate", EARTH_RATE
        slope = f"{math.degrees(degree) * 3600.0 * math.radians(1.0):.2f} deg/h"
    elif quantity == ACCELERATION.name:
        value = gravity_along(latitude, attitude[0])
        shown, source = f"{value:+.6f} m/s^2", "normal gravity (WGS 84)"
        slope = f"{normal_gravity(latitude) * math.radians(1.0):.3f} m/s^2"
    else:
        return 0.0
    findings.append(
        Finding(
            "earth_rate",
            None,
            None,
            value,
            "rad/s" if quantity == ANGULAR_RATE.name else "m/s^2",
            excluded=False,
            because=f"{source} along the input axis ({spoken}; latitude {conditions.latitude}) is {shown}",
            disposition=f"taken off the bias; a degree of attitude is worth up to {slope}",
        )
    )
    return value
