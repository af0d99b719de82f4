"""One channel, evenly clocked, in SI units, in runs between gaps."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import ClassVar

from stillbench.foundation.arrays import BoolArray, FloatArray
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.sensor_log import SideSeries


@dataclass(frozen=True)
class Run:
    """A stretch of evenly spaced samples.

    Attributes
    ----------
    first, last : int
        ``values[first:last]`` of the record.
    start : float
        Seconds from the first sample of the log to the first sample of the run.
    """

    first: int
    last: int
    start: float

    @property
    def n_samples(self) -> int:
        """Number of samples."""
        return self.last - self.first


@dataclass(frozen=True)
class Clock:
    """How the time axis was found.

    Attributes
    ----------
    source : str
        ``stamps``, ``declared rate`` or ``array``.
    jitter : float
        Standard deviation of the stamps about an even grid, s.
    longest_gap : float
        s; 0 when there is none.
    missing : int
        Samples of the even grid that have no row, gaps included.
    runs : (n, 2) tuple of pairs
        Start and stop of each run, seconds from the first sample.
    """

    source: str
    jitter: float
    longest_gap: float
    missing: int
    runs: tuple[tuple[float, float], ...]

    __json_names__: ClassVar[Mapping[str, str]] = {"jitter": "jitter_s", "longest_gap": "longest_gap_s"}


@dataclass(frozen=True)
class FrontEndModel:
    """How readings become a rate: ``rate = (reading - zero) / scale_factor``.

    Attributes
    ----------
    zero : float
        In the unit of the reading, SI.
    scale_factor : float
        SI reading per SI rate.
    relative_uncertainty : float
        Standard, of the scale factor: a factor common to every term and verdict.
    text : str
        As declared.
    """

    zero: float
    scale_factor: float
    relative_uncertainty: float
    text: str


@dataclass(frozen=True)
class Record:
    """One channel on an even grid.

    Attributes
    ----------
    label : str
    quantity : str
        Name of a Quantity.
    unit_text : str
        The unit the log was declared in (or that the front end gives).
    values : (n,) float array
        SI, runs one after the other; short holes are NaN until screening fills them.
    missing : (n,) bool array
        True where the log has no usable row.
    sample_interval : float
        s.
    runs : tuple of Run
    clock : Clock
    increments : bool
        True when the log holds angle or velocity increments (only then is there quantization noise in the sense of
        IEEE Std 952).
    front_end : FrontEndModel or None
    findings : tuple of Finding
        Of the clock and the reader.
    limits : (float, float) or None
        Lowest and highest value the converter can give, SI.
    n_rows : int
        Rows that the log offers for this channel, before anything is left out.
    known_input : float
        What the sensor feels at rest (Earth rate, gravity) as far as the log sheet says, SI: no part of its bias.
    step : float or None
        Of the converter as declared, SI.
    side : tuple of SideSeries
        On their own clock; ``logs/side.py`` brings them to the instants of the record.
    """

    label: str
    quantity: str
    unit_text: str
    values: FloatArray
    missing: BoolArray
    sample_interval: float
    runs: tuple[Run, ...]
    clock: Clock
    increments: bool = False
    front_end: FrontEndModel | None = None
    findings: tuple[Finding, ...] = ()
    limits: tuple[float, float] | None = None
    n_rows: int = 0
    known_input: float = 0.0
    step: float | None = None
    side: tuple[SideSeries, ...] = ()

    @property
    def n_samples(self) -> int:
        """Samples on the grid, filled ones included."""
        return sum(run.n_samples for run in self.runs)

    @property
    def duration(self) -> float:
        """Seconds from the first sample to the end of the last."""
        if not self.runs:
            return 0.0
        last = self.runs[-1]
        return last.start + last.n_samples * self.sample_interval - self.runs[0].start

    def present(self) -> FloatArray:
        """Return the values that are not missing; no copy where none is."""
        return self.values[~self.missing] if self.missing.any() else self.values

    def pieces(self) -> list[FloatArray]:
        """Return the values of each run, as views."""
        return [self.values[run.first : run.last] for run in self.runs]
