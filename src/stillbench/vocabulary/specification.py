"""What a specification asks of a sensor (TOML)."""

from typing import Annotated, Literal, Self

from pydantic import BaseModel, ConfigDict, Field, field_validator, model_validator

from stillbench.foundation.errors import UnitError
from stillbench.foundation.suggestions import did_you_mean
from stillbench.foundation.units import TIME, parse_quantity, require_dimension
from stillbench.vocabulary.quantity import term_names

OTHER_QUANTITIES = (
    "bias",
    "drift",
    "lowest deviation",
    "resolution",
    "temperature coefficient",
    "warm-up time",
)
MEANINGS = {"resolution": ("threshold", "seen 90 %")}


def _seconds(text: str) -> float:
    value, unit = parse_quantity(text, "a time")
    seconds = require_dimension(unit, TIME, repr(text), "1 s, 10 min or 8 h").to_si(value)
    if not seconds > 0:
        raise UnitError(text, f"the time {text!r} is not positive", "a time above zero")
    return seconds


class Requirement(BaseModel):
    """One clause: a quantity, its definition and its limit."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    id: Annotated[str, Field(min_length=1)]
    clause: str = ""
    quantity: str
    limit: str
    averaging_time: str | None = None
    over: str | None = None
    null: str | None = None
    rule: Literal["guarded", "simple"] = "guarded"
    coverage: Annotated[float, Field(gt=0.5, lt=1)] = 0.95
    kind: Literal["maximum", "typical"] = "maximum"
    meaning: str | None = None

    @field_validator("quantity")
    @classmethod
    def _known_quantity(cls, name: str) -> str:
        known = [*OTHER_QUANTITIES, *term_names()]
        plain = name.replace("_", " ").strip()
        if plain not in known:
            hint = did_you_mean(plain, known) or f"known: {', '.join(sorted(known))}"
            message = f"{name!r} is not a quantity that can be judged ({hint})"
            raise ValueError(message)
        return plain

    @field_validator("limit")
    @classmethod
    def _limit_parses(cls, text: str) -> str:
        try:
            value, _ = parse_quantity(text, "the limit")
        except UnitError as error:
            raise ValueError(error.message) from error
        if not value > 0:
            message = "a limit is a size above zero (it limits the size of a signed quantity)"
            raise ValueError(message)
        return text

    @field_validator("averaging_time", "over", "null")
    @classmethod
    def _time_parses(cls, text: str | None) -> str | None:
        if text is not None:
            try:
                _seconds(text)
            except UnitError as error:
                raise ValueError(error.message) from error
        return text

    @model_validator(mode="after")
    def _definition_complete(self) -> Self:
        needed = {"resolution": ("averaging_time",), "drift": ("averaging_time", "null")}.get(self.quantity, ())
        absent = [name for name in needed if getattr(self, name) is None]
        if absent:
            message = f"a limit on {self.quantity} means nothing without {' and '.join(absent)}"
            raise ValueError(message)
        meanings = MEANINGS.get(self.quantity, ())
        if self.meaning is not None and self.meaning not in meanings:
            options = " or ".join(repr(meaning) for meaning in meanings)
            message = f"meaning {self.meaning!r} is unknown" + (f" (wanted {options})" if meanings else " here")
            raise ValueError(message)
        return self

    def seconds(self, name: Literal["averaging_time", "over", "null"]) -> float | None:
        """Return one of the times of the definition, s."""
        text: str | None = getattr(self, name)
        return None if text is None else _seconds(text)


class Heading(BaseModel):
    """Title and issue of a specification."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    title: str = ""
    issue: str = ""


class Specification(BaseModel):
    """A specification: requirements with unique ids."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    specification: Heading = Heading()
    requirement: tuple[Requirement, ...] = ()

    @model_validator(mode="after")
    def _ids_differ(self) -> Self:
        ids = [requirement.id for requirement in self.requirement]
        twice = sorted({name for name in ids if ids.count(name) > 1})
        if twice:
            message = f"requirement ids used twice: {', '.join(twice)}"
            raise ValueError(message)
        return self
