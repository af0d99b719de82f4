"""Each quantity a requirement can limit, estimated for a decision.

References
----------
Resolution: decision threshold 1.96 sqrt(2) sigma(tau) for the difference of two adjacent averages, whose variance is
twice the Allan variance by definition; a step seen with 90 % needs (1.96 + 1.28) sqrt(2) sigma.
Choice of threshold by the relative uncertainty and choice of prior: by simulation, see reference/formulas.md.
"""

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from stillbench.assessment.evidence import Estimate, Evidence
from stillbench.assessment.uncertainty import normal_quantile
from stillbench.deviation.averaging import averaging_factors
from stillbench.deviation.intervals import chi_square_limits, mixture_of
from stillbench.deviation.overlapping import pooled_deviation
from stillbench.foundation.arrays import FloatArray
from stillbench.likelihood.profile import likelihood_threshold
from stillbench.terms.covariance import curve_edf
from stillbench.terms.mixture import Mixture
from stillbench.vocabulary.quantity import TIME_POWERS, role_of
from stillbench.vocabulary.record import Record
from stillbench.vocabulary.specification import Requirement

LIKELY = 0.6827
PRECISE = 0.10
"""Up to this relative uncertainty the chi-square threshold of one-sided bounds holds its level; above, the two-sided one."""
SEEN_90 = 0.90
DRAWS = 20_000
SEED = 40_961
USABLE_SHARE = 10
FULL_BAND = 0.499
"""Top of the band over the sampling rate that counts as all of it."""
WHOLE = 0.01
"""Relative difference of an averaging time from a whole number of samples that is let pass."""
SETTLED = 15.0
"""Averaging time times 2 pi corner from which the filter of a sensor no longer lowers the deviation."""
COVERED = 0.98
"""Share of the averages due in the horizon that must exist for a drift to be judged."""


class NotMeasurableError(Exception):
    """The log cannot give an estimate; the message says why."""


def _thresholds(value: float, lower: float, upper: float, coverage: float) -> float:
    """Return the likelihood threshold of the one-sided bounds."""
    z_two, z_one = normal_quantile(0.5 + coverage / 2.0), normal_quantile(coverage)
    relative = (upper - lower) / (2.0 * z_two * value) if value > 0 else np.inf
    return z_one**2 if relative <= PRECISE else z_two**2


def _functional(
    evidence: Evidence, weights: FloatArray, factor: float, limit: float, coverage: float, prior: str, because: str
) -> Estimate:
    """Estimate factor * sqrt(weights @ theta)."""
    fitted = evidence.fitted
    value = fitted.amplitude(weights)
    lower, upper = fitted.limits(weights, likelihood_threshold(coverage))
    one_sided = fitted.limits(weights, _thresholds(value, lower, upper, coverage))
    likely = fitted.limits(weights, likelihood_threshold(LIKELY))
    draws = np.sqrt(fitted.draw(("flicker",) if prior == "variance" else ()) ** 2 @ weights)
    errors = (fitted.relative_error(weights, limit / factor), fitted.relative_error(weights))
    return Estimate(
        factor * value,
        factor * lower,
        factor * upper,
        (factor * one_sided[0], factor * one_sided[1]),
        (factor * likely[0], factor * likely[1]),
        tuple((factor * draws).tolist()),
        None,
        errors,
        because,
    )


def _normal(value: float, sd: float, coverage: float, because: str, *, grows: bool) -> Estimate:
    """Estimate the size of a value with a normal statistical error."""
    z_two, z_one = normal_quantile(0.5 + coverage / 2.0), normal_quantile(coverage)
    size = abs(value)

    def around(z: float) -> tuple[float, float]:
        return max(0.0, size - z * sd), size + z * sd

    errors = (sd / size, sd / size) if grows and size > 0 else None
    return Estimate(size, *around(z_two), around(z_one), around(1.0), (), (value, sd), errors, because)


def estimate_term(evidence: Evidence, requirement: Requirement, limit: float) -> Estimate:
    """Estimate a noise term."""
    role = role_of(requirement.quantity) or ""
    fitted = evidence.fitted
    factor = fitted.sample_interval ** TIME_POWERS[role]
    _require_trust(evidence)
    if role == "white":
        _require_resolved(evidence)
    name = requirement.quantity.replace(" ", "_")
    term = evidence.model.terms.get(name)
    if term is not None and term.coefficient is None:
        raise NotMeasurableError(term.because)
    if role == "ramp":
        return _ramp(evidence, factor, requirement.coverage)
    if role not in fitted.bins.roles:
        raise NotMeasurableError(
            "this log cannot show it: quantization noise is seen in angle or velocity increments only"
        )
    prior = "variance" if role == "flicker" else "amplitude"
    because = f"{term.state}: {term.because}" if term is not None else "the log is explained without it"
    return _functional(
        evidence, fitted.weights({role: 1.0}), float(factor), limit, requirement.coverage, prior, because
    )


