"""Numbers and names as people read them; terminal and page share them."""

from collections.abc import Mapping
from dataclasses import dataclass

from stillbench.foundation.rounding import interval_text, plain, rounded_up, significant, with_interval
from stillbench.foundation.units import parse_unit
from stillbench.vocabulary.characterization import ChannelResult
from stillbench.vocabulary.noise_model import NOT_OBSERVABLE, RESOLVED, UPPER_BOUND, NoiseTerm
from stillbench.vocabulary.quantity import QUANTITIES, is_density, role_of
from stillbench.vocabulary.verdict import CONFORMS, FAILS, UNDECIDED, Verdict

SYMBOLS: Mapping[str, str] = {
    "quantization": "Q",
    "white": "N",
    "flicker": "B",
    "correlated": "G",
    "walk": "K",
    "ramp": "R",
}
ASCII_MARKS: Mapping[str, str] = {CONFORMS: "[#]", FAILS: "[ ]", UNDECIDED: "[/]"}
SURE = 0.999


@dataclass(frozen=True)
class TermRow:
    """One line of the noise-term table, ready to print.

    Attributes
    ----------
    name, symbol, state, because : str
    value, interval, unit : str
        ``unit`` ASCII; ``printed_unit`` with signs.
    printed_unit : str
    curve : str
        Second opinion from the curve, with its interval, or a dash.
    textbook, textbook_how : str
    plain_value : str
        Without the exclusions, or empty.
    """

    name: str
    symbol: str
    value: str
    interval: str
    unit: str
    printed_unit: str
    state: str
    because: str
    curve: str
    textbook: str
    textbook_how: str
    plain_value: str


def spoken_unit_of(channel: ChannelResult, term: str) -> str:
    """Return the unit a term of this channel is printed in."""
    role = role_of(term) or "white"
    return QUANTITIES[channel.quantity].spoken_unit(role, channel.report_unit)


def _numbers(term: NoiseTerm, factor: float) -> tuple[str, str]:
    if term.coefficient is None or term.lower is None or term.upper is None:
        return "-", "-"
    value, lower, upper = (number / factor for number in (term.coefficient, term.lower, term.upper))
    if term.state == UPPER_BOUND and term.lower == 0:
        return f"< {rounded_up(upper)}", f"estimate {significant(value, 2)}"
    middle, low, high = with_interval(value, lower, upper)
    return middle, f"{low} to {high}"


def _second(term: NoiseTerm, factor: float) -> str:
    second = term.curve_estimate
    if second is None:
        return "-"
    numbers = [number / factor for number in (second.coefficient, second.lower, second.upper)]
    return f"< {rounded_up(numbers[2])}" if second.lower == 0 else interval_text(*numbers)


def term_rows(channel: ChannelResult) -> list[TermRow]:
    """Return the noise-term table of a channel."""
    rows = []
    for name, term in channel.noise.terms.items():
        unit = parse_unit(spoken_unit_of(channel, name))
        value, interval = _numbers(term, unit.factor)
        reading = term.textbook.value if term.textbook else None
        other = channel.unscreened.get(name)
        rows.append(
            TermRow(
                name.replace("_", " "),
                SYMBOLS.get(role_of(name) or "", ""),
                value,
                interval,
                unit.text,
                unit.printed,
                term.state,
                "" if term.state == RESOLVED and role_of(name) != "ramp" else term.because,
                _second(term, unit.factor),
                significant(reading / unit.factor) if reading is not None else "-",
                term.textbook.how if term.textbook else "",
                _numbers(other, unit.factor)[0] if other is not None else "",
            )
        )
    return rows


def converter_rows(channel: ChannelResult) -> list[tuple[str, str, str, str, str]]:
    """Return term, what was measured, the converter alone, what is left for the sensor, and a word on it."""
    rows = []
    for name, corrected in channel.converter.sensor.items() if channel.converter else ():
        unit = parse_unit(spoken_unit_of(channel, name))
        both, alone = channel.noise.terms[name], channel.converter.noise.terms[name] if channel.converter else None
        left = f"< {rounded_up(corrected.upper / unit.factor)}"
        if corrected.lower > 0:
            ends = (corrected.coefficient, corrected.lower, corrected.upper)
            left = interval_text(*(number / unit.factor for number in ends))
        words = f"{100 * corrected.share:.0f} % of the variance is the converter's"
        rows.append(
            (
                f"{name.replace('_', ' ')} / {unit.printed}",
                " ".join(_numbers(both, unit.factor)[:1]),
                _numbers(alone, unit.factor)[0] if alone else "-",
                left,
                f"converter-limited: {words}" if corrected.limited else words,
            )
        )
    return rows


