"""A result on the terminal: one table a channel, the words and marks of the report, notes below. ASCII, no colour."""

from collections.abc import Sequence

from stillbench.report.notes import POOR, deviation_notes
from stillbench.report.words import (
    ASCII_MARKS,
    bias_text,
    duration_text,
    instant_text,
    share_text,
    term_rows,
    verdict_row,
)
from stillbench.vocabulary.characterization import ChannelResult, Characterization

SIGNS = {
    "\N{DEGREE SIGN}": "deg",
    "\N{SQUARE ROOT}": "sqrt ",
    "\N{MICRO SIGN}": "u",
    "\N{SUPERSCRIPT TWO}": "^2",
    "\N{DOT OPERATOR}": "*",
}
WRAP = 100
ALIKE = 3
GRAVE = (
    "poor_fit",
    "motion",
    "saturation",
    "coarse_converter",
    "variance_change",
    "methods_disagree",
    "repeated_values",
    "low_pass",
    "scale_factor_unknown",
)


def ascii_text(text: str) -> str:
    """Return text in ASCII: signs as words, anything else escaped."""
    for sign, word in SIGNS.items():
        text = text.replace(sign, word)
    return text.encode("ascii", "backslashreplace").decode()


def table(head: Sequence[str], rows: Sequence[Sequence[str]], right: Sequence[int] = ()) -> str:
    """Lay out columns with two blanks between them; columns in ``right`` are set flush right."""
    cells = [[ascii_text(cell) for cell in row] for row in (head, *rows)]
    widths = [max(len(row[i]) for row in cells) for i in range(len(head))]
    lines = []
    for number, row in enumerate(cells):
        parts = [
            cell.rjust(width) if i in right else cell.ljust(width)
            for i, (cell, width) in enumerate(zip(row, widths, strict=True))
        ]
        lines.append("  ".join(parts).rstrip())
        if number == 0:
            lines.append("  ".join("-" * width for width in widths))
    return "\n".join(lines)


def wrapped(text: str, indent: str = "  ") -> str:
    """Wrap a note to the width of the terminal output."""
    import textwrap  # noqa: PLC0415  wanted where something is printed

    return textwrap.fill(ascii_text(text), WRAP, initial_indent=indent, subsequent_indent=indent + "  ")


def result_text(result: Characterization) -> str:
    """Return a result as text for the terminal."""
    blocks = [f"{result.source.name}: {result.source.rows} rows"]
    understood = result.provenance.settings.get("understood", ())
    blocks[0] += "".join(f"\n{wrapped(str(line))}" for line in (understood if isinstance(understood, tuple) else ()))
    blocks += [_channel_text(channel) for channel in result.channels]
    return "\n\n".join(blocks) + "\n"


def _channel_text(channel: ChannelResult) -> str:
    length = f"{duration_text(channel.duration)} at {1.0 / channel.sample_interval:.6g} Hz"
    used = share_text(channel.n_used, channel.n_samples)
    blocks = [f"{channel.label} ({channel.quantity}): {length}, {used} samples used"]
    rows = [[row.name, row.symbol, row.value, row.interval, row.unit, row.state] for row in term_rows(channel)]
    rows.append(["bias", "", bias_text(channel), "", "", "mean of this log"])
    percent = f"{100 * channel.curve.coverage:g} % interval"
    if channel.noise.goodness > POOR:
        blocks.append("! the model does not explain this log: the terms below are not to be relied on")
    bias = rows.pop()
    blocks.append(
        table(["noise term", "", "coefficient", percent, "unit", "state"], rows, right=(2,))
        + f"\nbias  {ascii_text(bias[2])}"
    )
    if channel.verdicts:
        verdicts = [verdict_row(verdict) for verdict in channel.verdicts]
        lines = []
        for row in verdicts:
            found = f"{row.found} {row.unit}" if row.value is not None else row.found
            lines.append(
                [
                    f"{ASCII_MARKS[row.decision]} {row.decision}",
                    row.clause or row.id,
                    row.quantity,
                    f"{row.limit} {row.unit}",
                    found,
                ]
            )
        text = table(["decision", "clause", "requirement", "limit", "found"], lines)
        notes = [
            wrapped(f"{row.clause or row.id}: {row.because}{'; ' + row.remark if row.remark else ''}")
            for row in verdicts
        ]
        blocks.append("\n".join([text, *notes]))
    blocks.append("\n".join(wrapped(f"{lead} {text}", "") for lead, text in deviation_notes(channel)))
    if channel.findings:
        blocks.append("\n".join(["findings", *_finding_lines(channel)]))
    return "\n\n".join(blocks)


def _finding_lines(channel: ChannelResult) -> list[str]:
    """Return findings by kind, those that touch every number first; of many alike the first few."""
    kinds = sorted({finding.kind for finding in channel.findings}, key=lambda kind: (kind not in GRAVE, kind))
    lines = []
    for kind in kinds:
        alike = [finding for finding in channel.findings if finding.kind == kind]
        for finding in alike[:ALIKE]:
            when = f" at {instant_text(finding.start)}" if finding.start is not None else ""
            if finding.start is not None and finding.stop is not None and finding.stop > finding.start:
                when += f" to {instant_text(finding.stop)}"
            mark = "band cut" if kind in ("low_pass", "poor_fit") else "left out"
            mark = mark if finding.excluded else "kept"
            lines.append(wrapped(f"{kind.replace('_', ' ')}{when} ({mark}): {finding.because}; {finding.disposition}"))
        if len(alike) > ALIKE:
            lines.append(f"  and {len(alike) - ALIKE} more of the kind {kind.replace('_', ' ')}, all in the report")
    return lines
