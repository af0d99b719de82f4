"""Run the published cases, and remember the outcome for this version on this machine."""

import contextlib
import json
import os
import platform
from collections.abc import Sequence
from dataclasses import dataclass
from importlib import metadata
from pathlib import Path

from stillbench.foundation.errors import OutputError
from stillbench.foundation.files import write_whole
from stillbench.selfcheck.cases import Case, cases
from stillbench.version import __version__


@dataclass(frozen=True)
class Outcome:
    """One case computed.

    Attributes
    ----------
    case : Case
    computed : str
        In the format of the printed number.
    matched, digits : int
        Leading digits that agree, of the digits printed.
    """

    case: Case
    computed: str
    matched: int
    digits: int

    @property
    def agrees(self) -> bool:
        """Whether every printed digit is reproduced (the last one within one unit: printed values may be truncated)."""
        step = 10.0 ** -len(self.case.printed.split("e")[0].split(".")[1])
        exponent = float(f"1e{self.case.printed.split('e')[1]}") if "e" in self.case.printed else 1.0
        return abs(float(self.computed) - float(self.case.printed)) <= 1.001 * step * exponent


def _digits(text: str) -> str:
    return text.split("e", maxsplit=1)[0].replace(".", "").replace("-", "").lstrip("0")


def compute(case: Case) -> Outcome:
    """Compute one case and compare it digit by digit."""
    mantissa = case.printed.split("e")[0]
    decimals = len(mantissa.split(".")[1])
    value = case.compute()
    text = f"{value:.{decimals}e}" if "e" in case.printed else f"{value:.{decimals}f}"
    ours, theirs = _digits(text), _digits(case.printed)
    same_size = len(ours) == len(theirs) and text.split("e")[1:] == case.printed.split("e")[1:]
    matched = 0
    if same_size:
        matched = next((i for i, (a, b) in enumerate(zip(ours, theirs, strict=True)) if a != b), len(theirs))
    return Outcome(case, text, matched, len(theirs))


def run() -> list[Outcome]:
    """Compute every case."""
    return [compute(case) for case in cases()]


def summary(outcomes: Sequence[Outcome]) -> str:
    """Return one line for the report."""
    good = sum(outcome.agrees for outcome in outcomes)
    return f"{good} of {len(outcomes)} published or exact cases reproduced in the digits printed"


def _key() -> str:
    versions = [metadata.version(name) for name in ("numpy", "scipy")]
    return "-".join([__version__, platform.python_version(), platform.machine(), *versions])


def _cache() -> Path | None:
    base = os.environ.get("XDG_CACHE_HOME")
    with contextlib.suppress(RuntimeError):
        return Path(base or Path.home() / ".cache") / "stillbench" / f"selfcheck-{_key()}.json"
    return None


def remembered_summary() -> str:
    """Return the line for the report: from an earlier run of this version on this machine, or from a run now."""
    path = _cache()
    if path is not None:
        with contextlib.suppress(OSError, ValueError, KeyError, TypeError):
            return str(json.loads(path.read_text("utf-8"))["summary"])
    outcomes = run()
    line = summary(outcomes)
    if path is not None and all(outcome.agrees for outcome in outcomes):
        with contextlib.suppress(OutputError):  # a folder that cannot be written only costs the next run the same work
            write_whole({path: json.dumps({"summary": line}).encode() + b"\n"})
    return line
