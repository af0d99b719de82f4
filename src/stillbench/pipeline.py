"""The main job from a log to a result: the only file that knows every stage."""

import os
from collections.abc import Mapping, Sequence
from dataclasses import replace
from datetime import UTC, datetime
from importlib import metadata
from pathlib import Path
from typing import Any

import numpy as np

from stillbench.assessment.converter_part import converter_finding, corrected_terms, limited_span
from stillbench.assessment.evidence import Evidence
from stillbench.assessment.judge import judge, load_specification, require_applicable, spoken_unit
from stillbench.assessment.uncertainty import normal_quantile, with_common_factor
from stillbench.deviation.averaging import PER_DECADE
from stillbench.deviation.intervals import bound_deviation, mixture_of
from stillbench.deviation.overlapping import estimate_deviation
from stillbench.foundation.errors import ClockError, NothingToMeasureError, RecordTooShortError, UsageError
from stillbench.foundation.progress import SILENT, Progress
from stillbench.foundation.scratch import blocks
from stillbench.foundation.toml_source import load_toml
from stillbench.foundation.units import parse_unit
from stillbench.identification.identify import Identification, identify_noise
from stillbench.identification.remarks import POOR_FIT
from stillbench.logs.clock import Grid, audit_clock
from stillbench.logs.cut import clip_log, cut_record, own_rows
from stillbench.logs.front_end import convert
from stillbench.logs.read import read_log
from stillbench.logs.side import side_summary
from stillbench.scale.calibrate import calibrate_scale
from stillbench.scale.plan import read_plan, relative_of
from stillbench.screening.converter import REFUSED
from stillbench.screening.screen import levels_differ, screen
from stillbench.version import __version__
from stillbench.vocabulary.characterization import (
    Bias,
    ChannelResult,
    Characterization,
    Provenance,
    Setting,
    Timeline,
)
from stillbench.vocabulary.converter_share import ConverterShare
from stillbench.vocabulary.log_sheet import LogSheet
from stillbench.vocabulary.noise_model import NoiseModel, NoiseTerm
from stillbench.vocabulary.quantity import QUANTITIES, Quantity
from stillbench.vocabulary.record import Record
from stillbench.vocabulary.scale_factor import ScaleFactor
from stillbench.vocabulary.screened_record import ScreenedRecord
from stillbench.vocabulary.sensor_log import SensorLog, Source
from stillbench.vocabulary.specification import Specification

LIBRARIES = ("numpy", "scipy", "pandas", "pyarrow")
"""Those whose version can move a number."""
TIMELINE_SPANS = 900
COVERAGES = (0.5, 0.999)
READINGS = ("voltage", "count")
CLIPPED_PERCENT = 0.1
"""Of the samples at the rails from which the white noise reads low by more than its error in a night."""


def load_log_sheet(path: Path) -> LogSheet:
    """Read a log sheet (TOML).

    Raises
    ------
    TextFileError
        With all faults, their lines and nearest names.
    """
    sheet = load_toml(path, LogSheet, "log sheet")
    # Files that a sheet names lie beside it.
    beside = {
        name: section.model_copy(update={"file": str(path.parent / section.file)})
        for name, section in sheet.side.items()
        if section.file is not None and (path.parent / section.file).exists()
    }
    return sheet.model_copy(update={"side": {**sheet.side, **beside}}) if beside else sheet


