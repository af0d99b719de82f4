"""Ink, hues, type and axes of every figure."""

from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Iterator

    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from matplotlib.text import Text

INK = "#1b2430"
GREY = "#5b6675"
HAIRLINE = "#d5d9df"
SHADE = "#eceef1"
PETROL = "#0f6b75"
ORANGE = "#c2571a"
VIOLET = "#6a4c93"
PAPER = "#ffffff"

MILLIMETRE = 1 / 25.4
WIDTH = 178.0
"""mm, of the wide column on A4 and Letter."""

_SUPERSCRIPTS = str.maketrans(
    "-0123456789",
    "\N{SUPERSCRIPT MINUS}\N{SUPERSCRIPT ZERO}\N{SUPERSCRIPT ONE}\N{SUPERSCRIPT TWO}"
    "\N{SUPERSCRIPT THREE}\N{SUPERSCRIPT FOUR}\N{SUPERSCRIPT FIVE}\N{SUPERSCRIPT SIX}"
    "\N{SUPERSCRIPT SEVEN}\N{SUPERSCRIPT EIGHT}\N{SUPERSCRIPT NINE}",
)
PLAIN_DECADES = (-2, 3)
MOST_DECADES = 9

SETTINGS: dict[str, Any] = {
    "axes.edgecolor": GREY,
    "axes.labelcolor": INK,
    "axes.labelsize": 8.5,
    "axes.linewidth": 0.6,
    "axes.spines.right": False,
    "axes.spines.top": False,
    "figure.facecolor": "none",
    "axes.facecolor": "none",
    "font.family": "DejaVu Sans",
    "font.size": 8.0,
    "grid.color": HAIRLINE,
    "grid.linewidth": 0.5,
    "lines.linewidth": 1.1,
    "svg.fonttype": "none",
    "text.color": INK,
    "xtick.color": GREY,
    "xtick.labelcolor": INK,
    "ytick.color": GREY,
    "ytick.labelcolor": INK,
    "xtick.labelsize": 8.0,
    "ytick.labelsize": 8.0,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "xtick.minor.width": 0.4,
    "ytick.minor.width": 0.4,
    "xtick.minor.size": 1.8,
    "ytick.minor.size": 1.8,
    "path.simplify": True,
}

RINGS: dict[str, Any] = {"linestyle": "none", "marker": "o", "markerfacecolor": "none", "markeredgecolor": PETROL}
"""How measured points are drawn, everywhere."""


@contextmanager
def sheet(height: float, width: float = WIDTH) -> "Iterator[tuple[Figure, Axes]]":
    """Give a figure of ``width`` x ``height`` mm with one Axes in the house style, without touching global settings."""
    import matplotlib as mpl  # noqa: PLC0415  costs a second, wanted only where a figure is drawn
    from matplotlib.backends.backend_agg import FigureCanvasAgg  # noqa: PLC0415
    from matplotlib.figure import Figure  # noqa: PLC0415

    with mpl.rc_context(SETTINGS):  # type: ignore[arg-type]  # it wants the keys spelled as literals
        figure = Figure(figsize=(width * MILLIMETRE, height * MILLIMETRE), layout="constrained")
        FigureCanvasAgg(figure)  # knows the size of texts
        yield figure, figure.subplots()


def power_of_ten(value: float) -> str:
    """Write 0.01 to 1000 plainly and other powers of ten with a raised exponent."""
    import math  # noqa: PLC0415

    exponent = round(math.log10(value))
    if PLAIN_DECADES[0] <= exponent <= PLAIN_DECADES[1]:
        return f"{10.0**exponent:g}"
    return f"10{str(exponent).translate(_SUPERSCRIPTS)}"


def logarithmic(axes: "Axes", which: str) -> None:
    """Make an axis logarithmic with decades labelled in plain characters."""
    from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter  # noqa: PLC0415

    getattr(axes, f"set_{which}scale")("log")
    axis = getattr(axes, f"{which}axis")
    axis.set_major_locator(LogLocator(numticks=MOST_DECADES + 4))
    axis.set_major_formatter(FuncFormatter(lambda value, _: power_of_ten(value)))
    axis.set_minor_locator(LogLocator(subs=tuple(range(2, 10)), numticks=100))
    axis.set_minor_formatter(NullFormatter())


def label_decade_steps(axes: "Axes", which: str) -> None:
    """Label 2 and 5 of each decade where fewer than two decades are shown."""
    import math  # noqa: PLC0415

    from matplotlib.ticker import FuncFormatter  # noqa: PLC0415

    low, high = getattr(axes, f"get_{which}lim")()
    if math.log10(high / low) < 2.0:  # noqa: PLR2004  two decades have two or three labels of their own

        def step(value: float, _: object) -> str:
            mantissa = round(value / 10.0 ** math.floor(math.log10(value) + 1e-9))
            return f"{value:.3g}" if mantissa in (2, 5) else ""

        getattr(axes, f"{which}axis").set_minor_formatter(FuncFormatter(step))


def bracketed(unit: str) -> str:
    """Put a compound unit in brackets, so that quantity / unit reads as one quotient."""
    return f"({unit})" if any(sign in unit for sign in "/\N{DOT OPERATOR}\N{SQUARE ROOT}") else unit


def with_halo(text: "Text", number: int) -> None:
    """Mark a text to be drawn with a rim of paper colour, so that it stays readable over curves (done by the page's CSS)."""
    text.set_gid(f"halo-{number}")


def time_unit(duration: float) -> tuple[float, str]:
    """Return divisor and name of the unit in which a time axis of ``duration`` seconds reads best."""
    if duration < 300.0:  # noqa: PLR2004  five minutes in seconds
        return 1.0, "s"
    if duration < 3.0 * 3600.0:
        return 60.0, "min"
    return (3600.0, "h") if duration < 10 * 86400.0 else (86400.0, "d")
