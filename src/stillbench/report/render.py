"""render_report: a Characterization as one HTML file."""

import json
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from stillbench.figures.deviation import draw_deviation, term_course
from stillbench.figures.spectrum import draw_residuals, draw_spectrum
from stillbench.figures.style import sheet
from stillbench.figures.svg import to_svg
from stillbench.figures.timeline import draw_timeline
from stillbench.foundation.rounding import significant
from stillbench.foundation.units import Unit, parse_unit
from stillbench.report import notes as margin
from stillbench.report.notes import POOR
from stillbench.report.page import markup, render_page
from stillbench.report.strip import strip
from stillbench.report.words import (
    bias_text,
    converter_rows,
    duration_text,
    instant_text,
    observed_terms,
    share_text,
    spoken_unit_of,
    term_label,
    term_rows,
    verdict_row,
)
from stillbench.vocabulary.characterization import ChannelResult, Characterization, SideSummary
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.noise_model import AMBIGUOUS, RESOLVED
from stillbench.vocabulary.quantity import role_of
from stillbench.vocabulary.verdict import CONFORMS, FAILS, Verdict

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

THRESHOLD = 1.959963984540054 * 2.0**0.5
SEEN_90 = (1.959963984540054 + 1.2815515655446004) * 2.0**0.5
TABLE_PER_DECADE = 3
MOST_TIMELINE_ROWS = 14
BAND_KINDS = ("low_pass", "poor_fit")
"""Findings that leave frequencies out, not samples."""
NO_JITTER = 1e-6
"""Of an interval: rounding of the stamps as numbers."""

IDENTIFICATION_LABELS = {
    "designation": "sensor",
    "serial": "serial number",
    "kind": "kind",
    "axis": "axis",
    "temperature": "temperature",
    "latitude": "latitude",
    "attitude": "attitude",
    "supply": "supply",
    "excitation": "excitation",
    "wheel_frequency": "wheel frequency",
    "mains": "mains",
    "procedure": "procedure",
    "operator": "operator",
    "equipment": "equipment",
    "client": "for",
}


@dataclass(frozen=True)
class _Figure:
    svg: str
    number: int
    caption: str
    notes: list[margin.Note]


def _shrink(figure: "Figure") -> None:
    """Keep a figure small in the file: short decimals suffice at this size."""
    figure.set_dpi(72)


def _drawn(name: str, title: str, height: float, draw: "Callable[[Axes], None]") -> str:
    with sheet(height) as (figure, axes):
        draw(axes)
        _shrink(figure)
        return str(markup(to_svg(figure, name, title)))


def specification_marks(verdicts: tuple[Verdict, ...], channel: ChannelResult) -> tuple[tuple[float, float, str], ...]:
    """Return the limits that can be drawn on the curve: averaging time s, deviation SI, words."""
    marks = []
    for verdict in verdicts:
        row = verdict_row(verdict)
        words = verdict.quantity.split(",")[0]
        limit = f"{row.limit} {row.printed_unit}"
        if words == "noise-limited resolution":
            at = _averaging_time(verdict.quantity)
            factor = SEEN_90 if "seen with 90 %" in verdict.quantity else THRESHOLD
            if at:
                marks.append((at, verdict.limit / factor, f"a resolution of {limit} allows this"))
            continue
        name = verdict.quantity.split(" (")[0].replace(" ", "_")
        role = role_of(name)
        if role is None or name not in channel.noise.terms:
            continue
        # White noise at its reading time; slower terms where their lines come into the figure.
        last = float(channel.curve.tau[-1])
        at = {"white": 1.0, "quantization": 3.0**0.5, "walk": last / 4.0, "ramp": last / 3.0}.get(role, last**0.5)
        at = float(np.clip(at, channel.curve.tau[0] * 1.5, channel.curve.tau[-1] / 1.5))
        course = term_course(role, verdict.limit, np.array([at]), channel.sample_interval)
        marks.append((at, float(course[0]), f"limit {limit} ({words.split(' (')[0]})"))
    return tuple(marks)


def _averaging_time(description: str) -> float | None:
    for part in description.split(","):
        if part.strip().endswith(" averages"):
            number, unit = part.strip().removesuffix(" averages").split(" ", 1)
            return float(number) * parse_unit(unit).factor
    return None


