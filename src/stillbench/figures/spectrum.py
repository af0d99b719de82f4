"""Spectrum of the log with the fitted model, and what is left between them."""

from typing import TYPE_CHECKING

import numpy as np

from stillbench.figures.style import GREY, INK, PETROL, RINGS, SHADE, label_decade_steps, logarithmic
from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.units import parse_unit

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from stillbench.vocabulary.characterization import ChannelResult

TWO_SIGMA = 2.0


def draw_spectrum(axes: "Axes", channel: "ChannelResult") -> None:
    """Draw binned amplitude densities (two-sided) and the model."""
    bins = channel.noise.bins
    unit = parse_unit(channel.report_unit)
    logarithmic(axes, "x")
    logarithmic(axes, "y")
    axes.grid(visible=True, which="major")
    axes.set_axisbelow(True)
    seen = bins.power > 0
    density = np.sqrt(bins.power) / unit.factor
    single = seen & (bins.dof < 2)  # noqa: PLR2004  single coefficients scatter widely
    axes.plot(
        bins.frequency[single], density[single], linestyle="none", marker=".", markersize=3, color=PETROL, alpha=0.55
    )
    many = seen & ~single
    axes.plot(
        bins.frequency[many],
        density[many],
        markersize=2.8,
        markeredgewidth=0.8,
        **RINGS,
    )
    model = np.sqrt(bins.model) / unit.factor
    axes.plot(bins.frequency, model, color=INK)
    if channel.converter is not None:
        alone = channel.converter.noise.bins
        own = np.sqrt(alone.model) / unit.factor
        axes.plot(alone.frequency, own, color=GREY, linewidth=1.0, dashes=(2.2, 1.4))
        axes.annotate(
            "converter alone (model)",
            (float(alone.frequency[-1]), float(own[-1])),
            xytext=(-4, -9),
            textcoords="offset points",
            color=GREY,
            fontsize=7.5,
            ha="right",
        )
    _shade_unused(axes, channel)
    axes.set_xlabel("frequency / Hz")
    axes.set_ylabel(f"density / ({unit.printed}/\N{SQUARE ROOT}Hz)")
    axes.set_xlim(bins.frequency[0] / 1.3, bins.frequency[-1] * 1.15)
    values = np.concatenate([density[many], model]) if many.any() else density[seen]
    if channel.converter is not None:
        values = np.append(values, np.sqrt(channel.converter.noise.bins.model) / unit.factor)
    axes.set_ylim(float(values[values > 0].min()) / 2.5, float(values.max()) * 3.0)
    label_decade_steps(axes, "y")


def residual_scores(power: FloatArray, model: FloatArray, dof: FloatArray) -> FloatArray:
    """Return the powers over the model as standard normal scores, by the cube root.

    References
    ----------
    E. B. Wilson and M. M. Hilferty, Proc. Natl. Acad. Sci. 17 (1931) 684.
    """
    small = 2.0 / (9.0 * dof)
    return np.asarray((np.cbrt(power / model) - (1.0 - small)) / np.sqrt(small))


def draw_residuals(axes: "Axes", channel: "ChannelResult") -> None:
    """Draw residual scores of the bins against frequency; under the model 95 % lie within two."""
    bins = channel.noise.bins
    usable = bins.model > 0
    scores = residual_scores(bins.power[usable], bins.model[usable], bins.dof[usable])
    frequency = bins.frequency[usable]
    logarithmic(axes, "x")
    axes.axhspan(-TWO_SIGMA, TWO_SIGMA, color=PETROL, alpha=0.10, linewidth=0)
    axes.axhline(0.0, color=GREY, linewidth=0.6)
    limit = float(np.clip(np.max(np.abs(scores)) * 1.1, 4.0, 12.0))
    inside = np.abs(scores) <= limit
    axes.plot(
        frequency[inside],
        scores[inside],
        markersize=2.8,
        markeredgewidth=0.8,
        **RINGS,
    )
    for sign, marker in ((1, "^"), (-1, "v")):
        off = ~inside & (np.sign(scores) == sign)
        axes.plot(
            frequency[off],
            np.full(int(off.sum()), sign * limit * 0.97),
            linestyle="none",
            marker=marker,
            color=INK,
            markersize=3.5,
        )
    axes.set_ylim(-limit, limit)
    axes.set_xlim(bins.frequency[0] / 1.3, bins.frequency[-1] * 1.15)
    _shade_unused(axes, channel)
    axes.set_xlabel("frequency / Hz")
    axes.set_ylabel("standard score")


def _shade_unused(axes: "Axes", channel: "ChannelResult") -> None:
    top = channel.noise.band[1]
    last = float(channel.noise.bins.frequency[-1])
    if top < last * 0.99:
        axes.axvspan(top, last * 1.15, color=SHADE, linewidth=0, zorder=0.2)
        axes.text(
            top,
            0.98,
            " not used in the fit",
            transform=axes.get_xaxis_transform(),
            color=GREY,
            fontsize=7,
            ha="left",
            va="top",
        )
