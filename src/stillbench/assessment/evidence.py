"""What a judge may look at."""

from dataclasses import dataclass

from stillbench.likelihood.fitted import FittedModel
from stillbench.vocabulary.characterization import Bias
from stillbench.vocabulary.noise_model import NoiseModel
from stillbench.vocabulary.record import Record


@dataclass(frozen=True)
class Evidence:
    """One channel as far as it is known.

    Attributes
    ----------
    record : Record
        Screened.
    model : NoiseModel
    fitted : FittedModel
    bias : Bias
        Statistical interval only.
    bias_error : float
        Its standard uncertainty.
    relative_uncertainty : float
        Standard, of the scale factor.
    trusted : bool
        False when the model does not explain the spectrum.
    same_level : bool
        False when the sensor was turned between runs.
    clipped : bool
        True when so many readings are saturated that the noise reads low.
    coarse : bool
        True when the converter does not resolve the white noise.
    """

    record: Record
    model: NoiseModel
    fitted: FittedModel
    bias: Bias
    bias_error: float
    relative_uncertainty: float
    trusted: bool
    same_level: bool
    clipped: bool = False
    coarse: bool = False


@dataclass(frozen=True)
class Estimate:
    """A value with the intervals that a decision needs, SI.

    Attributes
    ----------
    value : float
        Size.
    lower, upper : float
        Two-sided interval at the coverage of the requirement, statistical.
    one_sided : (float, float)
        Lower and upper one-sided bounds, statistical.
    likely : (float, float)
        68 % interval, statistical.
    draws : tuple of float
        Draws of the value given the data, for the conformance probability; empty for a normal one.
    normal : (float, float) or None
        Signed value and standard uncertainty where the estimate is normal.
    errors : (float, float) or None
        Relative standard errors at the limit and at the estimate, for the length of a deciding log; None for values to
        which a longer log adds nothing.
    because : str
        How it was found.
    """

    value: float
    lower: float
    upper: float
    one_sided: tuple[float, float]
    likely: tuple[float, float]
    draws: tuple[float, ...]
    normal: tuple[float, float] | None
    errors: tuple[float, float] | None
    because: str