def _figures(channel: ChannelResult, key: str, first: int) -> dict[str, _Figure]:
    labels = {name: term_label(channel, name) for name in channel.noise.terms}
    marks = specification_marks(channel.verdicts, channel)
    percent = f"{100 * channel.curve.coverage:g} %"
    label = f"channel {channel.label}" if channel.label.isdecimal() else channel.label
    return {
        "deviation": _Figure(
            _drawn(
                f"{key}-deviation",
                f"Allan deviation of {label}",
                104,
                lambda axes: draw_deviation(axes, channel, labels, marks),
            ),
            first,
            f"Overlapping Allan deviation of {label} (circles) with its {percent} band, the fitted model (line) and its terms"
            " (dashed, dotted)."
            + (" Short bars: limits of the specification at their averaging time." if marks else ""),
            margin.deviation_notes(channel),
        ),
        "timeline": _Figure(
            _drawn(f"{key}-timeline", f"{label} over time", 58, lambda axes: draw_timeline(axes, channel)),
            first + 1,
            f"{label}: mean and extremes of {channel.timeline.time.size} spans. Triangles: short edits; grey: spans left out.",
            margin.timeline_notes(channel),
        ),
        "residuals": _Figure(
            _drawn(
                f"{key}-residuals", f"residuals of the fit of {label}", 48, lambda axes: draw_residuals(axes, channel)
            ),
            first + 2,
            "Residuals of the fit: binned powers of the cosine transform over the model, as standard scores.",
            margin.fit_notes(channel),
        ),
        "spectrum": _Figure(
            _drawn(f"{key}-spectrum", f"spectrum of {label}", 66, lambda axes: draw_spectrum(axes, channel)),
            first + 3,
            "Spectrum, two-sided, from the same powers, with the fitted model (line). A data sheet's one-sided density is larger"
            " by the square root of two.",
            [],
        ),
    }


def deviation_picture(channel: ChannelResult) -> bytes:
    """Return the Allan deviation of a channel as a PNG on white paper, for pages that cannot hold SVG."""
    import io  # noqa: PLC0415  wanted only here

    labels = {name: term_label(channel, name) for name in channel.noise.terms}
    buffer = io.BytesIO()
    with sheet(104) as (figure, axes):
        draw_deviation(axes, channel, labels, specification_marks(channel.verdicts, channel))
        figure.savefig(buffer, format="png", dpi=150, facecolor="white", metadata={"Software": None})
    return buffer.getvalue()


def _curve_table(channel: ChannelResult) -> list[tuple[str, ...]]:
    """Three points a decade of the curve, in the report unit."""
    curve, unit = channel.curve, parse_unit(channel.report_unit)
    wanted = np.geomspace(
        curve.tau[0], curve.tau[-1], max(2, round(TABLE_PER_DECADE * np.log10(curve.tau[-1] / curve.tau[0])) + 1)
    )
    rows: list[tuple[str, ...]] = []
    for i in sorted({int(np.argmin(np.abs(np.log(curve.tau / at)))) for at in wanted}):
        columns = (curve.deviation, curve.lower, curve.upper, curve.model)
        number = [float("nan") if column is None else float(column[i]) / unit.factor for column in columns]
        edf = "" if curve.edf is None else significant(float(curve.edf[i]))
        rows.append(
            (
                significant(float(curve.tau[i])),
                significant(float(number[0])),
                significant(number[1]),
                significant(number[2]),
                str(int(curve.pairs[i])),
                edf,
                f"{100 * float(curve.classical_error[i]):.2g} %",
                significant(number[3]),
            )
        )
    return rows


def _timeline_table(channel: ChannelResult) -> list[tuple[str, ...]]:
    timeline, unit = channel.timeline, parse_unit(channel.log_unit)
    count = min(MOST_TIMELINE_ROWS, timeline.time.size)
    rows = []
    for part in np.array_split(np.arange(timeline.time.size), count):
        spread = float(timeline.maximum[part].max() - timeline.minimum[part].min()) / unit.factor
        decimals = max(0, 3 - int(np.floor(np.log10(spread)))) if spread > 0 else 6
        numbers = (timeline.minimum[part].min(), timeline.mean[part].mean(), timeline.maximum[part].max())
        rows.append(
            (instant_text(float(timeline.time[part[0]])), *(f"{float(n) / unit.factor:.{decimals}f}" for n in numbers))
        )
    return rows


def _spectrum_table(channel: ChannelResult) -> list[tuple[str, ...]]:
    bins, unit = channel.noise.bins, parse_unit(channel.report_unit)
    groups = np.floor(2.0 * np.log10(bins.frequency)).astype(int)
    rows: list[tuple[str, ...]] = []
    for group in np.unique(groups):
        part = groups == group
        dof = bins.dof[part]
        power, model = (float(np.sum(dof * column[part]) / dof.sum()) ** 0.5 for column in (bins.power, bins.model))
        rows.append(
            (
                f"{significant(float(bins.frequency[part][0]), 2)} to {significant(float(bins.frequency[part][-1]), 2)}",
                str(int(dof.sum())),
                significant(power / unit.factor),
                significant(model / unit.factor),
            )
        )
    return rows