def characterize(
    log: Any,  # noqa: ANN401  a path, an array, a series, a frame or a mapping of columns
    *,
    channels: Sequence[str] = (),
    unit: str | Mapping[str, str] | None = None,
    rate: float | None = None,
    time: str | int | None = None,
    time_unit: str | None = None,
    log_sheet: LogSheet | Path | str | None = None,
    specification: Specification | Path | str | None = None,
    start: str | float | None = None,
    stop: str | float | None = None,
    exclude: Sequence[str] = (),
    coverage: float = 0.95,
    report_unit: str | None = None,
    made_at: str | None = None,
    exclusions: bool = True,
    keep: Mapping[str, str] | None = None,
    name: str = "array",
    selfcheck: str = "not run",
    converter_log: Any = None,  # noqa: ANN401  as for log
    progress: Progress = SILENT,
) -> Characterization:
    """Characterize the noise of a log taken at rest, and judge it where a specification is given.

    Parameters
    ----------
    log : path, array, pandas Series or DataFrame, or mapping of column name to array
        A file (delimited text, plain, .gz or one file in a .zip; .npy; .npz) or the samples themselves.
    channels : sequence of str
        Columns by head or number; ``all`` for every one that has a unit. May be left out when there is one only.
    unit : str or mapping of channel to str
        Unit of the samples, such as ``deg/s``; required unless the log sheet declares it.
    rate : float, optional
        Hz, where there are no stamps.
    time, time_unit : str, optional
        Time column and its unit (s, ms, us, ns, iso, unix); ``time="none"`` ignores stamps.
    log_sheet : LogSheet or path, optional
    specification : Specification or path, optional
    start, stop : str or float, optional
        Seconds from the start, clock time, or ``row:N``.
    exclude : sequence of str
        Spans ``T1:T2`` to leave out.
    coverage : float
        Of two-sided intervals, 0.5 to 0.999.
    report_unit : str, optional
        Unit of deviations and bias in reports.
    made_at : str, optional
        ISO 8601; otherwise SOURCE_DATE_EPOCH, otherwise the clock.
    exclusions : bool
        Whether screening may leave samples out.
    keep : mapping of finding kind to reason
        Findings overruled.
    name : str
        Of data that are not a file.
    selfcheck : str
        Outcome of the self-check, which stands in the result.
    converter_log : as ``log``, optional
        Of the converter alone (input shorted or terminated), with the same columns and units: its part in the noise is shown
        and taken off in variance.
    progress : Progress

    Returns
    -------
    Characterization
        SI throughout; ``channels`` holds one result for each channel.

    Raises
    ------
    StillbenchError
        One line that says what was found, what was wanted, and the way out.
    """
    if not COVERAGES[0] < coverage <= COVERAGES[1]:
        raise UsageError(
            f"the coverage is {coverage:g}", f"a probability above {COVERAGES[0]} and up to {COVERAGES[1]}"
        )
    sheet = (
        log_sheet if isinstance(log_sheet, LogSheet) else load_log_sheet(Path(log_sheet)) if log_sheet else LogSheet()
    )
    spec = (
        specification
        if isinstance(specification, Specification)
        else load_specification(Path(specification))
        if specification
        else Specification()
    )
    stamp = made_at_text(made_at)
    units = {"": unit} if isinstance(unit, str) else dict(unit or {})
    first, last = (None if instant is None else str(instant) for instant in (start, stop))
    exclusions = exclusions and sheet.screening.exclusions
    sensor_log = read_log(
        log,
        sheet=sheet,
        channels=channels,
        units=units,
        rate=rate,
        time=time,
        time_unit=time_unit,
        name=name,
        progress=progress,
    )
    sensor_log, grid = _audited(sensor_log, first, last)
    quantities = [_quantity_of(sensor_log, channel.label, sheet, grid) for channel in sensor_log.channels]
    require_applicable(spec, quantities)
    labels = tuple(channel.label for channel in sensor_log.channels)
    spoken = tuple(channel.unit.text for channel in sensor_log.channels)
    if report_unit is not None:
        for quantity in quantities:
            report_unit = spoken_unit(report_unit, quantity)
    results: list[ChannelResult] = []
    skipped: list[str] = []
    # Channels are let go one by one, so that a long log with many of them needs the memory of few.
    waiting = list(sensor_log.channels)
    sensor_log = replace(sensor_log, channels=())
    for label in labels:
        own, words = own_rows(replace(sensor_log, channels=(waiting.pop(0),)))
        skipped += [words] if words else []
        try:
            record = cut_record(
                own,
                label,
                sheet=sheet,
                start=first,
                stop=last,
                exclude=exclude,
                grid=audit_clock(own) if words else grid,
            )
            del own
            screened = screen(record, exclusions=exclusions, keep=keep, progress=progress)
        except (NothingToMeasureError, RecordTooShortError) as error:
            # Asked for by name a dead channel is an error; among all of them it is a remark.
            if "all" not in channels:
                raise
            skipped.append(f"channel {label!r} left out: {error.found}")
            continue
        found = _characterize_record(
            record, screened, spec, coverage=coverage, report_unit=report_unit, progress=progress
        )
        del record, screened
        if converter_log is not None:
            alone = read_log(
                converter_log,
                sheet=sheet,
                channels=(label,),
                units=units,
                rate=rate,
                time=time,
                time_unit=time_unit,
                name="converter log",
                progress=progress,
            )
            found = _with_converter(found, alone, sheet, coverage=coverage, progress=progress)
        results.append(found)
    if not results:
        raise NothingToMeasureError(
            f"no channel can be characterized ({'; '.join(skipped)})", "a signal with noise in it"
        )
    settings: dict[str, Setting] = {
        "channels": labels,
        "units": spoken,
        "understood": (*sensor_log.understood, *skipped),
        "from": first,
        "to": last,
        "exclude": tuple(exclude),
        "exclusions": exclusions,
        "keep": tuple(f"{kind}: {reason}" for kind, reason in (keep or {}).items()),
        "coverage": coverage,
        "points_per_decade": PER_DECADE,
        "specification": spec.specification.title,
        "specification_issue": spec.specification.issue,
        "converter_log": results[0].converter.source.name if results[0].converter else None,
    }
    libraries = {library: metadata.version(library) for library in LIBRARIES}
    return Characterization(
        stamp,
        Provenance(__version__, libraries, settings, selfcheck),
        sensor_log.source,
        _identification(sheet),
        tuple(results),
    )


