"""calibrate_scale: from a log of known turns, rates or positions to scale factor, null, asymmetry and non-linearity.

A turn about the input axis leaves the Earth's part along that axis as it is, so stops before and after take it off together
with the null; at steady rates and in positions it is taken off by latitude and attitude.

References
----------
JCGM 100 (GUM), 4.2 (scatter of repeated observations), 5.1 (combination), G.4 (Welch-Satterthwaite), H.3 (line).
"""

import math
from collections.abc import Sequence

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.errors import LogError, UsageError
from stillbench.foundation.suggestions import plural
from stillbench.scale.line import coverage_factor, effective_dof, fit_line
from stillbench.scale.steps import find_plateaus, find_turns
from stillbench.vocabulary.record import Record
from stillbench.vocabulary.scale_factor import Contribution, KnownStep, ScaleFactor

FEWEST_STEPS = 4
COURSE = 1_200
LEAST_APART = 0.01
"""Of the largest input: sizes closer to each other count as one."""


def calibrate_scale(
    record: Record,
    method: str,
    applied: Sequence[float],
    *,
    quantity_unit: str,
    applied_uncertainty: float = 0.0,
    time_base: float = 0.0,
    known_input: float = 0.0,
    coverage: float = 0.95,
) -> ScaleFactor:
    """Find a scale factor.

    Parameters
    ----------
    record : Record
        Readings (V, count, ...), one run.
    method : str
        ``turns`` (angles, with stops between), ``rates`` (steady rates) or ``positions`` (accelerations).
    applied : sequence of float
        Angle of each turn (rad, signed), or rate (rad/s) or acceleration (m/s^2) of each plateau, in their order; a list that
        is shorter than what is seen is taken over and over.
    quantity_unit : str
        In which the scale factor is spoken, such as ``deg/s``.
    applied_uncertainty : float
        Standard uncertainty of what is applied, SI, the same error in all steps (a protractor, a stop).
    time_base : float
        Relative standard uncertainty of the sampling interval (turns only).
    known_input : float
        Earth rate along the axis, SI.
    coverage : float

    Returns
    -------
    ScaleFactor

    Raises
    ------
    LogError
        When the steps seen do not fit those declared.
    UsageError
        When fewer than four are declared or seen, or all are equal where they must differ.
    """
    if len(record.runs) > 1 or record.missing.any():
        raise LogError("the log has gaps or missing samples", "one unbroken run", "choose a part with --from and --to")
    values, interval = record.values, record.sample_interval
    spans = find_turns(values, interval) if method == "turns" else find_plateaus(values, interval)
    inputs = _applied(applied, len(spans), method)
    if method == "turns":
        observed, null, null_error = _integrals(values, spans, interval)
        columns = [inputs]
    else:
        observed = np.array([_mean(values[first:last]) for first, last in spans])
        null = null_error = 0.0
        columns = [inputs, np.ones(inputs.size)]
    both = _shows_asymmetry(inputs, method) and inputs.size > len(columns) + 1
    fit = fit_line(columns, observed)
    factor = float(fit.values[0])
    asymmetry, asymmetry_error = _asymmetry(columns, inputs, observed, factor) if both else (None, None)
    if method != "turns":
        null = float(fit.values[1]) - factor * known_input
        null_error = math.sqrt(float(fit.covariance[1, 1]))
    else:
        null -= factor * known_input
    parts = [("scatter of the steps", math.sqrt(float(fit.covariance[0, 0])) / abs(factor), float(fit.dof))]
    if applied_uncertainty:
        size = np.abs(inputs)
        shared = size.sum() / float(size @ size) if method == "turns" else 1.0 / float(size.max())
        parts.append(("what was applied", applied_uncertainty * float(shared), math.inf))
    if time_base and method == "turns":
        parts.append(("time base", time_base, math.inf))
    relative = math.sqrt(sum(u**2 for _, u, _ in parts))
    dof = effective_dof([(u, nu) for _, u, nu in parts])
    half = coverage_factor(dof, coverage) * relative * abs(factor)
    single = _single(observed, inputs, 0.0 if method == "turns" else float(fit.values[1]))
    return ScaleFactor(
        method,
        record.label,
        record.unit_text,
        quantity_unit,
        factor,
        factor - half,
        factor + half,
        relative,
        dof,
        coverage,
        null,
        null_error,
        asymmetry,
        asymmetry_error,
        float(np.abs(fit.residuals).max() / (abs(factor) * np.abs(inputs).max())),
        float(single.std(ddof=1) / abs(factor)) if single.size > 1 else 0.0,
        known_input,
        tuple(
            KnownStep(first * interval, last * interval, float(x), float(y), float(r))
            for (first, last), x, y, r in zip(spans, inputs, observed, fit.residuals, strict=True)
        ),
        tuple(Contribution(*part) for part in parts),
        _remarks(inputs, method, both=both, shared=applied_uncertainty > 0),
        *_course(values, interval),
    )


