"""How a log was understood, on the terminal."""

from stillbench.cli.print_result import ascii_text, table, wrapped
from stillbench.vocabulary.understanding import Understanding

NARROW = 14
MOST_COLUMNS = 12


def understanding_text(found: Understanding) -> str:
    """Return what ``stillbench check`` prints."""
    rows = f"{found.rows} rows" if found.rows is not None else "rows not counted: there is no clock yet"
    lines = [f"{ascii_text(found.name)}: {rows}", f"  {ascii_text(found.format)}"]
    lines += [wrapped(remark, "  ") for remark in found.remarks]
    lines += ["", "columns"]
    listed = [
        (
            str(column.number),
            column.head,
            column.role,
            column.declared or "",
            (column.unit or "") if not column.declared else "",
        )
        for column in found.columns
        if column.role != "empty"
    ]
    lines.append(
        table(("", "head", "taken as", "unit declared", "unit in the file (to be confirmed)"), listed, right=(0,))
    )
    empty = [column.head for column in found.columns if column.role == "empty"]
    if empty:
        lines.append(wrapped(f"{len(empty)} columns are empty: {', '.join(empty)}", ""))
    lines += ["", "clock", wrapped(found.clock, "  ")]
    if found.sample_interval is not None and found.duration is not None:
        lines.append(
            f"  {1.0 / found.sample_interval:.6g} Hz, {found.duration:.6g} s in all, stamps scatter by {found.jitter:.3g} s"
        )
    for finding in found.findings:
        lines.append(wrapped(f"! {finding.kind}: {finding.because}; {finding.disposition}", "  "))
    shown = [column for column in found.columns if column.role != "empty"][:MOST_COLUMNS]
    lines += ["", f"first and last rows{' (the first columns)' if len(found.columns) > len(shown) else ''}"]
    cells = [[row[column.number - 1][:NARROW] for column in shown] for row in found.first]
    cells += [["..."] * len(shown)] if found.first else []
    cells += [[row[column.number - 1][:NARROW] for column in shown] for row in found.last]
    lines.append(table([column.head[:NARROW] for column in shown], cells, right=range(len(shown))))
    lines += ["", "to say otherwise"]
    lines.append(table(("what", "found", "in a log sheet (--write-sheet FILE writes one)"), found.overrides))
    return "\n".join(lines) + "\n"
