"""One thing found in a log that its reader must know."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import ClassVar, Literal, get_args

FindingKind = Literal[
    "missing_samples",
    "gap",
    "duplicate_stamps",
    "backward_stamps",
    "stamp_resolution",
    "clock_shift",
    "rate_mismatch",
    "clock_jitter",
    "not_finite",
    "repeated_values",
    "stuck",
    "saturation",
    "constant",
    "spike",
    "burst",
    "motion",
    "step",
    "warm_up",
    "side_channel",
    "line",
    "alias",
    "low_pass",
    "variance_change",
    "noisy_span",
    "heavy_tails",
    "coarse_converter",
    "missing_codes",
    "looks_processed",
    "short_record",
    "poor_fit",
    "methods_disagree",
    "earth_rate",
    "converter_limited",
    "scale_factor_unknown",
]
FINDING_KINDS: tuple[str, ...] = get_args(FindingKind)


@dataclass(frozen=True)
class Finding:
    """What was found, when, how large, what was done about it, and why.

    Attributes
    ----------
    kind : str
        One of FINDING_KINDS.
    start, stop : float or None
        Seconds from the first sample; None when it concerns the whole log.
    measure : float or None
        Size, in ``unit``.
    unit : str
        Unit of ``measure``, as printed; empty for a pure number.
    excluded : bool
        True when samples were taken out of the numbers because of it.
    because : str
        One sentence: the evidence.
    disposition : str
        One sentence: what was done, or what the user said on overruling it.
    """

    kind: str
    start: float | None
    stop: float | None
    measure: float | None
    unit: str
    excluded: bool
    because: str
    disposition: str

    __json_names__: ClassVar[Mapping[str, str]] = {"start": "start_s", "stop": "stop_s"}