def _audited(log: SensorLog, first: str | None, last: str | None) -> tuple[SensorLog, Grid]:
    """Return a log with its grid; where only a part of it has a clock, the part that is asked for."""
    try:
        return log, audit_clock(log)
    except ClockError:
        ends = [end for end in (first, last) if end is not None]
        if not ends or any(end.startswith("row:") for end in ends):  # rows would be counted within the part
            raise
        log = clip_log(log, first, last)
        return log, audit_clock(log)


def made_at_text(given: str | None) -> str:
    """Return the time of making as ISO 8601 in UTC: as given, from SOURCE_DATE_EPOCH, or now.

    Raises
    ------
    UsageError
        When what is given is no date-time.
    """
    epoch = os.environ.get("SOURCE_DATE_EPOCH")
    try:
        if given is not None:
            moment = datetime.fromisoformat(given)
            moment = moment if moment.tzinfo else moment.replace(tzinfo=UTC)
        elif epoch:
            moment = datetime.fromtimestamp(int(epoch), UTC)
        else:
            moment = datetime.now(UTC)
    except (ValueError, OverflowError) as error:
        raise UsageError(
            f"the time of making is {given or epoch!r}", "an ISO date-time such as 2026-03-01T06:30:00+00:00"
        ) from error
    return moment.astimezone(UTC).isoformat(timespec="seconds")


def _quantity_of(log: SensorLog, label: str, sheet: LogSheet, grid: Grid) -> Quantity:
    channel = next(channel for channel in log.channels if channel.label == label)
    section = sheet.channel.get(label)
    return convert(channel, section.front_end if section else None, grid.sample_interval).quantity


def _characterize_record(
    record: Record,
    screened: ScreenedRecord,
    specification: Specification,
    *,
    coverage: float,
    report_unit: str | None,
    progress: Progress,
) -> ChannelResult:
    used = screened.record
    quantity = QUANTITIES[record.quantity]
    progress.stage(f"curve of {record.label}")
    curve = estimate_deviation(used, progress=progress)
    progress.stage(f"fit of {record.label}")
    found = identify_noise(used, curve, coverage=coverage, findings=screened.findings, progress=progress)
    findings = (*screened.findings, *found.findings)
    relative = record.front_end.relative_uncertainty if record.front_end else 0.0
    z = normal_quantile(0.5 + coverage / 2.0)
    unscreened: Mapping[str, NoiseTerm] = {}
    if screened.unscreened is not None:
        plain = identify_noise(screened.unscreened, curve, coverage=coverage, findings=screened.findings)
        unscreened = _widened(plain.model, relative, z).terms
    bounded = bound_deviation(
        curve,
        found.model,
        sample_interval=used.sample_interval,
        run_lengths=[run.n_samples for run in used.runs],
        coverage=coverage,
        mixture=replace(found.fitted.mixture(), slope=mixture_of(found.model, used.sample_interval).slope),
        variance=found.fitted.allan_variance(np.rint(curve.tau / used.sample_interval).astype(np.int64)),
    )
    same_level = not levels_differ(screened.findings)
    bias, bias_error = _bias(used, found, z, same_level=same_level)
    evidence = Evidence(
        used,
        found.model,
        found.fitted,
        bias,
        bias_error,
        relative,
        trusted=not _poor(found),
        same_level=same_level,
        clipped=any(
            finding.kind == "saturation" and (finding.measure or 0.0) > CLIPPED_PERCENT for finding in screened.findings
        ),
        coarse=any(
            finding.kind == "coarse_converter" and (finding.measure or 0.0) < REFUSED for finding in screened.findings
        ),
    )
    verdicts = judge(specification, evidence)
    low, high = with_common_factor(bias.value, bias.lower, bias.upper, relative, z)
    return ChannelResult(
        record.label,
        record.quantity,
        quantity.unit,
        report_unit or quantity.curve_unit or record.unit_text,
        record.unit_text,
        used.sample_interval,
        screened.n_offered,
        screened.n_used,
        record.duration,
        Bias(bias.value, low, high),
        used.clock,
        _timeline(record),
        findings,
        bounded,
        _widened(found.model, relative, z),
        verdicts,
        relative,
        record.front_end.text if record.front_end else "",
        unscreened,
        {series.name: side_summary(series, record) for series in record.side},
    )


