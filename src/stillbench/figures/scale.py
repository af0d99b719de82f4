"""A scale factor: the course of the log with its steps, and what the line leaves."""

from typing import TYPE_CHECKING

import numpy as np

from stillbench.figures.style import GREY, INK, PETROL, RINGS, SHADE, time_unit
from stillbench.foundation.units import parse_unit

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from stillbench.vocabulary.scale_factor import ScaleFactor


def draw_steps(axes: "Axes", result: "ScaleFactor") -> None:
    """Draw the course of the readings with each step shaded and numbered.

    Parameters
    ----------
    axes : Axes
    result : ScaleFactor
    """
    unit = parse_unit(result.reading_unit)
    divisor, name = time_unit(float(result.time[-1]))
    axes.plot(result.time / divisor, result.reading / unit.factor, color=PETROL, linewidth=0.9)
    top = axes.get_ylim()[1]
    for number, step in enumerate(result.steps, start=1):
        axes.axvspan(step.start / divisor, step.stop / divisor, color=SHADE, linewidth=0, zorder=0)
        axes.text(
            (step.start + step.stop) / 2 / divisor, top, str(number), ha="center", va="bottom", color=GREY, fontsize=7
        )
    axes.set_xlabel(f"time / {name}")
    axes.set_ylabel(f"reading / {unit.printed}")
    axes.margins(x=0)


def draw_residuals(axes: "Axes", result: "ScaleFactor") -> None:
    """Draw what the line leaves of each step, in percent of the largest input, over what was applied.

    Parameters
    ----------
    axes : Axes
    result : ScaleFactor
    """
    spoken = result.quantity_unit.split("/")[0] if result.method == "turns" else result.quantity_unit
    unit = parse_unit(spoken)
    applied = np.array([step.applied for step in result.steps]) / unit.factor
    largest = max(abs(step.applied) for step in result.steps)
    percent = np.array([step.residual for step in result.steps]) / (abs(result.factor) * largest) * 100.0
    axes.axhline(0.0, color=INK, linewidth=0.6)
    axes.plot(applied, percent, markersize=4.5, **RINGS)
    for number, (x, y) in enumerate(zip(applied, percent, strict=True), start=1):
        axes.annotate(str(number), (x, y), xytext=(5, 2), textcoords="offset points", color=GREY, fontsize=7)
    reach = 1.3 * float(np.abs(percent).max()) or 1.0
    axes.set_ylim(-reach, reach)
    word = {"turns": "angle turned", "rates": "rate applied"}.get(result.method, "acceleration applied")
    axes.set_xlabel(f"{word} / {unit.printed}")
    axes.set_ylabel("left by the line / % of the largest")
    axes.margins(x=0.08)
