"""identify_noise: restricted likelihood of the cosine transform, profile intervals, smallest accepted sets of terms."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray
from stillbench.foundation.progress import SILENT, Progress
from stillbench.identification.band import CORNER_OVER_TOP, NYQUIST, Band, largest_band
from stillbench.identification.textbook import read_textbook
from stillbench.likelihood.bins import BinnedPowers, bin_runs
from stillbench.likelihood.fit import Fit, maximise
from stillbench.likelihood.fitted import FittedModel
from stillbench.likelihood.goodness import goodness_of_fit
from stillbench.likelihood.profile import likelihood_threshold, profile_limits, shape_limits
from stillbench.likelihood.subsets import smallest_accepted
from stillbench.likelihood.whitened import whitened_kurtosis
from stillbench.terms.catalogue import BY_ROLE, FLUCTUATIONS, MEAN_SHAPES
from stillbench.terms.mixture import Mixture
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
from stillbench.vocabulary.quantity import QUANTITIES, TIME_POWERS, Quantity
from stillbench.vocabulary.record import Record

RAMP_RATIO = 9.0
"""Likelihood ratio from which a ramp is accepted; a Wald ratio is not safe, a random walk looks like a trend."""
POOR_FIT = 3.0
DROOPING = 0.8
"""Power in the top octave, over what the terms give, below which the sensor is taken to be filtered."""
SHORT = 256
"""Samples below which flicker and walk are not told from white noise at all."""
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
    progress.step(0.3)
    threshold = likelihood_threshold(coverage)
    no_shape = np.zeros(len(bins.shapes), dtype=bool)
    # First the ramp in the full band, then the band with the ramp if there is one.
    ramp = bins.shapes.index("ramp")
    shapes = no_shape.copy()
    shapes[ramp] = shape_limits(bins, ramp, threshold)[3] > RAMP_RATIO
    band = largest_band(bins, shapes)
    progress.step(0.5)
    used = bins.below(band.top)
    estimate, lower, upper, ratio = shape_limits(used, ramp, threshold)
    shapes = no_shape.copy()
    shapes[ramp] = ratio > RAMP_RATIO
    full = maximise(used, shapes=shapes)
    if shapes[ramp]:
        estimate = float(full.beta[ramp])
    goodness = goodness_of_fit(used, full.spectrum)
    excess = _power_above(bins, full, band)
    accepted = smallest_accepted(used, full, shapes=shapes)
    progress.step(0.7)
    longest = max(record.pieces(), key=len)
    theta = dict(zip(used.roles, full.theta.tolist(), strict=True))
    kurtosis = whitened_kurtosis(longest, Mixture(theta)) if band.full else 3.0
    limits = {
        role: profile_limits(used, full, np.eye(len(used.roles))[i], threshold, shapes=shapes)
        for i, role in enumerate(used.roles)
    }
    limits["white"] = _widened(limits["white"], full, used, kurtosis, threshold)
    made = {role: _term(role, i, full, limits[role], accepted, record, quantity) for i, role in enumerate(used.roles)}
    made["ramp"] = _ramp_term(estimate, lower, upper, ratio, record, quantity)
    made = _observable(made, record, findings)
    readings = read_textbook(curve, record.duration)
    named = {
        quantity.terms[role]: replace(term, textbook=readings.get(role))
        for role, term in made.items()
        if role != "quantization" or any("quantization" in chosen for chosen in accepted)
    }
    names = [tuple(quantity.terms[role] for role in chosen) for chosen in accepted]
    if shapes[ramp]:
        names = [(*chosen, quantity.terms["ramp"]) for chosen in names]
    model = NoiseModel(
        named,
        (),
        tuple(names),
        _band_hz(band, record),
        _response(band, excess, record),
        goodness,
        _information(used, full, record, quantity),
        _spectrum(bins, full, shapes, record),
        kurtosis,
    )
    progress.step(1.0)
    fitted = FittedModel(used, full, shapes, record.sample_interval)
    return Identification(model, tuple(_findings(band, excess, goodness, record, quantity)), fitted)


def to_si(role: str, interval: float) -> float:
    """Return the factor from a unit-sample coefficient to SI."""
    return float(interval ** TIME_POWERS[role])


def _widened(
    limits: tuple[float, float], full: Fit, bins: BinnedPowers, kurtosis: float, threshold: float
) -> tuple[float, float]:
    """Widen the interval of the white noise by the variance (kurtosis - 3)/n of ln N^2 that heavy tails add."""
    n_samples = float(bins.dof.sum())
    excess = max(0.0, kurtosis - 3.0) / n_samples
    estimate = float(np.sqrt(full.theta[bins.roles.index("white")]))
    lower, upper = limits
    if excess == 0 or estimate == 0:
        return limits
    added = threshold * excess / 4.0  # of ln N, at the coverage of the threshold
    new_upper = estimate * np.exp(np.sqrt(np.log(upper / estimate) ** 2 + added))
    new_lower = estimate * np.exp(-np.sqrt(np.log(estimate / lower) ** 2 + added)) if lower > 0 else 0.0
    return float(new_lower), float(new_upper)


def _term(
    role: str,
    index: int,
    full: Fit,
    limits: tuple[float, float],
    accepted: Sequence[tuple[str, ...]],
    record: Record,
    quantity: Quantity,
) -> NoiseTerm:
    factor = to_si(role, record.sample_interval)
    coefficient = float(np.sqrt(full.theta[index])) * factor
    lower, upper = limits[0] * factor, limits[1] * factor
    count = sum(role in chosen for chosen in accepted)
    if count == len(accepted) and lower > 0:
        state, because = RESOLVED, "the log cannot be explained without it"
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
            terms[role], coefficient=None, lower=None, upper=None, state=NOT_OBSERVABLE, because=because
        )

    longest = max(run.n_samples for run in record.runs)
    if longest < SHORT:
        for role in ("flicker", "walk", "ramp"):
            blank(role, f"the longest run has {longest} samples, {SHORT} are needed to tell it from white noise")
    for finding in findings:
        if finding.kind == "coarse_converter" and finding.measure is not None and finding.measure < UNRESOLVED_STEPS:
            blank("white", "the noise of single samples lies below 0.4 steps of the converter: it is not resolved")
    return checked


def _band_hz(band: Band, record: Record) -> tuple[float, float]:
    longest = max(run.n_samples for run in record.runs) * record.sample_interval
    return 1.0 / (2.0 * longest), band.top / record.sample_interval


def _power_above(bins: BinnedPowers, full: Fit, band: Band) -> float:
    """Return the power in the top octave of the full band over what the terms fitted below give there."""
    top = bins.frequency > NYQUIST / 2.0
    if band.full or not top.any():
        return 1.0
    expected = float(bins.dof[top] @ (bins.basis[top] @ full.theta))
    return float(bins.dof[top] @ bins.power[top]) / expected if expected > 0 else np.inf


def _response(band: Band, excess: float, record: Record) -> Response | None:
    if band.full or excess > DROOPING:
        return None
    return Response("low-pass, shape not fitted", CORNER_OVER_TOP * band.top / record.sample_interval)


def _information(bins: BinnedPowers, full: Fit, record: Record, quantity: Quantity) -> Information:
    """Fisher information of the squared coefficients in SI."""
    scale = np.array([to_si(role, record.sample_interval) ** 2 for role in bins.roles])
    matrix = full.information / np.outer(scale, scale)
    return Information(tuple(quantity.terms[role] for role in bins.roles), matrix)


def _spectrum(bins: BinnedPowers, full: Fit, shapes: BoolArray, record: Record) -> Bins:
    """Powers of all bins (the whole band), shapes taken off, with the fitted model, as two-sided densities in SI."""
    power = bins.power.copy()
    if shapes.any():
        beta = np.where(shapes, full.beta, 0.0)
        power = power - 2.0 * bins.cross @ beta + np.einsum("r,jrs,s->j", beta, bins.gram, beta)
    frequency, dof, power, model = _merged(
        bins.frequency, bins.dof, np.maximum(power, 0.0), bins.basis @ full.theta, len(record.runs)
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


def _findings(band: Band, excess: float, goodness: float, record: Record, quantity: Quantity) -> list[Finding]:
    findings = []
    top = band.top / record.sample_interval
    if not band.full:
        drooping = excess <= DROOPING
        corner = CORNER_OVER_TOP * top
        findings.append(
            Finding(
                "low_pass" if drooping else "poor_fit",
                None,
                None,
                top,
                "Hz",
                excluded=True,
                because=(
                    f"the spectrum falls towards the top of the band, to {100 * excess:.2g} % of what the terms give: a"
                    f" low-pass in the sensor, corner about {corner:.2g} Hz, shape not fitted"
                    if drooping
                    else f"the terms do not explain the spectrum above {2 * top:.3g} Hz (goodness of fit {band.misfit:.1f};"
                    f" power in the top octave {excess:.3g} times theirs)"
                ),
                disposition=f"fitted below {top:.3g} Hz only; the terms hold for averaging times above {1.0 / top:.3g} s",
            )
        )
    if goodness > POOR_FIT or not band.fits:
        findings.append(
            Finding(
                "poor_fit",
                None,
                None,
                goodness,
                "standard deviations",
                excluded=False,
                because=f"the sum of the terms does not explain the spectrum (goodness of fit {goodness:.1f})",
                disposition="the terms are the best of their kind, their intervals are not to be relied on; look at the"
                " residuals for a line, a bump or a drift",
            )
        )
    longest = max(run.n_samples for run in record.runs)
    if longest < SHORT:
        name = quantity.terms["flicker"].replace("_", " ")
        findings.append(
            Finding(
                "short_record",
                None,
                None,
                float(longest),
                "samples",
                excluded=False,
                because=f"the longest run has {longest} samples",
                disposition=f"only the white noise is given; {name} and slower terms are not observable",
            )
        )
    return findings
