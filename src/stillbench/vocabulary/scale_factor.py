"""A scale factor found from known turns, rates or positions."""

from dataclasses import dataclass

from stillbench.foundation.arrays import FloatArray

SCALE_SCHEMA = "stillbench/scale-factor"
SCALE_VERSION = 1


@dataclass(frozen=True)
class KnownStep:
    """One turn, rate or position.

    Attributes
    ----------
    start, stop : float
        Seconds from the first sample.
    applied : float
        Angle, rate or acceleration, SI.
    observed : float
        Integral of the reading over the turn less null, or mean reading, SI.
    residual : float
        Observed less fitted, SI.
    """

    start: float
    stop: float
    applied: float
    observed: float
    residual: float


@dataclass(frozen=True)
class Contribution:
    """One line of the uncertainty of a scale factor: standard, relative; degrees of freedom null where they are endless."""

    name: str
    relative: float
    dof: float


@dataclass(frozen=True)
class ScaleFactor:
    """What readings are worth.

    Attributes
    ----------
    method : str
        ``turns``, ``rates`` or ``positions``.
    label : str
        Of the channel.
    reading_unit, quantity_unit : str
        As spoken; the factor is reading over quantity.
    factor, lower, upper : float
        SI reading per SI quantity, with its two-sided interval.
    relative : float
        Combined standard uncertainty over the factor.
    dof : float
        Effective degrees of freedom (Welch-Satterthwaite).
    coverage : float
    zero, zero_uncertainty : float
        Reading without input, SI; Earth rate or gravity taken off.
    asymmetry, asymmetry_uncertainty : float or None
        Factor for positive input over that for negative input, less one; null with one direction only.
    nonlinearity : float
        Largest departure from the line, over the largest input.
    repeatability : float
        Standard deviation of the factor of single steps over the factor.
    known_input : float
        Earth rate along the axis, SI, that the zero does not contain.
    steps : tuple of KnownStep
    contributions : tuple of Contribution
    remarks : tuple of str
    time, reading : (n,) float arrays
        Course of the log for drawing, s and SI.
    """

    method: str
    label: str
    reading_unit: str
    quantity_unit: str
    factor: float
    lower: float
    upper: float
    relative: float
    dof: float
    coverage: float
    zero: float
    zero_uncertainty: float
    asymmetry: float | None
    asymmetry_uncertainty: float | None
    nonlinearity: float
    repeatability: float
    known_input: float
    steps: tuple[KnownStep, ...]
    contributions: tuple[Contribution, ...]
    remarks: tuple[str, ...]
    time: FloatArray
    reading: FloatArray
