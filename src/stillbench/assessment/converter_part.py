"""The converter's part in the noise: taken off in variance, or said to be a limit.

References
----------
Interval of a difference of variances by the method of variance estimates recovery: G. Y. Zou and A. Donner, Stat. Med. 27
(2008) 1693 (equation from memory, coverage by simulation in tests/calibration).
"""

import math
from collections.abc import Mapping

import numpy as np

from stillbench.foundation.rounding import significant
from stillbench.vocabulary.characterization import ChannelResult
from stillbench.vocabulary.converter_share import CorrectedTerm
from stillbench.vocabulary.deviation_curve import DeviationCurve
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.noise_model import NoiseModel, NoiseTerm
from stillbench.vocabulary.quantity import role_of

DOMINATES = 0.5
"""Share of the variance from which the converter limits what is seen."""
OPEN_END = 0.99
"""Share of the last averaging time from which a stretch counts as reaching to the end of the curve."""
LASTING = 2
"""Points of the curve, one behind the other, that make a stretch."""


def corrected_term(together: NoiseTerm, alone: NoiseTerm) -> CorrectedTerm | None:
    """Return a term of the sensor alone; None where either is not observable.

    theta = a^2 - b^2, with upper end theta + sqrt((ua^2 - a^2)^2 + (b^2 - lb^2)^2) and lower end
    theta - sqrt((a^2 - la^2)^2 + (ub^2 - b^2)^2), neither below zero.
    """
    if together.coefficient is None or alone.coefficient is None:
        return None
    if together.lower is None or together.upper is None or alone.lower is None or alone.upper is None:
        return None
    a, low_a, high_a = (end**2 for end in (together.coefficient, max(0.0, together.lower), together.upper))
    b, low_b, high_b = (end**2 for end in (alone.coefficient, max(0.0, alone.lower), alone.upper))
    theta = a - b
    upper = theta + math.hypot(high_a - a, b - low_b)
    lower = theta - math.hypot(a - low_a, high_b - b)
    share = min(1.0, b / a) if a > 0 else 0.0
    value, low, high = (math.sqrt(max(0.0, end)) for end in (theta, lower, upper))
    return CorrectedTerm(value, low, high, share, share >= DOMINATES)


def corrected_terms(together: NoiseModel, alone: NoiseModel) -> Mapping[str, CorrectedTerm]:
    """Return the random terms of the sensor alone; the ramp is no variance and is left out."""
    made = {}
    for name, term in together.terms.items():
        if role_of(name) in (None, "ramp") or name not in alone.terms:
            continue
        found = corrected_term(term, alone.terms[name])
        if found is not None:
            made[name] = found
    return made


def limited_span(together: DeviationCurve, alone: DeviationCurve) -> tuple[float, float] | None:
    """Return the averaging times between which the converter makes half the variance or more; None where it nowhere does.

    The converter's curve is read at the averaging times of the other, along straight lines in the logarithms.
    """
    inside = (together.tau >= alone.tau[0] * (1 - 1e-9)) & (together.tau <= alone.tau[-1] * (1 + 1e-9))
    tau, deviation = together.tau[inside], together.deviation[inside]
    known = alone.deviation > 0
    if tau.size < LASTING or known.sum() < LASTING:
        return None
    other = np.exp(np.interp(np.log(tau), np.log(alone.tau[known]), np.log(alone.deviation[known])))
    ruled = other**2 >= DOMINATES * deviation**2
    lasting = ruled.copy()
    lasting[1:] &= ruled[:-1]
    if not lasting.any():
        return None
    first = max(0, int(np.argmax(lasting)) - 1)
    last = int(lasting.size - 1 - np.argmax(lasting[::-1]))
    return float(tau[first]), float(tau[last])


def converter_finding(
    found: ChannelResult, sensor: Mapping[str, CorrectedTerm], span: tuple[float, float] | None, source: str
) -> Finding | None:
    """Return what must be said where the converter rules; None where it nowhere does.

    Parameters
    ----------
    found : ChannelResult
        Of sensor and converter together.
    sensor : mapping of term name to CorrectedTerm
    span : (float, float) or None
        Averaging times, s, from ``limited_span``.
    source : str
        Name of the converter's log.
    """
    limited = [
        name.replace("_", " ") for name, term in sensor.items() if term.limited and found.noise.terms[name].lower
    ]
    if span is None and not limited:
        return None
    words = []
    if span is not None:
        first, last = (f"{significant(end, 2)} s" for end in span)
        open_end = span[1] >= OPEN_END * found.curve.tau[-1]
        words.append(f"converter-limited above {first}" if open_end else f"converter-limited from {first} to {last}")
    if limited:
        words.append(f"half or more of {' and '.join(limited)} is the converter's")
    return Finding(
        "converter_limited",
        None,
        None,
        span[0] if span else None,
        "s",
        excluded=False,
        because=f"{'; '.join(words)} (log of the converter alone: {source})",
        disposition="the terms are those of sensor and converter together; what is left for the sensor stands beside them",
    )