def _ramp(evidence: Evidence, factor: float, coverage: float) -> Estimate:
    fitted = evidence.fitted
    estimate, lower, upper = fitted.shape_limits("ramp", likelihood_threshold(coverage))
    z_one = normal_quantile(coverage)
    _, one_lower, one_upper = fitted.shape_limits("ramp", z_one**2)

    def size(low: float, high: float) -> tuple[float, float]:
        inside = low <= 0 <= high
        return (0.0 if inside else min(abs(low), abs(high))), max(abs(low), abs(high))

    sd = (upper - lower) / (2.0 * normal_quantile(0.5 + coverage / 2.0))
    two, one = size(lower, upper), size(one_lower, one_upper)
    likely = size(estimate - sd, estimate + sd)
    return Estimate(
        abs(estimate) * factor,
        two[0] * factor,
        two[1] * factor,
        (one[0] * factor, one[1] * factor),
        (likely[0] * factor, likely[1] * factor),
        (),
        (estimate * factor, sd * factor),
        None,
        "size of the straight trend of this log; one log cannot show that it repeats",
    )


def _require_resolved(evidence: Evidence) -> None:
    if evidence.clipped:
        raise NotMeasurableError("the readings are saturated, so the noise of this log reads low")
    if evidence.coarse:
        raise NotMeasurableError("the converter does not resolve the white noise of this log")


def _require_trust(evidence: Evidence) -> None:
    if not evidence.trusted:
        raise NotMeasurableError(
            "the model does not explain the spectrum of this log, so its intervals are not to be relied on"
        )


def deviation_at(evidence: Evidence, tau: float, limit: float, coverage: float, factor: float) -> Estimate:
    """Estimate factor * sigma(tau): by the model where it holds, else from the curve itself."""
    _require_resolved(evidence)
    interval = evidence.fitted.sample_interval
    samples = round(tau / interval)
    longest = max(run.n_samples for run in evidence.record.runs)
    if samples < 1:
        raise NotMeasurableError(f"an average of {tau:g} s is shorter than one sample ({interval:.4g} s)")
    if 2 * samples > longest:
        raise NotMeasurableError(f"the log has no two averages of {tau:g} s in one run")
    top = evidence.model.band[1]
    low_pass = evidence.fitted.low_pass
    settled = low_pass is None or 2.0 * np.pi * low_pass.corner * tau / interval >= SETTLED
    if evidence.trusted and settled and (top * interval > FULL_BAND or tau * top >= 1.0):
        weights = evidence.fitted.variance_weights(tau / interval)
        return _functional(evidence, weights, factor, limit, coverage, "amplitude", "from the fitted model")
    _require_whole(tau, samples, interval)
    return _from_curve(evidence, samples, coverage, factor)


def _require_whole(tau: float, samples: int, interval: float) -> None:
    if abs(samples * interval / tau - 1.0) > WHOLE:
        raise NotMeasurableError(
            f"{tau:g} s is no whole number of samples of {interval:.4g} s (the nearest is {samples * interval:.4g} s)"
        )


def _from_curve(evidence: Evidence, samples: int, coverage: float, factor: float) -> Estimate:
    factors = np.array([samples])
    sigma, _ = pooled_deviation(evidence.record.pieces(), factors)
    mixture = mixture_of(evidence.model, evidence.fitted.sample_interval)
    edf = curve_edf(
        mixture if mixture.parts else Mixture({"white": 1.0}), factors, [run.n_samples for run in evidence.record.runs]
    )
    value = factor * float(sigma[0])

    def around(level: float) -> tuple[float, float]:
        low, high = chi_square_limits(factor * sigma, edf, level)
        return float(low[0]), float(high[0])

    chi_square = np.random.default_rng(SEED).chisquare(float(edf[0]), DRAWS)
    draws = value * np.sqrt(float(edf[0]) / chi_square)
    error = float(1.0 / np.sqrt(2.0 * edf[0]))
    return Estimate(
        value,
        *around(coverage),
        around(2.0 * coverage - 1.0),
        around(LIKELY),
        tuple(draws.tolist()),
        None,
        (error, error),
        "from the curve itself, where the model does not hold or a filter is felt",
    )


def estimate_resolution(evidence: Evidence, requirement: Requirement, limit: float) -> Estimate:
    """Estimate the noise-limited resolution at the averaging time of the requirement."""
    z = normal_quantile(0.975)
    if requirement.meaning == "seen 90 %":
        z += normal_quantile(SEEN_90)
    tau = requirement.seconds("averaging_time") or 0.0
    return deviation_at(evidence, tau, limit, requirement.coverage, z * 2.0**0.5)


