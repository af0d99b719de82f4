"""Units: a closed list, every spelling an engineer types, one canonical way to print each.

Inside the package all numbers are SI; a unit is spoken at an edge (file, flag, requirement, table) and has no default.

References
----------
Angle, time and length from the SI brochure (9th edition); standard gravity 9.80665 m/s^2 (CGPM 1901); 1 G = 1e-4 T.
Noise units such as deg/sqrt(h) are those of IEEE Std 952.
"""

import math
import re
from dataclasses import dataclass
from fractions import Fraction

from stillbench.foundation.errors import UnitError
from stillbench.foundation.suggestions import did_you_mean

BASES = ("angle", "length", "time", "voltage", "count", "induction", "temperature", "ratio", "pressure")

STANDARD_GRAVITY = 9.80665
"""m/s^2, by definition."""


@dataclass(frozen=True)
class Dimension:
    """Exponents over BASES."""

    exponents: tuple[Fraction, ...]

    def __mul__(self, other: "Dimension") -> "Dimension":
        return Dimension(tuple(a + b for a, b in zip(self.exponents, other.exponents, strict=True)))

    def __pow__(self, power: Fraction | int) -> "Dimension":
        return Dimension(tuple(a * power for a in self.exponents))


def _dimension(**exponents: int) -> Dimension:
    return Dimension(tuple(Fraction(exponents.get(base, 0)) for base in BASES))


NONE = _dimension()
ANGLE = _dimension(angle=1)
TIME = _dimension(time=1)
RATE = _dimension(angle=1, time=-1)
ACCELERATION = _dimension(length=1, time=-2)
VELOCITY = _dimension(length=1, time=-1)
VOLTAGE = _dimension(voltage=1)
INDUCTION = _dimension(induction=1)
COUNT = _dimension(count=1)
TEMPERATURE = _dimension(temperature=1)
RATIO = _dimension(ratio=1)
PRESSURE = _dimension(pressure=1)

DIMENSION_WORDS = {
    RATE: "an angular rate",
    ANGLE: "an angle",
    ACCELERATION: "an acceleration",
    VELOCITY: "a velocity",
    VOLTAGE: "a voltage",
    INDUCTION: "a magnetic flux density",
    COUNT: "a count",
    TEMPERATURE: "a temperature",
    RATIO: "a ratio",
    PRESSURE: "a pressure",
    TIME: "a time",
    NONE: "a pure number",
}


@dataclass(frozen=True)
class Unit:
    """One unit: ``SI value = factor * value + offset``.

    Attributes
    ----------
    text : str
        Canonical ASCII spelling.
    factor, offset : float
        To SI (offset only for degC).
    dimension : Dimension
    """

    text: str
    factor: float
    dimension: Dimension
    offset: float = 0.0

    def to_si(self, value: float) -> float:
        """Return ``value`` of this unit in SI."""
        return self.factor * value + self.offset

    def from_si(self, value: float) -> float:
        """Return an SI value in this unit."""
        return (value - self.offset) / self.factor

    @property
    def si_text(self) -> str:
        """The SI unit of this dimension, or this unit where it is SI itself."""
        return {TEMPERATURE: "K", VOLTAGE: "V", RATE: "rad/s", ACCELERATION: "m/s^2", PRESSURE: "Pa", RATIO: "1"}.get(
            self.dimension, self.text if self.factor == 1.0 else f"{self.factor:g} {self.text}"
        )

    @property
    def printed(self) -> str:
        """The unit for a printed page: degree, micro, root and power signs."""
        text = self.text.replace("degC", "\N{DEGREE SIGN}C")
        text = re.sub(r"\bdeg\b", "\N{DEGREE SIGN}", text)
        text = re.sub(r"sqrt\((\w+)\)", "\N{SQUARE ROOT}\\1", text)
        text = re.sub(r"\bu(?=rad|g|T|V|s\b)", "\N{MICRO SIGN}", text)
        return text.replace("^2", "\N{SUPERSCRIPT TWO}").replace("*", "\N{DOT OPERATOR}")