def _finding_row(finding: Finding) -> dict[str, str]:
    when = instant_text(finding.start)
    if finding.stop is not None and finding.start is not None and finding.stop > finding.start:
        when += f" to {instant_text(finding.stop)}"
    whole = finding.measure is not None and finding.measure == round(finding.measure)
    number = "" if finding.measure is None else f"{finding.measure:.0f}" if whole else significant(finding.measure)
    size = f"{number} {finding.unit}".strip() if number else ""
    return {
        "kind": finding.kind.replace("_", " "),
        "when": when or "whole log",
        "size": size,
        "excluded": "band cut"
        if finding.kind in BAND_KINDS and finding.excluded
        else "yes"
        if finding.excluded
        else "no",
        "because": finding.because,
        "disposition": finding.disposition,
    }


def _strip_facts(result: Characterization) -> list[tuple[str, str]]:
    sensor = result.identification.get("sensor", {})
    channel = result.channels[0]
    facts = []
    parts = [str(sensor[key]) for key in ("designation", "kind") if sensor.get(key)]
    if sensor.get("serial"):
        parts.append(f"serial {sensor['serial']}")
    if parts:
        facts.append(("Sensor", " ".join(parts)))
    if channel.front_end:
        facts.append(("Output", channel.front_end))
    facts.append(
        ("Log", f"{result.source.name}, {duration_text(channel.duration)} at {1.0 / channel.sample_interval:.6g} Hz")
    )
    facts.append(("Used", f"{share_text(channel.n_used, channel.n_samples)} samples"))
    return facts


def _title(result: Characterization) -> str:
    sensor = result.identification.get("sensor", {})
    unit = " ".join(str(sensor[key]) for key in ("kind", "designation") if sensor.get(key))
    axis = f", axis {sensor['axis']}" if sensor.get("axis") else ""
    return f"{unit[0].upper()}{unit[1:]}{axis}: log at rest" if unit else f"Log at rest: {result.source.name}"


def _subtitle(result: Characterization) -> str:
    report = result.identification.get("report", {})
    conditions = result.identification.get("conditions", {})
    parts = []
    if report.get("number"):
        parts.append(f"Report {report['number']}" + (f", issue {report['issue']}" if report.get("issue") else ""))
    if report.get("client"):
        parts.append(str(report["client"]))
    if conditions.get("procedure"):
        parts.append(f"Procedure {conditions['procedure']}")
    return ". ".join([*parts, f"Made {result.made_at}"]) + "."


def _flat(sections: Mapping[str, Mapping[str, Any]]) -> list[tuple[str, str]]:
    rows = []
    for section in sections.values():
        for key, value in section.items():
            if key in IDENTIFICATION_LABELS:
                text = ", ".join(str(item) for item in value) if isinstance(value, tuple | list) else str(value)
                rows.append((IDENTIFICATION_LABELS[key], text))
    return rows


def _caution(result: Characterization) -> list[str]:
    sensor = str(result.identification.get("sensor", {}).get("kind", "")).lower()
    general = (
        "These figures describe one log at rest. They are no release for guidance, navigation or any use in which an error can"
        " hurt someone: that needs tests under motion, temperature and vibration, and the practice of a qualified person under"
        " the codes that apply where it is used."
    )
    cautions = [general]
    if any(word in sensor for word in ("wheel", "spin", "rotor")):
        cautions.append(
            "A spinning wheel stores energy and its excitation carries voltages that can injure: follow the maker's run-up and"
            " run-down, keep covers closed, and leave work inside to licensed people under local codes."
        )
    return cautions


BLIND_SPOTS = (
    ("scale factor and its linearity", "needs known rates or accelerations"),
    ("resolution in the sense of IEEE Std 528", "needs applied input steps; here only the noise-limited resolution"),
    ("turn-on to turn-on spread", "needs several turn-ons"),
    ("temperature coefficients", "need a temperature course that is known not to go with time"),
    ("sensitivity to acceleration, vibration and magnetic fields", "needs them applied"),
    ("anything slower than the log", "a trend of one night need not go on, and may be part of something periodic"),
)


def _accepted_words(channel: ChannelResult) -> str:
    sets = [" + ".join(name.replace("_", " ") for name in chosen) for chosen in channel.noise.accepted]
    return " or ".join(sets)


