"""Qualify rate sensors and accelerometers from logs taken at rest.

The public names are loaded when first used, so that ``import stillbench`` costs nothing.
"""

import importlib
from typing import TYPE_CHECKING

from stillbench.version import __version__

if TYPE_CHECKING:
    from stillbench.archive.codec import decode, encode
    from stillbench.assessment.judge import judge, load_specification
    from stillbench.deviation.intervals import bound_deviation
    from stillbench.deviation.overlapping import estimate_deviation, overlapping_deviation
    from stillbench.foundation.errors import StillbenchError
    from stillbench.identification.identify import identify_noise
    from stillbench.logs.cut import cut_record
    from stillbench.logs.read import read_log
    from stillbench.pipeline import characterize, load_log_sheet
    from stillbench.report.render import render_report
    from stillbench.screening.screen import screen
    from stillbench.vocabulary.characterization import Characterization

__all__ = [
    "Characterization",
    "StillbenchError",
    "__version__",
    "bound_deviation",
    "characterize",
    "cut_record",
    "decode",
    "encode",
    "estimate_deviation",
    "identify_noise",
    "judge",
    "load_log_sheet",
    "load_specification",
    "overlapping_deviation",
    "read_log",
    "render_report",
    "screen",
]

_HOMES = {
    "Characterization": "vocabulary.characterization",
    "StillbenchError": "foundation.errors",
    "bound_deviation": "deviation.intervals",
    "characterize": "pipeline",
    "cut_record": "logs.cut",
    "decode": "archive.codec",
    "encode": "archive.codec",
    "estimate_deviation": "deviation.overlapping",
    "identify_noise": "identification.identify",
    "judge": "assessment.judge",
    "load_log_sheet": "pipeline",
    "load_specification": "assessment.judge",
    "overlapping_deviation": "deviation.overlapping",
    "read_log": "logs.read",
    "render_report": "report.render",
    "screen": "screening.screen",
}


def __getattr__(name: str) -> object:
    home = _HOMES.get(name)
    if home is None:
        message = f"module {__name__!r} has no attribute {name!r}"
        raise AttributeError(message)
    return getattr(importlib.import_module(f"{__name__}.{home}"), name)


def __dir__() -> list[str]:
    return __all__
