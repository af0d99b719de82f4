"""What the user declares of one log (TOML; flags override)."""

from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field

Text = Annotated[str, Field(min_length=1)]
Column = str | Annotated[int, Field(strict=True)]


class Section(BaseModel):
    """Base of the parts of a sheet: unknown keys are faults."""

    model_config = ConfigDict(extra="forbid", frozen=True)


class LogSection(Section):
    """How the file is laid out, where that is not to be found out by looking."""

    format: Text | None = None
    encoding: Text | None = None
    delimiter: Literal[",", ";", "\t", " ", "tab", "blank"] | None = None
    decimal: Literal[".", ","] | None = None
    head_lines: Annotated[int, Field(ge=0)] | None = None
    missing: tuple[str, ...] = ()
    line_pattern: Text | None = None
    dataset: Text | None = None
    sample_type: Literal["int8", "int16", "int24", "int32", "float32", "float64"] | None = None
    byte_order: Literal["little", "big"] = "little"
    interleaved: Annotated[int, Field(ge=1, le=4096)] | None = None
    head_bytes: Annotated[int, Field(ge=0)] | None = None
    offset_binary: bool = False
    bits: Annotated[int, Field(ge=1, le=32)] | None = None


class ClockSection(Section):
    """Where the time comes from."""

    column: Column | None = None
    unit: Literal["s", "ms", "us", "ns", "iso", "unix", "day-first", "month-first"] | None = None
    rate: Annotated[float, Field(strict=True, gt=0)] | None = None


class FrontEnd(Section):
    """The analog chain between the sensor and the number in the file."""

    zero: Text | None = None
    scale_factor: Text | None = None
    scale_factor_uncertainty: Text | None = None
    scale_factor_origin: Text | None = None
    sign: Literal["+", "-"] = "+"
    range: Text | None = None
    bits: Annotated[int, Field(ge=1, le=64)] | None = None
    codes: Literal["signed", "from zero"] | None = None
    reference: Text | None = None
    reference_nominal: Text | None = None


class ChannelSection(Section):
    """One data column."""

    column: Column | None = None
    unit: Text | None = None
    quantity: Text | None = None
    kind: Literal["rate", "increment"] = "rate"
    attitude: Text | None = None
    front_end: FrontEnd | None = None


class SideSection(Section):
    """A side channel such as temperature."""

    file: Text | None = None
    column: Column | None = None
    unit: Text | None = None
    time: Column | None = None
    time_unit: Literal["s", "ms", "us", "ns", "iso", "unix", "day-first", "month-first"] | None = None


class SensorSection(Section):
    """The unit under test."""

    designation: str | None = None
    serial: str | None = None
    kind: str | None = None
    axis: str | None = None


class ConditionsSection(Section):
    """Where and how the log was taken."""

    temperature: str | None = None
    latitude: str | None = None
    attitude: str | None = None
    supply: str | None = None
    excitation: str | None = None
    wheel_frequency: str | None = None
    mains: str | None = None
    procedure: str | None = None
    operator: str | None = None
    equipment: tuple[str, ...] = ()


class ScreeningSection(Section):
    """Choices of the screening stage."""

    exclusions: bool = True


class ReportSection(Section):
    """What stands on the first page of the report."""

    number: str | None = None
    issue: str | None = None
    client: str | None = None


class LogSheet(Section):
    """All that is declared of one log."""

    log: LogSection = LogSection()
    clock: ClockSection = ClockSection()
    channel: dict[str, ChannelSection] = Field(default_factory=dict)
    side: dict[str, SideSection] = Field(default_factory=dict)
    sensor: SensorSection = SensorSection()
    conditions: ConditionsSection = ConditionsSection()
    screening: ScreeningSection = ScreeningSection()
    report: ReportSection = ReportSection()
