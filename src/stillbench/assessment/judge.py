"""judge: requirements against evidence.

References
----------
JCGM 106:2012: guarded acceptance, conformance probability. ISO 14253-1: one-sided bounds at 95 %.
"""

import math
from collections.abc import Sequence
from pathlib import Path

import numpy as np

from stillbench.assessment.conformance import conformance_probability
from stillbench.assessment.estimates import ESTIMATORS, PRECISE, SHORT_OF_HORIZON, NotMeasurableError, estimate_term
from stillbench.assessment.evidence import Estimate, Evidence
from stillbench.assessment.uncertainty import normal_quantile, with_common_factor
from stillbench.foundation.errors import UnitError, UsageError
from stillbench.foundation.toml_source import load_toml
from stillbench.foundation.units import parse_quantity, parse_unit
from stillbench.vocabulary.quantity import QUANTITIES, Quantity, is_density, role_of
from stillbench.vocabulary.specification import Requirement, Specification
from stillbench.vocabulary.verdict import CONFORMS, FAILS, UNDECIDED, Verdict

POWER = 0.90
MOST_LOGS = 32
"""A log longer than this many of the present ones is not planned from one undecided log."""
SEED = 61_553
NOT_MEASURED = ("temperature coefficient", "warm-up time")


def load_specification(path: Path) -> Specification:
    """Read a specification (TOML).

    Raises
    ------
    TextFileError
        With all faults, their lines and nearest names.
    """
    return load_toml(path, Specification, "specification")


def limit_in_si(requirement: Requirement, quantity: Quantity) -> tuple[float, str] | None:
    """Return the limit in SI and the SI unit, or None when the requirement does not speak of this kind of channel.

    A spectral density (a unit with Hz) is one-sided, as data sheets mean it: N = n/sqrt(2).
    """
    role = role_of(requirement.quantity)
    if role is not None and requirement.quantity.replace(" ", "_") != quantity.terms.get(role):
        return None
    si = quantity.term_unit(role) if role is not None else quantity.unit
    value, unit = parse_quantity(requirement.limit, "the limit")
    if unit.dimension != parse_unit(si).dimension:
        return None
    limit = value * unit.factor
    if is_density(requirement.quantity, unit.text):
        limit /= math.sqrt(2.0)
    return limit, si


def require_applicable(specification: Specification, quantities: Sequence[Quantity]) -> None:
    """Refuse a specification with a requirement that speaks of none of the channels.

    Raises
    ------
    UsageError
    """
    for requirement in specification.requirement:
        if requirement.quantity in NOT_MEASURED:
            continue
        if not any(limit_in_si(requirement, quantity) for quantity in quantities):
            kinds = " or ".join(sorted({quantity.name for quantity in quantities}))
            raise UsageError(
                f"requirement {requirement.id!r} limits {requirement.quantity} to {requirement.limit!r}, and the log"
                f" holds {kinds}",
                "a limit in a unit of what the log holds",
                "check unit and name of the quantity; a voltage becomes a rate by a scale factor in the log sheet",
            )


def described(requirement: Requirement) -> str:
    """Return the quantity with its definition, in words."""
    parts = [requirement.quantity]
    if requirement.quantity == "resolution":
        meaning = "step seen with 90 %" if requirement.meaning == "seen 90 %" else "decision threshold"
        parts = [f"noise-limited resolution, {requirement.averaging_time} averages, {meaning}"]
    elif requirement.quantity == "drift":
        parts = [f"drift: largest departure, {requirement.averaging_time} averages, null {requirement.null}"]
        if requirement.over:
            parts.append(f"over {requirement.over}")
    elif requirement.quantity == "bias instability":
        parts = ["bias instability (B, not the floor)"]
    return ", ".join(parts)


def judge(specification: Specification, evidence: Evidence) -> tuple[Verdict, ...]:
    """Judge every requirement that speaks of this kind of channel.

    Parameters
    ----------
    specification : Specification
    evidence : Evidence

    Returns
    -------
    tuple of Verdict
    """
    quantity = QUANTITIES[evidence.record.quantity]
    verdicts = []
    for requirement in specification.requirement:
        found = limit_in_si(requirement, quantity)
        if requirement.quantity in NOT_MEASURED:
            value, unit = parse_quantity(requirement.limit, "the limit")
            verdicts.append(
                _undecided(requirement, value, unit.text, f"a {requirement.quantity} is not measured by this version")
            )
        elif found is not None:
            verdicts.append(_judged(requirement, evidence, *found))
    return tuple(verdicts)


def _undecided(requirement: Requirement, limit: float, unit: str, because: str) -> Verdict:
    _, spoken = parse_quantity(requirement.limit, "the limit")
    return Verdict(
        requirement.id,
        requirement.clause,
        described(requirement),
        None,
        None,
        None,
        None,
        limit,
        unit,
        spoken.text,
        UNDECIDED,
        None,
        None,
        because,
    )


