"""What a channel measures: SI unit, names of its noise terms, and the units the trade prints them in.

References
----------
Names of the terms: IEEE Std 952 (rate gyros) and IEEE Std 1293 (accelerometers).
"""

from collections.abc import Mapping
from dataclasses import dataclass

ROLES = ("quantization", "white", "correlated", "flicker", "walk", "ramp")
"""Roles of the noise terms, in the order in which they rule from short to long averaging times."""

TIME_POWERS: Mapping[str, float] = {
    "quantization": 1.0,
    "white": 0.5,
    "correlated": 0.0,
    "flicker": 0.0,
    "walk": -0.5,
    "ramp": -1.0,
}
"""Unit of a coefficient = unit of the quantity times seconds to this power."""

SI_SUFFIX: Mapping[str, str] = {
    "quantization": "*s",
    "white": "*sqrt(s)",
    "correlated": "",
    "flicker": "",
    "walk": "/sqrt(s)",
    "ramp": "/s",
}


@dataclass(frozen=True)
class Quantity:
    """One kind of channel.

    Attributes
    ----------
    name : str
        As printed.
    unit : str
        SI unit of a sample.
    terms : mapping of role to name
        As used in result.json.
    spoken : mapping of role to unit
        What reports print by default; empty where the log's own unit is used.
    curve_unit : str
        Unit of deviations and bias in reports; empty where the log's own unit is used.
    """

    name: str
    unit: str
    terms: Mapping[str, str]
    spoken: Mapping[str, str]
    curve_unit: str = ""

    def term_unit(self, role: str) -> str:
        """Return the SI unit of the coefficient of one term."""
        special = {("angular rate", "white"): "rad/sqrt(s)", ("angular rate", "quantization"): "rad"}
        special |= {("angular rate", "ramp"): "rad/s^2", ("acceleration", "white"): "m/s/sqrt(s)"}
        special |= {("acceleration", "quantization"): "m/s", ("acceleration", "walk"): "m/s^2/sqrt(s)"}
        special |= {("acceleration", "ramp"): "m/s^3"}
        return special.get((self.name, role), self.unit + SI_SUFFIX[role])

    def spoken_unit(self, role: str, report_unit: str) -> str:
        """Return the unit in which a report prints a term, given the unit in which it prints deviations.

        The trade's own units go with the default; SI with SI; otherwise the report unit times a power of the second.
        """
        if report_unit == self.curve_unit and role in self.spoken:
            return self.spoken[role]
        if report_unit == self.unit:
            return self.term_unit(role)
        known = _SPOKEN_WITH.get(report_unit, {})
        return known.get(role, report_unit + SI_SUFFIX[role])


_SPOKEN_WITH: Mapping[str, Mapping[str, str]] = {
    "deg/s": {"quantization": "deg", "white": "deg/sqrt(s)", "ramp": "deg/s^2"},
    "mg": {"quantization": "m/s", "white": "m/s/sqrt(h)", "walk": "mg/sqrt(h)", "ramp": "mg/h"},
    "g": {"quantization": "m/s", "white": "m/s/sqrt(h)", "walk": "g/sqrt(h)", "ramp": "g/h"},
    "V": {"ramp": "V/h"},
    "mV": {"ramp": "mV/h"},
    "uV": {"ramp": "uV/h"},
    "count": {"ramp": "count/h"},
}

_PLAIN = {
    "white": "white_noise",
    "correlated": "exponentially_correlated",
    "flicker": "flicker_noise",
    "walk": "random_walk",
    "ramp": "ramp",
}

ANGULAR_RATE = Quantity(
    "angular rate",
    "rad/s",
    {
        "quantization": "quantization_noise",
        "white": "angle_random_walk",
        "correlated": "exponentially_correlated",
        "flicker": "bias_instability",
        "walk": "rate_random_walk",
        "ramp": "rate_ramp",
    },
    {
        "quantization": "arcsec",
        "white": "deg/sqrt(h)",
        "correlated": "deg/h",
        "flicker": "deg/h",
        "walk": "deg/h/sqrt(h)",
        "ramp": "deg/h/h",
    },
    "deg/h",
)
ACCELERATION = Quantity(
    "acceleration",
    "m/s^2",
    {
        "quantization": "quantization_noise",
        "white": "velocity_random_walk",
        "correlated": "exponentially_correlated",
        "flicker": "bias_instability",
        "walk": "acceleration_random_walk",
        "ramp": "acceleration_ramp",
    },
    {
        "quantization": "m/s",
        "white": "m/s/sqrt(h)",
        "correlated": "ug",
        "flicker": "ug",
        "walk": "ug/sqrt(h)",
        "ramp": "ug/h",
    },
    "ug",
)
VOLTAGE = Quantity("voltage", "V", _PLAIN, {})
COUNT = Quantity("count", "count", _PLAIN, {})
INDUCTION = Quantity("magnetic flux density", "T", _PLAIN, {})

QUANTITIES: Mapping[str, Quantity] = {
    quantity.name: quantity for quantity in (ANGULAR_RATE, ACCELERATION, VOLTAGE, COUNT, INDUCTION)
}


def role_of(term: str) -> str | None:
    """Return the role of a term name (underscores or spaces), or None when it is not one."""
    name = term.replace(" ", "_")
    for quantity in QUANTITIES.values():
        for role, known in quantity.terms.items():
            if known == name:
                return role
    return None


def is_density(quantity: str, unit: str) -> bool:
    """Whether a limit on ``quantity`` in ``unit`` is a spectral density: white noise per root hertz, one-sided."""
    return "Hz" in unit and role_of(quantity) == "white"


def term_names() -> list[str]:
    """All term names, as written in a specification (with spaces)."""
    return sorted({name.replace("_", " ") for quantity in QUANTITIES.values() for name in quantity.terms.values()})
