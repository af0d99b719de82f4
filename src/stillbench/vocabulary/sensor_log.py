"""One log as read: columns of numbers in the units of the file, and their stamps."""

from dataclasses import dataclass, field
from typing import Literal

from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.units import Unit

StampKind = Literal["local", "absolute", "counter"]


@dataclass(frozen=True)
class Source:
    """Where a log came from.

    Attributes
    ----------
    name : str
        File name without its folder, or a word for data handed in as an array.
    bytes : int
    sha256 : str
        Of the file as it lies on disk; of the samples for an array.
    rows : int
        Rows of data.
    format : str
        What it was understood to be.
    """

    name: str
    bytes: int
    sha256: str
    rows: int
    format: str


@dataclass(frozen=True)
class Stamps:
    """Time stamps.

    Attributes
    ----------
    seconds : (rows,) float array
        Seconds from the first stamp.
    column : str
        Which column they come from.
    unit : str
        One of s, ms, us, ns, iso, unix, day-first, month-first; empty for written stamps of which nothing need be declared.
    kind : str
        ``local`` for date-times without a zone (they may jump with daylight saving), ``absolute``, or ``counter``.
    origin : float or None
        Unix seconds (UTC for ``absolute``, the reading of the wall clock for ``local``) of the first stamp.
    resolution : float
        Smallest step the stamps can show, s.
    zone : float
        Seconds that the clock of the log is ahead of UTC (0 where its stamps have no zone).
    """

    seconds: FloatArray
    column: str
    unit: str
    kind: StampKind
    origin: float | None
    resolution: float
    zone: float = 0.0


@dataclass(frozen=True)
class Channel:
    """One column of the log.

    Attributes
    ----------
    label : str
        Name in the output.
    values : (rows,) float array
        In ``unit``.
    unit : Unit
        Declared.
    kind : str
        ``rate`` or ``increment``.
    reference : (rows,) float array or None
        Readings of the reference of a ratiometric output, in the unit of the channel.
    """

    label: str
    values: FloatArray
    unit: Unit
    kind: Literal["rate", "increment"] = "rate"
    reference: FloatArray | None = None


@dataclass(frozen=True)
class SideSeries:
    """A side channel on its own clock.

    Attributes
    ----------
    name : str
    unit : Unit
        Declared.
    seconds : (m,) float array
        From the first stamp of the log.
    values : (m,) float array
        SI.
    """

    name: str
    unit: Unit
    seconds: FloatArray
    values: FloatArray


@dataclass(frozen=True)
class SensorLog:
    """A log as read.

    Attributes
    ----------
    source : Source
    channels : tuple of Channel
    stamps : Stamps or None
    rate : float or None
        Declared sampling rate, Hz.
    understood : tuple of str
        What was concluded from the file, each with the flag that overrides it.
    restarts : tuple of int
        Rows (from 0) before which the logger was started again; without stamps the time between is not known.
    side : tuple of SideSeries
    """

    source: Source
    channels: tuple[Channel, ...]
    stamps: Stamps | None
    rate: float | None
    understood: tuple[str, ...] = field(default=())
    restarts: tuple[int, ...] = ()
    side: tuple[SideSeries, ...] = ()