DEGREE = math.pi / 180.0
LONGEST_TEXT = 80
LARGEST_POWER = 12

_SYMBOLS: dict[str, tuple[float, Dimension]] = {
    "rad": (1.0, ANGLE),
    "mrad": (1e-3, ANGLE),
    "urad": (1e-6, ANGLE),
    "deg": (DEGREE, ANGLE),
    "mdeg": (DEGREE * 1e-3, ANGLE),
    "arcmin": (DEGREE / 60.0, ANGLE),
    "arcsec": (DEGREE / 3600.0, ANGLE),
    "m": (1.0, _dimension(length=1)),
    "s": (1.0, TIME),
    "ms": (1e-3, TIME),
    "us": (1e-6, TIME),
    "ns": (1e-9, TIME),
    "min": (60.0, TIME),
    "h": (3600.0, TIME),
    "d": (86400.0, TIME),
    "Hz": (1.0, TIME**-1),
    "g": (STANDARD_GRAVITY, ACCELERATION),
    "mg": (STANDARD_GRAVITY * 1e-3, ACCELERATION),
    "ug": (STANDARD_GRAVITY * 1e-6, ACCELERATION),
    "V": (1.0, VOLTAGE),
    "mV": (1e-3, VOLTAGE),
    "uV": (1e-6, VOLTAGE),
    "nV": (1e-9, VOLTAGE),
    "T": (1.0, INDUCTION),
    "mT": (1e-3, INDUCTION),
    "uT": (1e-6, INDUCTION),
    "nT": (1e-9, INDUCTION),
    "G": (1e-4, INDUCTION),
    "mG": (1e-7, INDUCTION),
    "count": (1.0, COUNT),
    "K": (1.0, TEMPERATURE),
    "degC": (1.0, TEMPERATURE),
    "%": (0.01, RATIO),
    "ppm": (1e-6, RATIO),
    "Pa": (1.0, PRESSURE),
    "hPa": (100.0, PRESSURE),
    "kPa": (1000.0, PRESSURE),
}

_SPELLINGS: dict[str, str] = {
    "degree": "deg",
    "degrees": "deg",
    "Deg": "deg",
    "\N{DEGREE SIGN}": "deg",
    "\N{MASCULINE ORDINAL INDICATOR}": "deg",
    "radian": "rad",
    "radians": "rad",
    "arcseconds": "arcsec",
    "arcsecond": "arcsec",
    "sec": "s",
    "secs": "s",
    "second": "s",
    "seconds": "s",
    "hr": "h",
    "hrs": "h",
    "hour": "h",
    "hours": "h",
    "day": "d",
    "millisecond": "ms",
    "milliseconds": "ms",
    "microsecond": "us",
    "microseconds": "us",
    "nanosecond": "ns",
    "nanoseconds": "ns",
    "hz": "Hz",
    "volt": "V",
    "volts": "V",
    "Volt": "V",
    "Volts": "V",
    "millivolt": "mV",
    "millivolts": "mV",
    "microvolt": "uV",
    "microvolts": "uV",
    "tesla": "T",
    "Tesla": "T",
    "gauss": "G",
    "Gauss": "G",
    "milligauss": "mG",
    "mGauss": "mG",
    "counts": "count",
    "cnt": "count",
    "cnts": "count",
    "LSB": "count",
    "lsb": "count",
    "kelvin": "K",
    "celsius": "degC",
    "Celsius": "degC",
    "\N{DEGREE SIGN}C": "degC",
    "\N{DEGREE CELSIUS}": "degC",
    "%RH": "%",
    "percent": "%",
}

_COMPOUNDS = {"dps": "deg/s", "mdps": "mdeg/s", "dph": "deg/h", "rps": "rad/s"}

