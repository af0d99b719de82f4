"""The noise terms of one channel, with all that prediction and report need."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, ClassVar

from stillbench.foundation.arrays import FloatArray

if TYPE_CHECKING:
    import pandas as pd

RESOLVED = "resolved"
AMBIGUOUS = "ambiguous"
UPPER_BOUND = "upper bound"
NOT_OBSERVABLE = "not observable"
STATES = (RESOLVED, AMBIGUOUS, UPPER_BOUND, NOT_OBSERVABLE)


@dataclass(frozen=True)
class CurveEstimate:
    """A second opinion, from the deviation curve. SI."""

    coefficient: float
    lower: float
    upper: float


@dataclass(frozen=True)
class TextbookReading:
    """A reading of the curve by rule of thumb; ``value`` is None where the rule finds nothing to read. SI."""

    value: float | None
    how: str


@dataclass(frozen=True)
class NoiseTerm:
    """One term.

    Attributes
    ----------
    coefficient, lower, upper : float or None
        SI; None when not observable. They come from the model with all terms.
    unit : str
        SI unit.
    state : str
        One of STATES.
    because : str
        One sentence on the state.
    parameters : mapping
        Further parameters of the term.
    curve_estimate : CurveEstimate or None
    textbook : TextbookReading or None
    """

    coefficient: float | None
    lower: float | None
    upper: float | None
    unit: str
    state: str
    because: str
    parameters: Mapping[str, float] = field(default_factory=dict)
    curve_estimate: CurveEstimate | None = None
    textbook: TextbookReading | None = None


@dataclass(frozen=True)
class SpectralLine:
    """A sinusoid in the log. SI, amplitude of a sine."""

    frequency: float
    amplitude: float
    lower: float
    upper: float
    alias_of: str | None = None

    __json_names__: ClassVar[Mapping[str, str]] = {"frequency": "frequency_hz"}


@dataclass(frozen=True)
class Response:
    """Low-pass of the sensor, as far as it was recognised."""

    shape: str
    corner: float | None

    __json_names__: ClassVar[Mapping[str, str]] = {"corner": "corner_hz"}


@dataclass(frozen=True)
class Information:
    """Fisher information of the squared coefficients of the full model, SI: inverse of their covariance."""

    names: tuple[str, ...]
    matrix: FloatArray


@dataclass(frozen=True)
class Bins:
    """Binned cosine-transform powers and the fitted model, two-sided spectral density, SI.

    Attributes
    ----------
    frequency : (j,) float array
        Hz.
    dof : (j,) float array
        Transform coefficients in each bin.
    power, model : (j,) float arrays
        Observed and fitted.
    """

    frequency: FloatArray
    dof: FloatArray
    power: FloatArray
    model: FloatArray

    __json_names__: ClassVar[Mapping[str, str]] = {"frequency": "frequency_hz"}


@dataclass(frozen=True)
class NoiseModel:
    """What the log says about its noise.

    Attributes
    ----------
    terms : mapping of term name to NoiseTerm
    lines : tuple of SpectralLine
    accepted : tuple of tuple of str
        Smallest sets of terms that explain the log; more than one means that the log cannot tell them apart.
    band : (float, float)
        Frequencies the fit used, Hz.
    response : Response or None
    goodness : float
        Standard normal under the fitted model; large means poor.
    information : Information
    bins : Bins
    kurtosis : float
        Of the whitened log; 3 for Gaussian noise.
    """

    terms: Mapping[str, NoiseTerm]
    lines: tuple[SpectralLine, ...]
    accepted: tuple[tuple[str, ...], ...]
    band: tuple[float, float]
    response: Response | None
    goodness: float
    information: Information
    bins: Bins
    kurtosis: float

    __json_names__: ClassVar[Mapping[str, str]] = {"band": "band_hz"}

    def to_frame(self) -> "pd.DataFrame":
        """Return the terms as a table: one row a term; coefficient, lower, upper, unit (SI), state, because."""
        import pandas as pd  # noqa: PLC0415  pandas costs most of a second and is wanted only here

        columns = ("coefficient", "lower", "upper", "unit", "state", "because")
        rows = {name: [getattr(term, column) for column in columns] for name, term in self.terms.items()}
        return pd.DataFrame.from_dict(rows, orient="index", columns=list(columns)).rename_axis("term")

    def _repr_html_(self) -> str:
        return str(self.to_frame().to_html())
