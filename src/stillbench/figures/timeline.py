"""The log over time."""

from typing import TYPE_CHECKING

import numpy as np

from stillbench.figures.style import GREY, INK, PETROL, SHADE, bracketed, time_unit, with_halo
from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.units import parse_unit

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from stillbench.vocabulary.characterization import ChannelResult

WIDE_SHARE = 0.004
"""Of the axis: shorter exclusions are marked by a tick at the foot."""
OUTLIER_ROOM = 1.2
LABEL_SHARE = 0.09
"""Of the axis that a word takes: nearer ones are not written twice."""
SCATTERED = ("missing_samples", "duplicate_stamps", "not_finite")
"""Their span is that from the first to the last, not what was left out."""


def draw_timeline(axes: "Axes", channel: "ChannelResult") -> None:
    """Draw mean and extremes of equal spans, with what was left out.

    Parameters
    ----------
    axes : Axes
    channel : ChannelResult
    """
    timeline = channel.timeline
    unit = parse_unit(channel.log_unit)
    duration = float(timeline.time[-1])
    divisor, name = time_unit(duration)
    time = timeline.time / divisor
    low, mean, high = (column / unit.factor for column in (timeline.minimum, timeline.mean, timeline.maximum))
    # Large readings are shown from their mean, so that the axis has digits to spare for the noise.
    spread = float(np.median(high - low)) or 1.0
    middle = float(np.median(mean))
    offset = 0.0
    if abs(middle) > 200.0 * spread:
        offset = float(f"{middle:.6g}")
    low, mean, high = low - offset, mean - offset, high - offset
    steps = np.diff(timeline.time)
    gap = np.flatnonzero(steps > 3.0 * np.median(steps))
    for part in np.split(np.arange(time.size), np.asarray(gap, dtype=int) + 1):
        axes.fill_between(time[part], low[part], high[part], color=PETROL, alpha=0.22, linewidth=0, rasterized=False)
        axes.plot(time[part], mean[part], color=PETROL, linewidth=0.9)
    spans = _spans(channel, divisor, float(time[0]), float(time[-1]))
    still = np.ones(time.size, dtype=bool)
    for left, right, _ in spans:
        still &= (time < left) | (time > right)
    # The axis is that of what is used; what was left out may reach beyond it.
    shown_part = still if still.any() else ~still
    bottom, top = _limits(low[shown_part], mean[shown_part], high[shown_part])
    axes.set_ylim(bottom, top)
    axes.set_xlim(0 if time[0] < 0.02 * time[-1] else time[0], (duration + np.median(np.diff(timeline.time))) / divisor)
    span = axes.get_xlim()[1] - axes.get_xlim()[0]
    last = -np.inf
    for left, right, word in spans:
        if right - left > WIDE_SHARE * span:
            axes.axvspan(left, right, color=SHADE, linewidth=0, zorder=0)
            middle = (left + right) / 2
            if middle - last > LABEL_SHARE * span:
                axes.text(middle, top, word, color=GREY, fontsize=7, ha="center", va="bottom")
                last = middle
        else:
            axes.plot([left], [top], marker="v", color=INK, markersize=4, clip_on=False, linestyle="none")
    shown = f"{channel.quantity} / {bracketed(unit.printed)}"
    if offset:
        shown = f"{channel.quantity} less {offset:.6g} / {unit.printed}"
    axes.set_ylabel(shown)
    axes.set_xlabel(f"time / {name}")
    if (np.max(high) > top) or (np.min(low) < bottom):
        told = axes.text(
            0.995,
            0.03,
            "extremes reach beyond the figure",
            transform=axes.transAxes,
            ha="right",
            color=GREY,
            fontsize=7,
        )
        with_halo(told, 1)
    axes.margins(x=0)


def _spans(channel: "ChannelResult", divisor: float, first: float, last: float) -> list[tuple[float, float, str]]:
    """Return what was left out within the axis: start, stop and a word, in the unit of the axis."""
    spans = []
    for finding in channel.findings:
        if not finding.excluded or finding.start is None or finding.stop is None or finding.kind in SCATTERED:
            continue
        left, right = max(first, finding.start / divisor), min(last, finding.stop / divisor)
        if right < first or left > last:
            continue
        word = "left out" if "on request" in finding.because else finding.kind.replace("_", " ")
        spans.append((left, right, word))
    return spans


def _limits(low: FloatArray, mean: FloatArray, high: FloatArray) -> tuple[float, float]:
    """Limits that hold all of the log but for a few extremes."""
    spread = float(np.quantile(high - low, 0.5))
    bottom = max(
        float(low.min()), float(np.quantile(low, 0.02)) - OUTLIER_ROOM / 2 * spread, float(mean.min()) - 3 * spread
    )
    top = min(
        float(high.max()), float(np.quantile(high, 0.98)) + OUTLIER_ROOM / 2 * spread, float(mean.max()) + 3 * spread
    )
    room = 0.06 * (top - bottom) or 1.0
    return bottom - room, top + room