def _judged(requirement: Requirement, evidence: Evidence, limit: float, unit: str) -> Verdict:
    estimator = ESTIMATORS.get(requirement.quantity, estimate_term)
    try:
        estimate = estimator(evidence, requirement, limit)
    except NotMeasurableError as error:
        return _undecided(requirement, limit, unit, str(error))
    relative = evidence.relative_uncertainty
    coverage = requirement.coverage
    z_two, z_one = normal_quantile(0.5 + coverage / 2.0), normal_quantile(coverage)
    lower, upper = with_common_factor(estimate.value, estimate.lower, estimate.upper, relative, z_two)
    low_bound, high_bound = with_common_factor(estimate.value, *estimate.one_sided, relative, z_one)
    decision, because = _decide(requirement, estimate, low_bound, high_bound, limit)
    probability = _conformance_probability(estimate, relative, limit)
    length = None
    if decision == UNDECIDED and requirement.kind != "typical" and estimate.errors is not None:
        length = deciding_length(estimate, limit, relative, coverage, evidence.record.duration)
        if length is None:
            because += "; a longer log of this sensor would not decide it"
    _, spoken = parse_quantity(requirement.limit, "the limit")
    if is_density(requirement.quantity, spoken.text):
        because += "; the limit is a one-sided spectral density, N = n/sqrt(2)"
    return Verdict(
        requirement.id,
        requirement.clause,
        described(requirement),
        estimate.value,
        lower,
        upper,
        low_bound if decision == FAILS else high_bound,
        limit,
        unit,
        spoken.text,
        decision,
        probability,
        length,
        because,
    )


def _decide(requirement: Requirement, estimate: Estimate, low: float, high: float, limit: float) -> tuple[str, str]:
    level = f"{100 * requirement.coverage:g} %"
    short = estimate.because.startswith(SHORT_OF_HORIZON)
    if requirement.kind == "typical":
        decision, reason = UNDECIDED, "a typical figure is no limit: no decision is possible"
    elif requirement.rule == "simple":
        within = estimate.value <= limit
        decision = FAILS if not within else UNDECIDED if short else CONFORMS
        reason = f"the estimate is {'within' if within else 'beyond'} the limit (simple acceptance)"
    elif low > limit:
        decision, reason = FAILS, f"the lower {level} bound is beyond the limit"
    elif high > limit:
        decision, reason = UNDECIDED, f"the limit lies between the {level} bounds"
    else:
        decision = UNDECIDED if short else CONFORMS
        reason = f"the upper {level} bound is within the limit"
    return decision, f"{reason}; {estimate.because}"


def _conformance_probability(estimate: Estimate, relative: float, limit: float) -> float:
    """Probability that the value is within the limit: it speaks of a population spread evenly around the limit."""
    if estimate.normal is not None:
        value, uncertainty = estimate.normal
        both = math.hypot(uncertainty, relative * value)
        return conformance_probability(value, both, lower_limit=-limit, upper_limit=limit)
    draws = np.array(estimate.draws)
    factors = 1.0 + relative * np.random.default_rng(SEED).standard_normal(draws.size)
    return float(np.mean(draws <= limit * factors))


def deciding_length(
    estimate: Estimate, limit: float, relative: float, coverage: float, duration: float
) -> tuple[float, float | None] | None:
    """Return the range of log lengths that would decide with 90 % probability, s.

    T_new = T [(z_cov u_L + z_90 u_x)/ln(x/L)]^2 with the relative standard errors u_L at the limit and u_x at the
    estimate, evaluated at both ends of the 68 % interval of x. The upper end is None where that interval holds the limit.

    Returns None when even the lower end asks for more than 32 such logs, or the scale factor alone forbids a decision.
    """
    at_limit, at_estimate = estimate.errors or (np.inf, np.inf)
    if not np.isfinite(at_estimate) or estimate.value == 0:
        # Nothing is seen: the bound falls as 1/T to 1/sqrt(T), whatever the term.
        over = estimate.one_sided[1] / limit
        shortest, longest = duration * over, duration * over**2
    else:
        # Above 10 % the bound that decides is the two-sided one.
        z_bound = normal_quantile(coverage if at_estimate <= PRECISE else 0.5 + coverage / 2.0)
        need = z_bound * at_limit + normal_quantile(POWER) * at_estimate
        lengths = []
        for value in estimate.likely:
            distance = abs(math.log(value / limit)) if value > 0 else np.inf
            # What the scale factor takes of the distance no log can win back.
            left = distance - z_bound * relative
            lengths.append(duration * (need / left) ** 2 if left > 0 else np.inf)
        shortest = min(lengths)
        longest = np.inf if estimate.likely[0] <= limit <= estimate.likely[1] else max(lengths)
    if not shortest <= MOST_LOGS * duration:
        return None
    return float(max(shortest, duration)), (float(longest) if longest <= MOST_LOGS * duration else None)


def spoken_unit(text: str, quantity: Quantity) -> str:
    """Check a report unit against the quantity and return its canonical spelling.

    Raises
    ------
    UnitError
    """
    unit = parse_unit(text)
    if unit.dimension != parse_unit(quantity.unit).dimension:
        raise UnitError(
            unit.text, f"the report unit is {unit.text!r}", f"a unit of {quantity.name}, like {quantity.unit}"
        )
    return unit.text