def _applied(applied: Sequence[float], seen: int, method: str) -> FloatArray:
    word = {"turns": "turn", "rates": "plateau"}.get(method, "position")
    if not applied or seen % len(applied):
        raise LogError(
            f"{plural(seen, word)} {'is' if seen == 1 else 'are'} seen and {len(applied)} declared",
            "as many as are declared, or a whole number of rounds of them",
            "correct the list, or choose a part of the log with --from and --to",
        )
    inputs = np.array(list(applied) * (seen // len(applied)))
    if inputs.size < FEWEST_STEPS:
        raise UsageError(f"{plural(inputs.size, word)} in all", f"at least {FEWEST_STEPS}", "turn it more often")
    if method != "turns" and np.ptp(inputs) == 0:
        raise UsageError("all inputs are equal", "at least two that differ")
    if not np.abs(inputs).min() > 0 and method == "turns":
        raise UsageError("a turn of no angle is declared", "angles other than zero")
    return inputs


def _mean(values: FloatArray) -> float:
    return float(values[0] + np.mean(values - values[0]))


def _integrals(
    values: FloatArray, spans: Sequence[tuple[int, int]], interval: float
) -> tuple[FloatArray, float, float]:
    """Integral over each turn less the null, which runs straight from the stop before to the stop after; null and its error."""
    edges = [0, *(edge for span in spans for edge in span), values.size]
    stops = list(zip(edges[::2], edges[1::2], strict=True))
    levels = np.array([_mean(values[first:last]) for first, last in stops])
    middles = np.array([(first + last - 1) / 2.0 for first, last in stops])
    integrals = []
    for i, (first, last) in enumerate(spans):
        null = np.interp(np.arange(first, last), middles[i : i + 2], levels[i : i + 2])
        integrals.append(float(np.sum(values[first:last] - null)) * interval)
    error = float(levels.std(ddof=1) / math.sqrt(levels.size)) if levels.size > 1 else 0.0
    return np.array(integrals), float(levels.mean()), error


def _single(observed: FloatArray, inputs: FloatArray, level: float) -> FloatArray:
    """Scale factor of every step by itself."""
    some = np.abs(inputs) > 0.1 * np.abs(inputs).max()
    return np.asarray((observed[some] - level) / inputs[some])


def _shows_asymmetry(inputs: FloatArray, method: str) -> bool:
    """Whether both directions are there and, where the null is fitted too, inputs of more than one size to part the two."""
    sizes = np.abs(inputs)
    apart = method == "turns" or float(np.ptp(sizes)) > LEAST_APART * float(sizes.max())
    return bool((inputs > 0).any() and (inputs < 0).any() and apart)


def _asymmetry(
    columns: Sequence[FloatArray], inputs: FloatArray, observed: FloatArray, factor: float
) -> tuple[float, float]:
    """Factor for positive over factor for negative input, less one; with its standard uncertainty."""
    fit = fit_line([*columns, np.abs(inputs)], observed)
    return 2.0 * float(fit.values[-1]) / factor, 2.0 * math.sqrt(float(fit.covariance[-1, -1])) / abs(factor)


def _remarks(inputs: FloatArray, method: str, *, both: bool, shared: bool) -> tuple[str, ...]:
    remarks = []
    if not both:
        remarks.append("all in one direction, of one size, or too few: asymmetry is not seen")
    if not shared:
        remarks.append(
            "no uncertainty of what was applied is declared: the interval holds the scatter only"
            " (--applied-uncertainty says it)"
        )
    if method == "turns" and np.unique(np.abs(inputs)).size == 1:
        remarks.append("one angle only: a constant error in it is not seen in the scatter")
    return tuple(remarks)


def _course(values: FloatArray, interval: float) -> tuple[FloatArray, FloatArray]:
    starts = np.unique(np.linspace(0, values.size, min(COURSE, values.size), endpoint=False).astype(np.int64))
    counts = np.diff(np.append(starts, values.size))
    return (starts + (counts - 1) / 2.0) * interval, np.add.reduceat(values, starts) / counts
