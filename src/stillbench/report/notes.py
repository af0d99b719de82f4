"""Margin notes: one to three sentences beside a figure, written by rule from findings and states."""

import numpy as np

from stillbench.foundation.rounding import significant
from stillbench.foundation.units import parse_unit
from stillbench.report.words import duration_text, observed_terms, share_text
from stillbench.vocabulary.characterization import ChannelResult
from stillbench.vocabulary.noise_model import AMBIGUOUS, NOT_OBSERVABLE, RESOLVED, UPPER_BOUND

Note = tuple[str, str]
"""Lead words, and what follows them."""

COUNTS = ("No", "One", "Two", "Three", "Four", "Five")
GOOD = 2.0
POOR = 3.5


def _joined(names: list[str]) -> str:
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"


def deviation_notes(channel: ChannelResult) -> list[Note]:
    """Return notes beside the Allan deviation."""
    notes: list[Note] = []
    noise = channel.noise
    resolved = observed_terms(channel, RESOLVED)
    ambiguous = observed_terms(channel, AMBIGUOUS)
    plural = "term is" if len(resolved) == 1 else "terms are"
    poor = noise.goodness > POOR
    if resolved and not poor:
        lead = f"{COUNTS[min(len(resolved), 5)]} {plural} resolved."
        explained = "" if ambiguous else f" explain{'s' if len(resolved) == 1 else ''} the log"
        notes.append((lead, f"{_joined(resolved).capitalize()}{explained} (goodness of fit {noise.goodness:.1f})."))
    if poor:
        notes.append(
            (
                "The model does not explain this log.",
                f"Goodness of fit {noise.goodness:.1f}, where 3.5 is already rare: terms and intervals are not to be relied on.",
            )
        )
    if ambiguous and not poor:
        notes.append(
            (
                f"{_joined(ambiguous).capitalize()}:",
                "the log is explained as well with one as with another; it is too short to tell. A longer log would.",
            )
        )
    bounded = [name for name in observed_terms(channel, UPPER_BOUND) if not name.endswith("ramp")]
    if bounded and not poor:
        verb = "is an upper bound" if len(bounded) == 1 else "are upper bounds"
        text = f"{verb} only: the log is explained without."
        flicker = next((name for name in bounded if name in ("bias instability", "flicker noise")), None)
        lowest = _lowest_point(channel)
        if flicker and lowest:
            text += f" The lowest point, {lowest}, is where other terms cross and is no flicker floor."
        notes.append((_joined(bounded).capitalize(), text))
    blank = observed_terms(channel, NOT_OBSERVABLE)
    if blank:
        because = noise.terms[blank[0].replace(" ", "_")].because
        notes.append((f"{_joined(blank).capitalize()}:", f"not observable. {because[0].upper()}{because[1:]}."))
    notes.extend(
        (_sentence(finding.kind.replace("_", " ")), f"{_sentence(finding.because)} {_sentence(finding.disposition)}")
        for finding in channel.findings
        if finding.kind in ("low_pass", "coarse_converter", "repeated_values")
    )
    notes.append(
        (
            "The last points",
            "of any such curve read low: at a third of the log typically by a seventh to a quarter. The band says by how much they may be off.",
        )
    )
    return notes


def _sentence(text: str) -> str:
    return f"{text[0].upper()}{text[1:]}." if text else ""


def _lowest_point(channel: ChannelResult) -> str:
    usable = channel.curve.tau <= channel.duration / 10.0
    if np.count_nonzero(usable) < 3:  # noqa: PLR2004  too few points for a lowest one
        return ""
    lowest = int(np.argmin(channel.curve.deviation[usable]))
    if lowest in (0, int(np.count_nonzero(usable)) - 1):
        return ""
    unit = parse_unit(channel.report_unit)
    return f"{significant(channel.curve.deviation[lowest] / unit.factor, 2)} {unit.printed} at {duration_text(channel.curve.tau[lowest])}"


def timeline_notes(channel: ChannelResult) -> list[Note]:
    """Return notes beside the log over time."""
    notes: list[Note] = []
    runs = len(channel.clock.runs)
    lead = share_text(channel.n_used, channel.n_samples)
    notes.append((f"{lead[0].upper()}{lead[1:]}", f"samples are used, in {runs} run{'s' if runs > 1 else ''}."))
    kinds: dict[str, int] = {}
    for finding in channel.findings:
        if finding.excluded and finding.start is not None and finding.kind != "gap":
            kinds[finding.kind] = kinds.get(finding.kind, 0) + 1
    if kinds:
        told = ", ".join(f"{kind.replace('_', ' ')} ({count})" for kind, count in kinds.items())
        notes.append(("Left out:", f"{told}; each is listed under findings and edits."))
    else:
        notes.append(("Nothing was left out.", ""))
    longest = channel.clock.longest_gap
    if longest > 0:
        notes.append(("Longest gap", f"{duration_text(longest)}; no average crosses it."))
    if any(finding.kind == "motion" for finding in channel.findings):
        moved = channel.quantity in ("angular rate", "acceleration")
        lead = "The sensor was moved." if moved else "The reading was disturbed."
        notes.append((lead, "This is not one still log; what is used are its still parts."))
    return notes


def fit_notes(channel: ChannelResult) -> list[Note]:
    """Return notes beside residuals and spectrum."""
    goodness = channel.noise.goodness
    if goodness <= GOOD:
        word = "The model fits."
    elif goodness <= POOR:
        word = "The fit is fair."
    else:
        word = "The fit is poor."
    low, high = channel.noise.band
    notes = [
        (word, f"Goodness of fit {goodness:.1f}, a standard normal figure where the terms explain the log."),
        ("Band used:", f"{significant(low, 2)} to {significant(high)} Hz."),
    ]
    if channel.noise.kurtosis > 3.2:  # noqa: PLR2004  visibly above a Gaussian's 3
        notes.append(
            (
                "Heavy tails:",
                f"kurtosis {channel.noise.kurtosis:.2f}; the interval of the white noise is widened for it.",
            )
        )
    notes.append(
        (
            "Under the model",
            "95 % of the residuals lie in the shaded strip. Neighbours that stray together show a line, a bump or a filter.",
        )
    )
    return notes