def estimate_lowest(evidence: Evidence, requirement: Requirement, limit: float) -> Estimate:
    """Estimate the lowest deviation of the fitted model between one sample and a tenth of the longest run."""
    _require_trust(evidence)
    longest = max(run.n_samples for run in evidence.record.runs)
    factors = averaging_factors(max(3, 3 * longest // USABLE_SHARE))
    mixture = replace(mixture_of(evidence.model, evidence.fitted.sample_interval), slope=0.0)
    samples = int(factors[np.argmin(mixture.allan_variance(factors))])
    tau = samples * evidence.fitted.sample_interval
    found = deviation_at(evidence, tau, limit, requirement.coverage, 1.0)
    at_end = " (the end of the usable range: no minimum)" if samples == factors[-1] else ""
    return replace(found, because=f"at an averaging time of {tau:.3g} s{at_end}")


def estimate_bias(evidence: Evidence, requirement: Requirement, limit: float) -> Estimate:  # noqa: ARG001  same signature for all
    """Estimate the size of the mean of the log."""
    if not evidence.same_level:
        raise NotMeasurableError("the sensor was turned during the log, so its mean is no bias")
    because = "mean of this log; it does not tell the bias at the next turn-on"
    return _normal(evidence.bias.value, evidence.bias_error, requirement.coverage, because, grows=True)


def estimate_drift(evidence: Evidence, requirement: Requirement, limit: float) -> Estimate:  # noqa: ARG001  same signature for all
    """Find the largest departure of consecutive averages from the null over the log: an observed value."""
    record = evidence.record
    if not evidence.same_level:
        raise NotMeasurableError("the sensor was turned during the log, so there is no common null")
    interval = record.sample_interval
    null = round((requirement.seconds("null") or 0.0) / interval)
    samples = round((requirement.seconds("averaging_time") or 0.0) / interval)
    first = record.runs[0]
    if samples < 1 or null < 1:
        raise NotMeasurableError("null or averaging time is shorter than one sample")
    for words, count in ((requirement.seconds("averaging_time"), samples), (requirement.seconds("null"), null)):
        _require_whole(words or 0.0, count, interval)
    if any(finding.kind == "backward_stamps" for finding in record.findings):
        raise NotMeasurableError("the stamps fall back during the log, so the time since the null is not known")
    if null + samples > first.n_samples:
        raise NotMeasurableError("the first run of the log is too short for the null and one average")
    over = requirement.seconds("over")
    largest, when, formed = _largest_departure(record, null, samples, np.inf if over is None else first.start + over)
    white = evidence.fitted.fit.theta[evidence.fitted.bins.roles.index("white")]
    end = over if over is not None else record.duration
    due = max(1, int((end - null * interval) / (samples * interval) + 1e-9))
    because = (
        f"observed {when / 3600.0:.2f} h after the start; a bound for this log only, the next may go further (1 in 2)"
    )
    if formed < COVERED * due:
        because = f"{SHORT_OF_HORIZON}: {formed} of {due} averages exist; {because}"
    elif formed < due:
        because += f"; {formed} of {due} averages exist"
    return _normal(largest, float(np.sqrt(white / null)), requirement.coverage, because, grows=False)


def _largest_departure(record: Record, null: int, samples: int, stop: float) -> tuple[float, float, int]:
    """Return the largest departure of consecutive averages from the null, when it was, and how many averages there are.

    Deviations are taken from the first sample, so that a large offset costs no digits.
    """
    first = record.runs[0]
    interval = record.sample_interval
    origin = record.values[first.first]
    reference = float(np.mean(record.values[first.first : first.first + null] - origin))
    largest, when, formed = 0.0, first.start, 0
    for number, run in enumerate(record.runs):
        skipped = null if number == 0 else 0
        begin, start = run.first + skipped, run.start + skipped * interval
        count = (run.last - begin) // samples
        usable = int(np.clip(np.floor((stop - start) / (samples * interval) + 1e-9), 0, count))
        blocks = (record.values[begin : begin + usable * samples] - origin).reshape(-1, samples).mean(axis=1)
        formed += blocks.size
        away = np.abs(blocks - reference)
        if blocks.size and away.max() > abs(largest):
            at = int(np.argmax(away))
            largest, when = float(blocks[at] - reference), start + at * samples * interval
    return largest, when, formed


SHORT_OF_HORIZON = "the log does not cover the time the requirement speaks of"

ESTIMATORS: dict[str, Callable[[Evidence, Requirement, float], Estimate]] = {
    "resolution": estimate_resolution,
    "drift": estimate_drift,
    "bias": estimate_bias,
    "lowest deviation": estimate_lowest,
}
"""By the quantity of the requirement; noise terms are the rest."""