def _with_converter(
    found: ChannelResult, log: SensorLog, sheet: LogSheet, *, coverage: float, progress: Progress
) -> ChannelResult:
    """Put the converter's own noise beside that of sensor and converter together."""
    try:
        record = screen(cut_record(log, log.channels[0].label, sheet=sheet), progress=progress).record
    except (NothingToMeasureError, RecordTooShortError) as error:
        raise NothingToMeasureError(
            f"the converter's log shows nothing: {error.found}",
            "a log of the converter with its input shorted or terminated, in which its noise is seen",
            "leave --converter-log out if the converter stands still: its noise is then below one step",
        ) from error
    curve = estimate_deviation(record, progress=progress)
    alone = identify_noise(record, curve, coverage=coverage, progress=progress).model
    span = limited_span(found.curve, curve)
    sensor = corrected_terms(found.noise, alone)
    finding = converter_finding(found, sensor, span, log.source.name)
    share = ConverterShare(log.source, curve, alone, sensor, span[0] if span else None, span[1] if span else None)
    findings = found.findings if finding is None else (*found.findings, finding)
    return replace(found, findings=findings, converter=share)


def _poor(found: Identification) -> bool:
    return found.model.goodness > POOR_FIT


def _bias(record: Record, found: Identification, z: float, *, same_level: bool) -> tuple[Bias, float]:
    """Mean of the log (of its longest run where the sensor was turned) less the known input, with the deviation at its length.

    For white noise that is the standard error of the mean. Flicker and walk move the mean itself from one log to the next,
    by root two times this.
    """
    runs = record.runs if same_level else (max(record.runs, key=lambda run: run.n_samples),)
    origin, total, count = record.values[runs[0].first], 0.0, 0
    for run in runs:
        values, absent = record.values[run.first : run.last], record.missing[run.first : run.last]
        values = values[~absent] if absent.any() else values
        total += sum(float(np.sum(values[part] - origin)) for part in blocks(values.size))
        count += values.size
    mean = float(origin + total / count) - record.known_input
    error = found.fitted.amplitude(found.fitted.variance_weights(count))
    return Bias(mean, mean - z * error, mean + z * error), error


def _widened(model: NoiseModel, relative: float, z: float) -> NoiseModel:
    """Join the uncertainty of the scale factor, common to all terms, to their intervals."""
    if relative == 0:
        return model
    terms = {}
    for name, term in model.terms.items():
        if term.coefficient is None or term.lower is None or term.upper is None:
            terms[name] = term
            continue
        lower, upper = with_common_factor(term.coefficient, term.lower, term.upper, relative, z)
        terms[name] = replace(term, lower=lower, upper=upper)
    return replace(model, terms=terms)