_TOKEN = re.compile(
    r"\s*(?:(?P<root>sqrt|rt(?=\s*\()|\N{SQUARE ROOT})|(?P<open>\()|(?P<close>\))|(?P<times>\*(?!\*)|[\N{MIDDLE DOT}\N{DOT OPERATOR}])|(?P<over>/)"
    r"|(?P<power>\^\s*\(?-?\d+(?:[./]\d+)?\)?|\*\*-?\d+(?:\.\d+)?|\N{SUPERSCRIPT TWO}|\N{SUPERSCRIPT MINUS}\N{SUPERSCRIPT ONE})"
    r"|(?P<name>\N{DEGREE SIGN}C|%RH|%|\N{DEGREE SIGN}|\N{MASCULINE ORDINAL INDICATOR}|\N{DEGREE CELSIUS}|[A-Za-z\N{MICRO SIGN}\N{GREEK SMALL LETTER MU}]+)"
    r"|(?P<one>1(?![\d.])))"
)

Factors = list[tuple[str, Fraction]]


class _Parser:
    """Recursive descent over unit = factor ((* | /) factor)*, factor = (sqrt) (name | (unit)) (^number)."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.tokens: list[tuple[str, str]] = []
        position = 0
        stripped = text.strip()
        while position < len(stripped):
            match = _TOKEN.match(stripped, position)
            if match is None:
                raise self.fault(f"cannot read {stripped[position:]!r} in the unit {text!r}")
            kind = match.lastgroup or ""
            self.tokens.append((kind, match.group(kind)))
            position = match.end()
        self.at = 0

    def fault(self, found: str, way_out: str = "") -> UnitError:
        return UnitError(
            self.text,
            found,
            "a unit such as deg/s, deg/sqrt(h), rad/s, m/s^2, mg, V, uT, count",
            way_out or "units keep their case: mg is milligravity, mG is milligauss",
        )

    def peek(self) -> str:
        return self.tokens[self.at][0] if self.at < len(self.tokens) else ""

    def take(self) -> tuple[str, str]:
        token = self.tokens[self.at]
        self.at += 1
        return token

    def unit(self) -> Factors:
        factors = self.factor()
        while self.peek() in ("times", "over", "name", "open", "root"):
            sign = 1
            if self.peek() in ("times", "over"):
                sign = -1 if self.take()[0] == "over" else 1
            factors += [(name, power * sign) for name, power in self.factor()]
        return factors

    def factor(self) -> Factors:
        kind = self.peek()
        if kind == "root":
            self.take()
            return [(name, power / 2) for name, power in self.factor()]
        if kind == "open":
            self.take()
            factors = self.unit()
            if self.peek() != "close":
                raise self.fault(f"a bracket is not closed in the unit {self.text!r}")
            self.take()
        elif kind == "name":
            factors = self.name(self.take()[1])
        elif kind == "one":
            self.take()
            factors = []
        else:
            raise self.fault(f"the unit {self.text!r} ends too early" if self.text.strip() else "an empty unit")
        if self.peek() == "power":
            power = self.power(self.take()[1])
            factors = [(name, old * power) for name, old in factors]
        return factors

    def name(self, word: str) -> Factors:
        plain = word.replace("\N{MICRO SIGN}", "u").replace("\N{GREEK SMALL LETTER MU}", "u")
        if plain.startswith("rt") and plain[2:] in ("Hz", "h", "hr", "s"):
            return [(_SPELLINGS.get(plain[2:], plain[2:]), Fraction(1, 2))]
        if plain in _COMPOUNDS:
            return _Parser(_COMPOUNDS[plain]).unit()
        plain = _SPELLINGS.get(plain, plain)
        if plain not in _SYMBOLS:
            raise self.fault(f"{word!r} in {self.text!r} is not a known unit", did_you_mean(plain, _SYMBOLS))
        return [(plain, Fraction(1))]

    @staticmethod
    def power(text: str) -> Fraction:
        if text == "\N{SUPERSCRIPT TWO}":
            return Fraction(2)
        if text.startswith("\N{SUPERSCRIPT MINUS}"):
            return Fraction(-1)
        return Fraction(text.lstrip("^*").strip(" ()"))


def _write(factors: Factors) -> str:
    """Write factors in the order they were said, divisors last; seconds are gathered, hours are not (deg/h/h, m/s^2)."""
    gathered: Factors = []
    for name, power in factors:
        previous = next((i for i, (known, _) in enumerate(gathered) if known == name == "s"), None)
        whole = power.denominator == 1
        if previous is not None and whole and gathered[previous][1].denominator == 1:
            gathered[previous] = (name, gathered[previous][1] + power)
        else:
            gathered.append((name, power))
    text = ""
    for name, power in sorted(gathered, key=lambda factor: factor[1] < 0):
        size = abs(power)
        if size == 0:
            continue
        if size.denominator == 1:
            word = name if size == 1 else f"{name}^{size}"
        elif size == Fraction(1, 2):
            word = f"sqrt({name})"
        else:
            word = f"{name}^{float(size):g}"
        if power < 0:
            text = f"{text or '1'}/{word}"
        elif text:
            text += f"*{word}"
        else:
            text = word
    return text or "1"


def parse_unit(text: str) -> Unit:
    """Read a unit in any of its spellings.

    Parameters
    ----------
    text : str
        Such as ``deg/s``, ``dps``, ``°/√h``, ``deg/h/sqrt(h)``, ``mV/(deg/s)``. Case counts: mg is milligravity, mG milligauss.

    Returns
    -------
    Unit
        With its canonical spelling and its factor to SI.

    Raises
    ------
    UnitError
        When a part is not in the closed list, or the expression does not parse.
    """
    if len(text) > LONGEST_TEXT:
        raise UnitError(text[:40], f"a unit of {len(text)} characters", "a unit such as deg/s")
    parser = _Parser(text)
    if not parser.tokens:
        raise parser.fault("an empty unit")
    try:
        factors = parser.unit()
    except (ZeroDivisionError, ValueError, OverflowError) as error:
        raise parser.fault(f"a power in the unit {text!r} cannot be read") from error
    if any(abs(power) > LARGEST_POWER for _, power in factors):
        raise parser.fault(f"a power beyond {LARGEST_POWER} in the unit {text!r}")
    if parser.at < len(parser.tokens):
        raise parser.fault(f"cannot read {parser.tokens[parser.at][1]!r} in the unit {text!r}")
    factor = 1.0
    dimension = NONE
    for name, power in factors:
        size, base = _SYMBOLS[name]
        factor *= size if power == 1 else 1.0 / size if power == -1 else size ** float(power)
        dimension *= base**power
    offset = 273.15 if factors == [("degC", Fraction(1))] else 0.0
    return Unit(_write(factors), factor, dimension, offset)


def require_dimension(unit: Unit, dimension: Dimension, purpose: str, example: str) -> Unit:
    """Return ``unit`` if it has the dimension, else raise UnitError naming what it is and what was wanted."""
    if unit.dimension != dimension:
        is_what = DIMENSION_WORDS.get(unit.dimension, "something else")
        wanted = DIMENSION_WORDS.get(dimension, f"like {example}")
        raise UnitError(
            unit.text,
            f"the unit {unit.text!r} of {purpose} is {is_what}",
            wanted,
            f"give one such as {example}",
        )
    return unit


_QUANTITY = re.compile(r"\s*([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?)\s*(.*?)\s*$")


def parse_quantity(text: str, purpose: str) -> tuple[float, Unit]:
    """Read ``'0.01 deg/s'`` as the number 0.01 and the unit deg/s.

    Raises
    ------
    UnitError
        When there is no number in front or no unit behind it.
    """
    match = _QUANTITY.match(text)
    if match is None:
        raise UnitError(text, f"{purpose} is {text!r}", "a number and its unit", "write it like '0.01 deg/s'")
    number, unit = match.groups()
    if not unit:
        raise UnitError(text, f"{purpose} {text!r} has no unit", "a number and its unit", "write it like '0.01 deg/s'")
    value = float(number)
    if not math.isfinite(value):
        raise UnitError(text, f"{purpose} is {text[:40]!r}", "a number that fits the machine")
    return value, parse_unit(unit)
