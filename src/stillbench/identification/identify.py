"""identify_noise: restricted likelihood of the cosine transform, profile intervals, smallest accepted sets of terms."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.progress import SILENT, Progress
from stillbench.identification.band import CORNER_OVER_TOP, Band
from stillbench.identification.choice import RAMP_RATIO, Choice, choose_model, white_alone
from stillbench.identification.remarks import DROOPING, SHORT, longest_run, power_above, remarks
from stillbench.identification.second_opinion import curve_estimates
from stillbench.identification.textbook import read_textbook
from stillbench.likelihood.bins import BinnedPowers, bin_runs
from stillbench.likelihood.fit import Fit
from stillbench.likelihood.fitted import FittedModel
from stillbench.likelihood.goodness import goodness_of_fit
from stillbench.likelihood.profile import likelihood_threshold
from stillbench.likelihood.response import OUTPUT
from stillbench.likelihood.subsets import smallest_accepted
from stillbench.likelihood.whitened import whitened_kurtosis
from stillbench.terms.catalogue import BY_ROLE, FLUCTUATIONS, MEAN_SHAPES
from stillbench.terms.correlated import CorrelatedNoise
from stillbench.vocabulary.deviation_curve import DeviationCurve
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.noise_model import (
    AMBIGUOUS,
    NOT_OBSERVABLE,
    RESOLVED,
    UPPER_BOUND,
    Bins,
    Information,
    NoiseModel,
    NoiseTerm,
    Response,
)
from stillbench.vocabulary.quantity import QUANTITIES, ROLES, TIME_POWERS, Quantity
from stillbench.vocabulary.record import Record

UNRESOLVED_STEPS = 0.4


@dataclass(frozen=True)
class Identification:
    """What came of the fit.

    Attributes
    ----------
    model : NoiseModel
    findings : tuple of Finding
        On the band, the fit and the length of the record.
    fitted : FittedModel
        The full model with its data, for intervals of functions of it.
    """

    model: NoiseModel
    findings: tuple[Finding, ...]
    fitted: FittedModel


def roles_of(record: Record) -> list[str]:
    """Return the roles of the fluctuations that are tried: quantization noise on increments only."""
    return [term.role for term in FLUCTUATIONS if term.role != "quantization" or record.increments]


def identify_noise(
    record: Record,
    curve: DeviationCurve,
    *,
    coverage: float = 0.95,
    findings: Sequence[Finding] = (),
    progress: Progress = SILENT,
) -> Identification:
    """Estimate the noise terms of a record.

    Parameters
    ----------
    record : Record
        Screened: kept runs, finite everywhere.
    curve : DeviationCurve
        Of the same record, for the textbook reading.
    coverage : float
        Of the two-sided intervals.
    findings : sequence of Finding
        Of the screening: a converter too coarse forbids a figure for the white noise.
    progress : Progress

    Returns
    -------
    Identification
    """
    quantity = QUANTITIES[record.quantity]
    terms = [BY_ROLE[role] for role in roles_of(record)]
    bins = bin_runs(record.pieces(), terms, MEAN_SHAPES)
    progress.step(0.2)
    kurtosis = whitened_kurtosis(record.pieces())
    choice = choose_model(bins, coverage) if longest_run(record) >= SHORT else white_alone(bins, coverage)
    progress.step(0.5)
    found = choice.correlation
    fitted = FittedModel(
        choice.bins,
        choice.fit,
        choice.shapes,
        record.sample_interval,
        found.time if found else None,
        found.family if found else (),
        max(0.0, kurtosis - 3.0) / record.n_samples,
        choice.low_pass,
    )
    accepted = [
        tuple(role for role in chosen if role != OUTPUT)
        for chosen in smallest_accepted(
            choice.bins,
            choice.fit,
            shapes=choice.shapes,
            required=[role for role in (CorrelatedNoise.role, OUTPUT) if role in choice.bins.roles],
        )
    ]
    progress.step(0.7)
    made = _terms(fitted, accepted, coverage, record, quantity, choice)
    made = _observable(made, record, findings)
    readings = read_textbook(curve, record.duration)
    second = curve_estimates(record, curve, fitted, coverage) if choice.low_pass is None and choice.band.full else {}
    named = {
        quantity.terms[role]: replace(term, textbook=readings.get(role), curve_estimate=second.get(role))
        for role, term in made.items()
        if role != "quantization" or any("quantization" in chosen for chosen in accepted)
    }
    names = [tuple(quantity.terms[role] for role in chosen) for chosen in accepted]
    ramp = choice.bins.shapes.index("ramp")
    if choice.shapes[ramp]:
        names = [(*chosen, quantity.terms["ramp"]) for chosen in names]
    goodness = goodness_of_fit(choice.bins, choice.fit)
    excess = power_above(choice)
    model = NoiseModel(
        named,
        (),
        tuple(names),
        _band_hz(choice.band, record),
        _response(choice, excess, record),
        goodness,
        _information(choice.bins, choice.fit, record, quantity),
        _spectrum(choice, record),
        kurtosis,
    )
    progress.step(1.0)
    return Identification(model, tuple(remarks(model, choice, excess, record, quantity)), fitted)


def _terms(
    fitted: FittedModel,
    accepted: Sequence[tuple[str, ...]],
    coverage: float,
    record: Record,
    quantity: Quantity,
    choice: Choice,
) -> dict[str, NoiseTerm]:
    """Return the terms by role, in the order of the catalogue of roles."""
    threshold = likelihood_threshold(coverage)
    made = {}
    for role in ROLES:
        if role not in fitted.bins.roles:
            continue
        weights = fitted.weights({role: 1.0})
        limits = fitted.limits(weights, threshold)
        made[role] = _term(role, fitted.amplitude(weights), limits, accepted, record, quantity)
    found = choice.correlation
    if found is not None:
        interval = record.sample_interval
        ends = {"correlation_time_lower_s": found.lower, "correlation_time_upper_s": found.upper}
        made["correlated"] = replace(
            made["correlated"],
            parameters={
                "correlation_time_s": found.time * interval,
                **{name: end * interval for name, end in ends.items() if np.isfinite(end)},
            },
            because=f"correlation time {found.time * interval:.3g} s, likelihood ratio {found.ratio:.1f} against none",
        )
    estimate, lower, upper, ratio = choice.ramp
    ramp = choice.bins.shapes.index("ramp")
    if choice.shapes[ramp]:
        estimate = float(choice.fit.beta[ramp])
    made["ramp"] = _ramp_term(estimate, lower, upper, ratio, record, quantity)
    return made


def to_si(role: str, interval: float) -> float:
    """Return the factor from a unit-sample coefficient to SI."""
    return float(interval ** TIME_POWERS[role])


def _term(
    role: str,
    amplitude: float,
    limits: tuple[float, float],
    accepted: Sequence[tuple[str, ...]],
    record: Record,
    quantity: Quantity,
) -> NoiseTerm:
    factor = to_si(role, record.sample_interval)
    coefficient = amplitude * factor
    lower, upper = limits[0] * factor, limits[1] * factor
    count = sum(role in chosen for chosen in accepted)
    if count == len(accepted) and lower > 0:
        state, because = RESOLVED, "the log cannot be explained without it"
    elif count == len(accepted):
        state, because = (
            AMBIGUOUS,
            "the log cannot be explained without it at 1 %, and its interval holds zero all the same",
        )
        lower = 0.0
    elif count:
        others = " or ".join(
            " + ".join(quantity.terms[name].replace("_", " ") for name in chosen) for chosen in accepted
        )
        state, because = AMBIGUOUS, f"the log is explained as well by {others}; it is too short to tell"
        lower = 0.0
    else:
        state, because, lower = UPPER_BOUND, "the log is explained without it", 0.0
    return NoiseTerm(coefficient, lower, upper, quantity.term_unit(role), state, because)


def _ramp_term(
    estimate: float, lower: float, upper: float, ratio: float, record: Record, quantity: Quantity
) -> NoiseTerm:
    factor = to_si("ramp", record.sample_interval)
    resolved = ratio > RAMP_RATIO
    because = (
        f"a straight trend, likelihood ratio {ratio:.1f} against none"
        if resolved
        else f"no trend beyond what the random terms explain (likelihood ratio {ratio:.1f})"
    )
    if resolved:
        lower, upper = min(lower, estimate), max(upper, estimate)
    return NoiseTerm(
        estimate * factor,
        lower * factor,
        upper * factor,
        quantity.term_unit("ramp"),
        RESOLVED if resolved else UPPER_BOUND,
        because,
    )


def _observable(terms: Mapping[str, NoiseTerm], record: Record, findings: Sequence[Finding]) -> dict[str, NoiseTerm]:
    """Take the figures off terms that this log cannot show."""
    checked = dict(terms)

    def blank(role: str, because: str) -> None:
        checked[role] = replace(
            checked[role], coefficient=None, lower=None, upper=None, state=NOT_OBSERVABLE, because=because
        )

    longest = longest_run(record)
    if longest < SHORT:
        missing = NoiseTerm(None, None, None, "", NOT_OBSERVABLE, "")
        for role in ("flicker", "walk", "ramp"):
            checked[role] = replace(missing, unit=QUANTITIES[record.quantity].term_unit(role))
            blank(role, f"the longest run has {longest} samples, {SHORT} are needed to tell it from white noise")
    for finding in findings:
        if finding.kind == "coarse_converter" and finding.measure is not None and finding.measure < UNRESOLVED_STEPS:
            blank("white", "the noise of single samples lies below 0.4 steps of the converter: it is not resolved")
    return checked


def _band_hz(band: Band, record: Record) -> tuple[float, float]:
    longest = max(run.n_samples for run in record.runs) * record.sample_interval
    return 1.0 / (2.0 * longest), band.top / record.sample_interval


def _response(choice: Choice, excess: float, record: Record) -> Response | None:
    if choice.low_pass is not None:
        return Response(choice.low_pass.shape.words, choice.low_pass.corner / record.sample_interval)
    if choice.band.full or excess > DROOPING:
        return None
    return Response("low-pass, shape not fitted", CORNER_OVER_TOP * choice.band.top / record.sample_interval)


def _information(bins: BinnedPowers, full: Fit, record: Record, quantity: Quantity) -> Information:
    """Fisher information of the squared coefficients in SI; noise behind a filter of the sensor is left free."""
    kept = np.array([role != OUTPUT for role in bins.roles])
    covariance = np.linalg.pinv(full.information, hermitian=True)
    matrix = np.linalg.pinv(covariance[np.ix_(kept, kept)], hermitian=True) if not kept.all() else full.information
    roles = [role for role in bins.roles if role != OUTPUT]
    scale = np.array([to_si(role, record.sample_interval) ** 2 for role in roles])
    return Information(tuple(quantity.terms[role] for role in roles), matrix / np.outer(scale, scale))


def _spectrum(choice: Choice, record: Record) -> Bins:
    """Powers of all bins (the whole band), shapes taken off, with the fitted model, as two-sided densities in SI."""
    whole, fit = choice.whole, choice.fit
    power = whole.power.copy()
    if choice.shapes.any():
        beta = np.where(choice.shapes, fit.beta, 0.0)
        power = power - 2.0 * whole.cross @ beta + np.einsum("r,jrs,s->j", beta, whole.gram, beta)
    frequency, dof, power, model = _merged(
        whole.frequency, whole.dof, np.maximum(power, 0.0), whole.basis @ fit.theta, len(record.runs)
    )
    interval = record.sample_interval
    return Bins(frequency / interval, dof, power * interval, model * interval)


def _merged(
    frequency: FloatArray, dof: FloatArray, power: FloatArray, model: FloatArray, n_runs: int
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Join the bins of several runs into 24 a decade, so that a log in many runs is not drawn many times."""
    if n_runs == 1:
        return frequency, dof, power, model
    group = np.floor(24.0 * np.log10(frequency)).astype(int)
    starts = np.flatnonzero(np.append(True, np.diff(group) != 0))
    total = np.add.reduceat(dof, starts)

    def mean(values: FloatArray) -> FloatArray:
        return np.asarray(np.add.reduceat(dof * values, starts) / total)

    return mean(frequency), total, mean(power), mean(model)