def term_label(channel: ChannelResult, name: str) -> str:
    """Return the label beside a term's line in a figure: name, then value, interval and unit."""
    term = channel.noise.terms[name]
    unit = parse_unit(spoken_unit_of(channel, name))
    if term.coefficient is None or term.lower is None or term.upper is None:
        return name.replace("_", " ")
    numbers = interval_text(*(number / unit.factor for number in (term.coefficient, term.lower, term.upper)))
    doubt = "" if term.state == "resolved" else f", {term.state}"
    return f"{name.replace('_', ' ')}{doubt}\n{numbers} {unit.printed}"


@dataclass(frozen=True)
class VerdictRow:
    """One line of the verdict table, ready to print."""

    id: str
    clause: str
    quantity: str
    limit: str
    found: str
    unit: str
    printed_unit: str
    decision: str
    remark: str
    because: str
    value: float | None
    lower: float | None
    upper: float | None
    limit_value: float


def verdict_row(verdict: Verdict) -> VerdictRow:
    """Return a verdict with its numbers in the unit of the requirement."""
    unit = parse_unit(verdict.spoken_unit)
    # A one-sided spectral density is spoken as such: n = N sqrt(2).
    factor = unit.factor / 2.0**0.5 if is_density(verdict.quantity, unit.text) else unit.factor
    value, lower, upper = (
        None if number is None else number / factor for number in (verdict.value, verdict.lower, verdict.upper)
    )
    found = "not found"
    if value is not None and lower is not None and upper is not None:
        found = interval_text(value, lower, upper)
    return VerdictRow(
        verdict.id,
        verdict.clause,
        verdict.quantity,
        plain(verdict.limit / factor),
        found,
        unit.text,
        unit.printed,
        verdict.decision,
        verdict_remark(verdict),
        verdict.because,
        value,
        lower,
        upper,
        verdict.limit / factor,
    )


def verdict_remark(verdict: Verdict) -> str:
    """Return the small print below a decision: probability, or the log that would decide."""
    if verdict.decision == UNDECIDED and verdict.deciding_length is not None:
        low, high = verdict.deciding_length
        span = (
            f"{duration_text(low)} to {duration_text(high)}"
            if high is not None
            else f"{duration_text(low)} or far more"
        )
        return f"a log of {span} would decide"
    probability = verdict.conformance_probability
    if probability is None:
        return ""
    if probability > SURE:
        return "probability of conformance > 0.999"
    if probability < 1 - SURE:
        return "probability of conformance < 0.001"
    return f"probability of conformance {probability:.2g}"


def duration_text(seconds: float) -> str:
    """Write a duration in the unit it reads best in, three digits."""
    for size, name in ((86_400.0 * 3, "d"), (3_600.0, "h"), (60.0, "min")):
        if seconds >= size:
            return f"{significant(seconds / {'d': 86_400.0, 'h': 3_600.0, 'min': 60.0}[name])} {name}"
    return f"{significant(seconds)} s"


def instant_text(seconds: float | None) -> str:
    """Write an instant of the log as h:mm:ss from its start."""
    if seconds is None:
        return ""
    whole = int(seconds)
    text = f"{whole // 3600}:{whole % 3600 // 60:02d}:{whole % 60:02d}"
    fraction = seconds - whole
    return f"{text}.{int(fraction * 100):02d}" if seconds < 60 and fraction else text  # noqa: PLR2004  one minute


def share_text(used: int, offered: int) -> str:
    """Write how many samples were used of how many: all of them only where that is so."""
    if used == offered:
        return f"all {offered}"
    share = f"{100.0 * used / offered:.4g} %"
    return f"{used} of {offered}" + (f" ({share})" if share != "100 %" else "")


def bias_text(channel: ChannelResult) -> str:
    """Write the bias with its interval in the report unit, ASCII."""
    unit = parse_unit(channel.report_unit)
    numbers = interval_text(
        *(number / unit.factor for number in (channel.bias.value, channel.bias.lower, channel.bias.upper))
    )
    return f"{numbers} {unit.text}"


def observed_terms(channel: ChannelResult, *states: str) -> list[str]:
    """Return names (with spaces) of the terms in any of ``states``."""
    return [name.replace("_", " ") for name, term in channel.noise.terms.items() if term.state in states]


def is_blank(term: NoiseTerm) -> bool:
    """Whether a term has no figure."""
    return term.state == NOT_OBSERVABLE
