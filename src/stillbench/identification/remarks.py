"""Findings of the identification stage."""

import numpy as np

from stillbench.identification.band import CORNER_OVER_TOP, NYQUIST
from stillbench.identification.choice import Choice
from stillbench.likelihood.response import AVERAGE, FilterFit
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.noise_model import RESOLVED, NoiseModel
from stillbench.vocabulary.quantity import Quantity
from stillbench.vocabulary.record import Record

SETTLED = 15.0
"""Averaging time times 2 pi corner above which a low-pass lowers the deviation by less than 2 %."""
POOR_FIT = 3.5
DROOPING = 0.8
"""Power in the top octave, over what the terms give, below which the sensor is taken to be filtered."""
SHORT = 256
"""Samples below which flicker and walk are not told from white noise at all."""


def power_above(choice: Choice) -> float:
    """Return the power in the top octave of the full band over what the terms fitted below give there."""
    top = choice.whole.frequency > NYQUIST / 2.0
    if choice.band.full or choice.low_pass is not None or not top.any():
        return 1.0
    dof, power = choice.whole.dof[top], choice.whole.power[top]
    expected = float(dof @ (choice.whole.basis[top] @ choice.fit.theta))
    return float(dof @ power) / expected if expected > 0 else np.inf


def longest_run(record: Record) -> int:
    """Return the number of samples in the longest run."""
    return max(run.n_samples for run in record.runs)


def remarks(model: NoiseModel, choice: Choice, excess: float, record: Record, quantity: Quantity) -> list[Finding]:
    """Return what the reader must know of the fit: band, filter, misfit, disagreement of methods, length."""
    band, goodness = choice.band, model.goodness
    findings = []
    top = band.top / record.sample_interval
    if choice.low_pass is not None and model.response is not None and model.response.corner is not None:
        corner = model.response.corner
        findings.append(
            Finding(
                "low_pass",
                None,
                None,
                corner,
                "Hz",
                excluded=False,
                because=f"the spectrum falls towards the top of the band as behind {_named_shape(choice.low_pass, record)}",
                disposition="fitted with the noise; the white noise given is its level below the corner, and the terms hold"
                f" for averaging times above {SETTLED / (2.0 * np.pi * corner):.3g} s",
            )
        )
    elif not band.full:
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
                    f"the spectrum falls towards the top of the band, to {100 * excess:.2g} % of what the terms below give, as"
                    f" behind a low-pass with its corner about {corner:.2g} Hz, or under correlated noise: the log cannot tell"
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
    if goodness <= POOR_FIT:  # where nothing fits, two wrong figures differ as a matter of course
        findings += _disagreements(model)
    longest = longest_run(record)
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


def _named_shape(found: FilterFit, record: Record) -> str:
    if found.shape is AVERAGE:
        return f"a moving average of {found.parameter:.0f} samples ({found.parameter * record.sample_interval:.3g} s)"
    return f"a low-pass of {found.shape.words}, corner {found.corner / record.sample_interval:.3g} Hz"


def _disagreements(model: NoiseModel) -> list[Finding]:
    """Terms on which the fit and the curve differ by more than their joint uncertainty."""
    findings = []
    for name, term in model.terms.items():
        second = term.curve_estimate
        if second is None or term.coefficient is None or term.lower is None or term.upper is None:
            continue
        above = second.coefficient > term.coefficient
        own = term.upper - term.coefficient if above else term.coefficient - term.lower
        other = second.coefficient - second.lower if above else second.upper - second.coefficient
        allowed = float(np.hypot(own, other))
        apart = abs(second.coefficient - term.coefficient)
        if apart > allowed > 0 and term.state == RESOLVED:
            findings.append(
                Finding(
                    "methods_disagree",
                    None,
                    None,
                    apart / allowed,
                    "times their joint uncertainty",
                    excluded=False,
                    because=f"{name.replace('_', ' ')}: the curve gives {second.coefficient / term.coefficient:.3g} times the"
                    " figure of the fit",
                    disposition="the fit is reported; look for what the model does not hold (a line, a change during the log)",
                )
            )
    return findings
