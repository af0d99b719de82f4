"""The deviation curves as a table for other tools."""

import math

from stillbench.vocabulary.characterization import Characterization

HEAD = "channel,unit,tau_s,deviation,lower,upper,pairs,edf,classical_error,model"


def _cell(text: str) -> str:
    """Quote a cell; one that a spreadsheet would take for a formula gets an apostrophe in front."""
    safe = f"'{text}" if text[:1] in ("=", "+", "-", "@", "\t", "\r") else text
    return '"' + safe.replace('"', '""').replace("\n", " ").replace("\r", " ") + '"'


def _number(value: float) -> str:
    return repr(float(value)) if math.isfinite(value) else ""


def curve_table(result: Characterization) -> bytes:
    """Return the deviation curves of all channels as CSV, SI, UTF-8."""
    lines = [HEAD]
    for channel in result.channels:
        curve = channel.curve
        empty = [math.nan] * curve.tau.size
        columns = [
            curve.tau,
            curve.deviation,
            *(empty if column is None else column for column in (curve.lower, curve.upper)),
            *(empty if column is None else column for column in (curve.edf, curve.classical_error, curve.model)),
        ]
        for i in range(curve.tau.size):
            numbers = [_number(column[i]) for column in columns]
            numbers.insert(4, str(int(curve.pairs[i])))
            lines.append(",".join([_cell(channel.label), _cell(channel.unit), *numbers]))
    return ("\n".join(lines) + "\n").encode()
