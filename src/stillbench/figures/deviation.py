"""The Allan deviation with its band, the fitted model, its terms, and the limits of the specification."""

from collections.abc import Mapping
from typing import TYPE_CHECKING

import numpy as np

from stillbench.figures.style import (
    GREY,
    INK,
    PETROL,
    RINGS,
    SHADE,
    bracketed,
    label_decade_steps,
    logarithmic,
    with_halo,
)
from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.units import parse_unit
from stillbench.terms.catalogue import SHAPE_BY_ROLE
from stillbench.terms.mixture import term_of
from stillbench.vocabulary.noise_model import AMBIGUOUS, RESOLVED
from stillbench.vocabulary.quantity import TIME_POWERS, role_of

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.text import Annotation

    from stillbench.vocabulary.characterization import ChannelResult

DASHES: Mapping[str, tuple[float, ...]] = {
    "quantization": (6, 2, 1, 2),
    "white": (5, 2.5),
    "flicker": (1, 1.2, 4, 1.2),
    "walk": (1.2, 1.6),
    "correlated": (3, 1.5, 1, 1.5),
    "ramp": (8, 2, 1, 2, 1, 2),
}
CONVERTER_DASHES = (2.2, 1.4)
FEW_AVERAGES = 10.0
TINY_SHARE = 0.05


def term_course(
    role: str, coefficient: float, tau: FloatArray, interval: float, correlation_time: float | None = None
) -> FloatArray:
    """Return the Allan deviation of one term, SI, at averaging times ``tau`` (all times in s)."""
    unit_sample = coefficient / interval ** TIME_POWERS[role]
    factors = np.maximum(tau / interval, 1.0)
    shape = SHAPE_BY_ROLE.get(role)
    samples = None if correlation_time is None else correlation_time / interval
    variance = shape.allan_variance(factors) if shape else term_of(role, samples).allan_variance(factors)
    return np.asarray(np.abs(unit_sample) * np.sqrt(variance))


def draw_deviation(
    axes: "Axes", channel: "ChannelResult", labels: Mapping[str, str], marks: tuple[tuple[float, float, str], ...] = ()
) -> None:
    """Draw curve, band, model and terms with their labels.

    Parameters
    ----------
    axes : Axes
    channel : ChannelResult
    labels : mapping of term name to str
        Text beside each term's line.
    marks : tuple of (tau s, deviation SI, text)
        Limits of the specification, drawn at their averaging time.
    """
    curve = channel.curve
    unit = parse_unit(channel.report_unit)
    tau, deviation = curve.tau, curve.deviation / unit.factor
    positive = deviation > 0
    logarithmic(axes, "x")
    logarithmic(axes, "y")
    axes.grid(visible=True, which="major")
    axes.set_axisbelow(True)
    few = channel.duration / FEW_AVERAGES
    if tau[-1] > few:
        axes.axvspan(few, tau[-1] * 1.25, color=SHADE, linewidth=0, zorder=0.2)
    if curve.lower is not None and curve.upper is not None:
        axes.fill_between(
            tau, curve.lower / unit.factor, curve.upper / unit.factor, color=PETROL, alpha=0.16, linewidth=0
        )
    axes.plot(
        tau[positive],
        deviation[positive],
        markersize=3.0,
        markeredgewidth=0.9,
        **RINGS,
        zorder=3,
    )
    low, high = _range(deviation[positive], None if curve.upper is None else curve.upper / unit.factor)
    axes.set_xlim(tau[0] / 1.25, tau[-1] * 1.25)
    axes.set_ylim(low, high)
    if curve.model is not None:
        axes.plot(tau, curve.model / unit.factor, color=INK, linewidth=1.1, zorder=4)
    if channel.converter is not None:
        _draw_converter(axes, channel, unit.factor)
    places = Places(axes, [(float(t), float(d)) for t, d in zip(tau[positive], deviation[positive], strict=True)])
    _draw_terms(axes, channel, labels, unit.factor, places)
    for number, (at, value, text) in enumerate(marks, start=20):
        if tau[0] <= at <= tau[-1] and low < value / unit.factor < high:
            axes.plot(
                [at / 1.35, at * 1.35],
                [value / unit.factor] * 2,
                color=INK,
                linewidth=2.4,
                solid_capstyle="butt",
                zorder=5,
            )
            places.put(text, (at, value / unit.factor), MARK_PLACES, 7.5, number, lead=True)
    if tau[-1] > few:
        axes.text(
            np.sqrt(few * tau[-1] * 1.25),
            high / 1.15,
            "fewer than\n10 averages",
            color=GREY,
            fontsize=7,
            ha="center",
            va="top",
        )
    axes.set_xlabel("averaging time \N{GREEK SMALL LETTER TAU} / s")
    axes.set_ylabel(f"Allan deviation / {bracketed(unit.printed)}")
    label_decade_steps(axes, "y")


def _draw_converter(axes: "Axes", channel: "ChannelResult", factor: float) -> None:
    """Draw the curve of the converter alone, with its name at its left end."""
    if channel.converter is None:
        return
    alone = channel.converter.curve
    inside = (alone.deviation > 0) & (alone.tau <= channel.curve.tau[-1] * 1.25)
    course = alone.deviation[inside] / factor
    axes.plot(alone.tau[inside], course, color=GREY, linewidth=1.0, dashes=CONVERTER_DASHES, zorder=1.5)
    low, high = axes.get_ylim()
    axes.set_ylim(min(low, max(low / 30.0, float(course.min()) / 1.6)), high)
    told = axes.annotate(
        "converter alone",
        (float(alone.tau[inside][0]), float(course[0])),
        xytext=(4, -9),
        textcoords="offset points",
        color=GREY,
        fontsize=7.5,
    )
    with_halo(told, 40)