def _timeline(record: Record) -> Timeline:
    """Extremes and mean of 900 equal spans of all samples of the record, those left out later included."""
    interval = record.sample_interval
    first, last = record.runs[0], record.runs[-1]
    end = last.start + last.n_samples * interval
    width = (end - first.start) / min(TIMELINE_SPANS, record.values.size)
    parts = []
    for run in record.runs:
        values = record.values[run.first : run.last]
        # The spans of the whole log that this run takes part in; a run makes at least one of its own.
        edges = np.arange(
            np.floor((run.start - first.start) / width),
            np.ceil((run.start + values.size * interval - first.start) / width),
        )
        starts = np.unique(
            np.clip(np.ceil((first.start + edges * width - run.start) / interval - 1e-9), 0, values.size - 1).astype(
                np.int64
            )
        )
        counts = np.diff(np.append(starts, values.size))
        middle = run.start + (starts + (counts - 1) / 2.0) * interval
        absent = record.missing[run.first : run.last]
        low, high, known = values, values, counts
        if absent.any():
            low, high = np.where(absent, np.inf, values), np.where(absent, -np.inf, values)
            known = np.add.reduceat((~absent).astype(np.int64), starts)
            values = np.where(absent, 0.0, values)
        filled = known > 0
        mean = np.add.reduceat(values, starts)[filled] / known[filled]
        columns = (np.minimum.reduceat(low, starts)[filled], mean, np.maximum.reduceat(high, starts)[filled])
        parts.append((middle[filled], *columns))
    return Timeline(*(np.concatenate([part[i] for part in parts]) for i in range(4)))


def _identification(sheet: LogSheet) -> dict[str, dict[str, Setting]]:
    """Return what the log sheet says of unit, conditions and report; empty parts left out."""
    parts: dict[str, dict[str, Setting]] = {}
    for name in ("report", "sensor", "conditions"):
        section = getattr(sheet, name)
        said = {key: value for key, value in section.model_dump().items() if value not in (None, ())}
        if said:
            parts[name] = said
    return parts


def scale_factor_of(
    log: Any,  # noqa: ANN401  as for characterize
    *,
    sheet: LogSheet | None = None,
    channel: str | None = None,
    units: Mapping[str, str] | None = None,
    rate: float | None = None,
    time: str | int | None = None,
    time_unit: str | None = None,
    turns: str | None = None,
    rates: str | None = None,
    positions: str | None = None,
    applied_uncertainty: str | None = None,
    time_base: str | None = None,
    latitude: str | None = None,
    attitude: str | None = None,
    coverage: float = 0.95,
    start: str | None = None,
    stop: str | None = None,
    progress: Progress = SILENT,
) -> tuple[ScaleFactor, Source]:
    """Find the scale factor of a channel from a log of known turns, rates or positions.

    Parameters
    ----------
    log, sheet, channel, units, rate, time, time_unit, start, stop, progress
        As for ``characterize``.
    turns, rates, positions : str, optional
        One of them: what was applied, in its order, such as ``"90 deg, -90 deg"``.
    applied_uncertainty : str, optional
        Standard, in a unit of what was applied.
    time_base : str, optional
        Relative standard uncertainty of the sampling interval.
    latitude, attitude : str, optional
        For the Earth rate in ``rates`` and gravity in ``positions``.
    coverage : float

    Returns
    -------
    ScaleFactor, Source

    Raises
    ------
    StillbenchError
    """
    plan = read_plan(turns, rates, positions, latitude=latitude, attitude=attitude)
    if not COVERAGES[0] < coverage <= COVERAGES[1]:
        raise UsageError(
            f"the coverage is {coverage:g}", f"a probability above {COVERAGES[0]} and up to {COVERAGES[1]}"
        )
    sensor_log = read_log(
        log,
        sheet=sheet,
        channels=(channel,) if channel else (),
        units=units,
        rate=rate,
        time=time,
        time_unit=time_unit,
        progress=progress,
    )
    if len(sensor_log.channels) != 1:
        raise UsageError(f"{len(sensor_log.channels)} channels are chosen", "one", "name it with --channel")
    plain = LogSheet() if sheet is None else sheet.model_copy(update={"channel": {}})
    record = cut_record(sensor_log, sensor_log.channels[0].label, sheet=plain, start=start, stop=stop)
    if record.quantity not in READINGS:
        raise UsageError(
            f"channel {record.label!r} is in {record.unit_text}, a quantity already", "readings in volts or counts"
        )
    progress.stage("steps")
    result = calibrate_scale(
        record,
        plan.method,
        plan.applied,
        quantity_unit=plan.quantity_unit,
        applied_uncertainty=plan.uncertainty_of(applied_uncertainty),
        time_base=relative_of(time_base),
        known_input=plan.known_input,
        coverage=coverage,
    )
    return result, sensor_log.source


def display_unit(channel: ChannelResult) -> tuple[str, float]:
    """Return the log's own unit and its factor to SI."""
    return channel.log_unit, parse_unit(channel.log_unit).factor