def _side_words(summary: SideSummary) -> str:
    """Say where a side channel went over the log."""
    unit = parse_unit(summary.spoken_unit)
    if not summary.course.mean.size:
        return "no sample of it within the log"
    low, high = (unit.from_si(float(end)) for end in (summary.course.minimum.min(), summary.course.maximum.max()))
    first, last = (unit.from_si(float(summary.course.mean[i])) for i in (0, -1))
    return (
        f"{low:.6g} to {high:.6g} {unit.printed}, from {first:.6g} at the start to {last:.6g} at the end; known over"
        f" {100 * summary.covered:.3g} % of the log"
    )


def _channel_content(channel: ChannelResult, key: str, first: int) -> dict[str, Any]:
    unit: Unit = parse_unit(channel.report_unit)
    return {
        "key": key,
        "label": channel.label,
        "quantity": channel.quantity,
        "report_unit": unit.printed,
        "log_unit": parse_unit(channel.log_unit).printed,
        "terms": term_rows(channel),
        "with_plain": bool(channel.unscreened),
        "figures": _figures(channel, key, first),
        "findings": [_finding_row(finding) for finding in channel.findings],
        "poor": channel.noise.goodness > POOR,
        "bias": bias_text(channel).replace(unit.text, unit.printed),
        "coverage": f"{100 * channel.curve.coverage:g} %",
        "scale": f"{100 * channel.scale_factor_uncertainty:.2g} %" if channel.scale_factor_uncertainty else "",
        "front_end": channel.front_end,
        "converter": converter_rows(channel),
        "converter_source": channel.converter.source if channel.converter else None,
        "side": [(name, _side_words(summary)) for name, summary in channel.side.items()],
        "accepted": _accepted_words(channel),
        "clock": {
            "source": channel.clock.source,
            "rate": f"{1.0 / channel.sample_interval:.9g} Hz",
            "interval": f"{channel.sample_interval:.9g} s",
            "jitter": f"{significant(channel.clock.jitter, 2)} s"
            if channel.clock.jitter > NO_JITTER * channel.sample_interval
            else "none seen",
            "missing": str(channel.clock.missing),
            "gap": duration_text(channel.clock.longest_gap) if channel.clock.longest_gap else "none",
            "runs": [f"{instant_text(a)} to {instant_text(b)}" for a, b in channel.clock.runs[:8]],
            "more_runs": max(0, len(channel.clock.runs) - 8),
        },
        "n_samples": channel.n_samples,
        "n_used": channel.n_used,
        "duration": duration_text(channel.duration),
        "curve_table": _curve_table(channel),
        "timeline_table": _timeline_table(channel),
        "spectrum_table": _spectrum_table(channel),
        "unsure": bool(observed_terms(channel, AMBIGUOUS)),
        "resolved": observed_terms(channel, RESOLVED),
        "spoken": {name: spoken_unit_of(channel, name) for name in channel.noise.terms},
    }


def _verdict_content(channel: ChannelResult) -> list[dict[str, Any]]:
    content = []
    for verdict in channel.verdicts:
        row = verdict_row(verdict)
        mark = {CONFORMS: "full", FAILS: "empty"}.get(row.decision, "half")
        content.append({"row": row, "mark": mark, "strip": markup(strip(row)), "channel": channel.label})
    return content


def render_report(result: Characterization) -> bytes:
    """Return the report of one log: a single HTML file that opens with no network and needs no script.

    Parameters
    ----------
    result : Characterization
        From ``characterize``, or decoded from result.json: nothing else is needed.
    """
    per_channel = 4
    channels = [
        _channel_content(channel, f"c{i + 1}", 1 + per_channel * i) for i, channel in enumerate(result.channels)
    ]
    return render_page(
        "report.html",
        title=_title(result),
        subtitle=_subtitle(result),
        facts=_strip_facts(result),
        verdicts=[row for channel in result.channels for row in _verdict_content(channel)],
        many=len(result.channels) > 1,
        channels=channels,
        identification=_flat(result.identification),
        source=result.source,
        provenance=result.provenance,
        settings=[
            (key.replace("_", " "), _setting_text(value))
            for key, value in result.provenance.settings.items()
            if value not in (None, "", (), [])
        ],
        cautions=_caution(result),
        blind_spots=BLIND_SPOTS,
        made_at=result.made_at,
    )


def _setting_text(value: object) -> str:
    if isinstance(value, tuple | list):
        return "; ".join(str(item) for item in value)
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, Mapping):
        return json.dumps(dict(value))
    return str(value)