def _range(deviation: FloatArray, upper: FloatArray | None) -> tuple[float, float]:
    low, high = float(deviation.min()), float(deviation.max())
    if upper is not None:
        high = max(high, min(float(np.nanmax(upper)), 3.0 * float(deviation[-1])))
    return low / 2.2, high * 1.6


def _draw_terms(
    axes: "Axes", channel: "ChannelResult", labels: Mapping[str, str], factor: float, places: "Places"
) -> None:
    tau = np.geomspace(channel.curve.tau[0], channel.curve.tau[-1], 60)
    interval = channel.sample_interval
    shown: list[tuple[str, str, FloatArray]] = []
    for name, term in channel.noise.terms.items():
        role = role_of(name)
        if role is None or not term.coefficient or term.state not in (RESOLVED, AMBIGUOUS):
            continue
        shown.append(
            (
                name,
                role,
                term_course(role, term.coefficient, tau, interval, term.parameters.get("correlation_time_s")) / factor,
            )
        )
    total = np.sqrt(np.sum([course**2 for *_, course in shown], axis=0)) if shown else np.ones(tau.size)
    low, high = axes.get_ylim()
    for number, (name, role, course) in enumerate(shown, start=1):
        axes.plot(tau, course, color=INK, linewidth=0.8, dashes=DASHES[role], zorder=2)
        share = course**2 / total**2
        rules = np.flatnonzero((share >= 0.5 * share.max()) & (course > low) & (course < high))
        i = int(rules[len(rules) // 2]) if rules.size else int(np.argmax(share))
        candidates = FALLING_PLACES if role in ("white", "quantization") else RISING_PLACES
        places.put(labels.get(name, name), (float(tau[i]), float(course[i])), candidates, 7.8, number)


Place = tuple[float, float, str, str]
"""Offset in points to the right and up, horizontal and vertical side that touches the anchor."""

_RING: tuple[Place, ...] = tuple(
    (dx, dy, "left" if dx >= 0 else "right", "bottom" if dy >= 0 else "top")
    for reach in (10.0, 22.0, 36.0, 52.0)
    for dx, dy in ((reach, reach), (-reach, reach), (reach, -reach), (-reach, -reach))
)
FALLING_PLACES = tuple(place for place in _RING if place[0] > 0 and place[1] > 0) + _RING
RISING_PLACES = tuple(place for place in _RING if place[1] < 0) + _RING
MARK_PLACES: tuple[Place, ...] = (
    (16.0, 0.0, "left", "center"),
    (-16.0, 0.0, "right", "center"),
    (0.0, 5.0, "center", "bottom"),
    (0.0, -5.0, "center", "top"),
    *((dx, dy, "left" if dx > 0 else "right", "center") for dy in (14.0, -14.0, 28.0, -28.0) for dx in (24.0, -24.0)),
)
LEAD = {"arrowstyle": "-", "color": GREY, "linewidth": 0.5, "shrinkA": 1, "shrinkB": 1}


class Places:
    """Finds room for texts: the first place where one covers neither a point of the curve nor another text."""

    def __init__(self, axes: "Axes", points: list[tuple[float, float]]) -> None:
        self._axes = axes
        figure = axes.get_figure(root=True)
        if figure is None:
            raise ValueError(axes)
        figure.draw_without_rendering()  # so that the layout is known
        self._renderer = figure.canvas.get_renderer()  # type: ignore[attr-defined]
        self._points = np.array([axes.transData.transform(point) for point in points])
        self._boxes: list[tuple[float, float, float, float]] = []

    def put(
        self,
        text: str,
        anchor: tuple[float, float],
        candidates: tuple[Place, ...],
        size: float,
        number: int,
        *,
        lead: bool = False,
    ) -> None:
        """Write ``text`` near ``anchor`` (data coordinates), at the candidate that covers least."""
        best, least = candidates[0], float("inf")
        for place in candidates:
            told = self._annotate(text, anchor, place, size)
            cost = self._cost(told.get_window_extent(self._renderer).extents)
            told.remove()
            if cost < least:
                best, least = place, cost
            if cost == 0:
                break
        told = self._annotate(text, anchor, best, size, lead=lead and abs(best[1]) > size)
        with_halo(told, number)
        left, bottom, right, top = told.get_window_extent(self._renderer).extents
        self._boxes.append((float(left), float(bottom), float(right), float(top)))

    def _annotate(
        self, text: str, anchor: tuple[float, float], place: Place, size: float, *, lead: bool = False
    ) -> "Annotation":
        dx, dy, horizontal, vertical = place
        return self._axes.annotate(
            text,
            anchor,
            xytext=(dx, dy),
            textcoords="offset points",
            fontsize=size,
            ha=horizontal,
            va=vertical,
            linespacing=1.25,
            zorder=6,
            arrowprops=LEAD if lead else None,
        )

    def _cost(self, box: tuple[float, float, float, float]) -> float:
        left, bottom, right, top = (float(edge) for edge in box)
        frame = self._axes.get_window_extent(self._renderer).extents
        outside = (
            max(0.0, frame[0] - left)
            + max(0.0, right - frame[2])
            + max(0.0, frame[1] - bottom)
            + max(0.0, top - frame[3])
        )
        margin = 3.0
        covered = (
            (self._points[:, 0] > left - margin)
            & (self._points[:, 0] < right + margin)
            & (self._points[:, 1] > bottom - margin)
            & (self._points[:, 1] < top + margin)
        )
        over = sum(
            max(0.0, min(right, r) - max(left, l) + margin) * max(0.0, min(top, t) - max(bottom, b) + margin)
            for l, b, r, t in self._boxes
        )
        return 20.0 * outside + 10.0 * float(covered.sum()) + over
