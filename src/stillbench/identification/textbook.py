"""The reading of the curve by rule of thumb, beside the fit for readers used to it; named as such, used for nothing.

References
----------
IEEE Std 952-1997, annex C (from memory): N is read at 1 s on the line of slope -1/2, K at 3 s on slope +1/2, R at sqrt 2 s
on slope +1, Q at sqrt 3 s on slope -1; the lowest point over 0.664 is called bias instability.
"""

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.terms.flicker import FLOOR
from stillbench.vocabulary.deviation_curve import DeviationCurve
from stillbench.vocabulary.noise_model import TextbookReading

LINES = {"quantization": (-1.0, 3.0**0.5), "white": (-0.5, 1.0), "walk": (0.5, 3.0), "ramp": (1.0, 2.0**0.5)}
"""Slope of the line of each term, and the averaging time (s) at which it is read."""
NEAR = 0.15
USABLE_SHARE = 10
"""Points up to a tenth of the log."""
SPAN = 2.0
"""A slope is taken over a factor of two in averaging time."""


def _local_slope(tau: FloatArray, deviation: FloatArray) -> FloatArray:
    slopes = np.empty(tau.size)
    for i, t in enumerate(tau):
        near = (tau >= t / SPAN) & (tau <= t * SPAN) & (deviation > 0)
        x, y = np.log(tau[near]), np.log(deviation[near])
        slopes[i] = np.polyfit(x, y, 1)[0] if x.size > 1 else np.nan
    return slopes


def read_textbook(curve: DeviationCurve, duration: float) -> dict[str, TextbookReading]:
    """Return a reading for every role, None where the curve has no stretch of the slope."""
    usable = (curve.tau <= duration / USABLE_SHARE) & (curve.deviation > 0)
    tau, deviation = curve.tau[usable], curve.deviation[usable]
    if tau.size < 3:  # noqa: PLR2004  no slope can be seen in two points
        nothing = TextbookReading(None, "fewer than three points up to a tenth of the log")
        return dict.fromkeys((*LINES, "flicker"), nothing)
    slopes = _local_slope(tau, deviation)
    readings = {}
    for role, (slope, at) in LINES.items():
        on_line = np.abs(slopes - slope) < NEAR
        if on_line.any():
            best = int(np.argmin(np.where(on_line, np.abs(slopes - slope), np.inf)))
            value = float(deviation[best] * (at / tau[best]) ** slope)
            # A line read at its time is N/sqrt(1), K sqrt(3/3), R sqrt(2)/sqrt(2), Q sqrt(3)/sqrt(3): the coefficient.
            how = f"line of slope {slope:+g} through the point at {tau[best]:.3g} s, read at {at:.3g} s"
            readings[role] = TextbookReading(value, how)
        else:
            readings[role] = TextbookReading(None, f"no stretch of slope {slope:+g}")
    lowest = int(np.argmin(deviation))
    at_end = lowest in (0, tau.size - 1)
    where = ", at the end of the range: no minimum" if at_end else ""
    readings["flicker"] = TextbookReading(
        None if at_end else float(deviation[lowest] / np.sqrt(FLOOR)),
        f"lowest point, at {tau[lowest]:.3g} s, over 0.664{where}",
    )
    return readings
