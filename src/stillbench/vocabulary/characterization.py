"""Everything known about one log after the work is done: no raw samples."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import ClassVar

from stillbench.foundation.arrays import FloatArray
from stillbench.vocabulary.converter_share import ConverterShare
from stillbench.vocabulary.deviation_curve import DeviationCurve
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.noise_model import NoiseModel, NoiseTerm
from stillbench.vocabulary.record import Clock
from stillbench.vocabulary.sensor_log import Source
from stillbench.vocabulary.verdict import FAILS, UNDECIDED, Verdict

SCHEMA = "stillbench/characterization"
SCHEMA_VERSION = 1

Scalar = str | float | int | bool | None
Setting = Scalar | tuple[Scalar, ...] | Mapping[str, Scalar]


@dataclass(frozen=True)
class Timeline:
    """Envelope of the log for drawing: extremes and mean of equal spans. Seconds from the first sample; SI."""

    time: FloatArray
    minimum: FloatArray
    mean: FloatArray
    maximum: FloatArray

    __json_names__: ClassVar[Mapping[str, str]] = {"time": "time_s"}


@dataclass(frozen=True)
class SideSummary:
    """A side channel over the log: its course, and how far it supports the log.

    Attributes
    ----------
    unit : str
        SI unit of the course.
    spoken_unit : str
        As declared.
    covered : float
        Share of the log over which samples on both sides support it.
    course : Timeline
    """

    unit: str
    spoken_unit: str
    covered: float
    course: Timeline


@dataclass(frozen=True)
class Bias:
    """Mean of the log with its interval, SI."""

    value: float
    lower: float
    upper: float


@dataclass(frozen=True)
class ChannelResult:
    """One channel, everything known.

    Attributes
    ----------
    label, quantity : str
    unit : str
        SI unit of samples.
    report_unit : str
        Unit of deviations and bias in the report.
    log_unit : str
        Unit of the log (after the front end), used for its timeline.
    sample_interval, duration : float
        s.
    n_samples, n_used : int
        On the grid; with a value of their own in the numbers.
    bias : Bias
    clock : Clock
    timeline : Timeline
    findings : tuple of Finding
    curve : DeviationCurve
    noise : NoiseModel
    verdicts : tuple of Verdict
    scale_factor_uncertainty : float
        Relative standard uncertainty, a common factor of every term.
    front_end : str
        As declared; empty when there is none.
    unscreened : mapping of term name to NoiseTerm
        The terms without the exclusions; empty when nothing was excluded.
    side : mapping
        Side channels.
    converter : ConverterShare or None
        Where a log of the converter alone was given.
    """

    label: str
    quantity: str
    unit: str
    report_unit: str
    log_unit: str
    sample_interval: float
    n_samples: int
    n_used: int
    duration: float
    bias: Bias
    clock: Clock
    timeline: Timeline
    findings: tuple[Finding, ...]
    curve: DeviationCurve
    noise: NoiseModel
    verdicts: tuple[Verdict, ...]
    scale_factor_uncertainty: float = 0.0
    front_end: str = ""
    unscreened: Mapping[str, NoiseTerm] = field(default_factory=dict)
    side: Mapping[str, SideSummary] = field(default_factory=dict)
    converter: ConverterShare | None = None

    __json_names__: ClassVar[Mapping[str, str]] = {"sample_interval": "sample_interval_s", "duration": "duration_s"}

    def _repr_html_(self) -> str:
        return f"<p><b>{_escaped(self.label)}</b></p>{self.noise._repr_html_()}"


@dataclass(frozen=True)
class Provenance:
    """What made the result.

    Attributes
    ----------
    stillbench : str
        Version.
    libraries : mapping of name to version
    settings : mapping of name to value
        All that was chosen, by flag or by default.
    selfcheck : str
        Outcome of the self-check.
    """

    stillbench: str
    libraries: Mapping[str, str]
    settings: Mapping[str, Setting]
    selfcheck: str


@dataclass(frozen=True)
class Characterization:
    """The result for one log: the content of result.json.

    Attributes
    ----------
    made_at : str
        ISO 8601, UTC.
    provenance : Provenance
    source : Source
    identification : mapping
        What the log sheet says of unit, conditions and report.
    channels : tuple of ChannelResult
    schema, version
        Of the JSON form.
    """

    made_at: str
    provenance: Provenance
    source: Source
    identification: Mapping[str, Mapping[str, Setting]]
    channels: tuple[ChannelResult, ...]
    schema: str = SCHEMA
    version: int = SCHEMA_VERSION

    @property
    def exit_code(self) -> int:
        """What the command line returns: 0, 3 when a requirement is not met, 4 when one is undecided and none is missed."""
        decisions = {verdict.decision for channel in self.channels for verdict in channel.verdicts}
        return 3 if FAILS in decisions else 4 if UNDECIDED in decisions else 0

    def _repr_html_(self) -> str:
        return "".join(channel._repr_html_() for channel in self.channels)


def _escaped(text: str) -> str:
    return text.replace("&", "&amp;").replace("<", "&lt;").replace(">", "&gt;")
