"""The answer to one requirement."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import ClassVar

CONFORMS = "conforms"
FAILS = "does not conform"
UNDECIDED = "undecided"
DECISIONS = (CONFORMS, FAILS, UNDECIDED)


@dataclass(frozen=True)
class Verdict:
    """One requirement judged.

    Attributes
    ----------
    id, clause, quantity : str
        Of the requirement; ``quantity`` carries its definition (averaging time and the like).
    value, lower, upper : float or None
        Estimate and two-sided interval, SI.
    bound : float or None
        The one-sided bound that decided, SI.
    limit : float
        SI.
    unit : str
        SI unit of the four.
    spoken_unit : str
        Unit of the requirement.
    decision : str
        One of DECISIONS.
    conformance_probability : float or None
    deciding_length : (float, float or None) or None
        Length of a log that would decide with 90 % probability, as a range, s; its upper end
        is None beyond 32 such logs; None as a whole when not asked or not reachable.
    because : str
    """

    id: str
    clause: str
    quantity: str
    value: float | None
    lower: float | None
    upper: float | None
    bound: float | None
    limit: float
    unit: str
    spoken_unit: str
    decision: str
    conformance_probability: float | None
    deciding_length: tuple[float, float | None] | None
    because: str

    __json_names__: ClassVar[Mapping[str, str]] = {"deciding_length": "deciding_length_s"}
