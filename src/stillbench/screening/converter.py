"""The step of the converter against the noise."""

import numpy as np

from stillbench.screening.outcome import Outcome, nothing
from stillbench.screening.view import RecordView
from stillbench.vocabulary.finding import Finding

FINE = 0.6
REFUSED = 0.4
UNSEEN = 0.2


def check_converter(view: RecordView) -> Outcome:
    """Find out whether the noise is resolved by the converter.

    White rounding noise of step^2/12 adds to the white noise; below 0.6 steps it is no longer white, below 0.4 the white
    noise cannot be told (W. R. Bennett, Bell Syst. Tech. J. 27 (1948) 446; figures by simulation).
    """
    record, step = view.record, view.step
    if step is None:
        return nothing(record)
    noise = np.sqrt(max(0.0, view.noise**2 - step**2 / 12.0))
    ratio = float(noise / step)
    if ratio >= FINE:
        return nothing(record)
    refused = ratio < REFUSED
    finding = Finding(
        "coarse_converter",
        None,
        None,
        ratio,
        "steps",
        excluded=False,
        because="the noise of single samples is "
        + (f"{ratio:.2g} steps" if ratio > UNSEEN else f"below {UNSEEN:g} steps")
        + " of the converter",
        disposition="the white noise is not resolved: no figure is given for it"
        if refused
        else "the rounding is no longer quite white: the white noise may be off by some percent",
    )
    return Outcome((finding,), nothing(record).marked)
