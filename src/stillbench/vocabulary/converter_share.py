"""What of the noise belongs to the converter, from a log with its input shorted or terminated."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import ClassVar

from stillbench.vocabulary.deviation_curve import DeviationCurve
from stillbench.vocabulary.noise_model import NoiseModel
from stillbench.vocabulary.sensor_log import Source


@dataclass(frozen=True)
class CorrectedTerm:
    """One term with the converter's part taken off in variance. SI.

    Attributes
    ----------
    coefficient, lower, upper : float
        Of the sensor alone; ``lower`` is 0 where the converter may be all there is.
    share : float
        Of the converter in the variance of the term, 0 to 1.
    limited : bool
        Whether the converter dominates, so that only the upper end means something.
    """

    coefficient: float
    lower: float
    upper: float
    share: float
    limited: bool


@dataclass(frozen=True)
class ConverterShare:
    """The converter's own noise beside that of sensor and converter together.

    Attributes
    ----------
    source : Source
        Of the converter's log.
    curve : DeviationCurve
        SI of the channel, through the same front end.
    noise : NoiseModel
    sensor : mapping of term name to CorrectedTerm
    limited_from, limited_to : float or None
        Averaging times, s, between which the converter makes half of the variance or more; None where it nowhere does.
    """

    source: Source
    curve: DeviationCurve
    noise: NoiseModel
    sensor: Mapping[str, CorrectedTerm]
    limited_from: float | None
    limited_to: float | None

    __json_names__: ClassVar[Mapping[str, str]] = {"limited_from": "limited_from_s", "limited_to": "limited_to_s"}
