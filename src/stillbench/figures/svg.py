"""A figure as a piece of SVG that can stand in a page beside others."""

import io
import re
from typing import TYPE_CHECKING

from stillbench.figures.style import GREY, HAIRLINE, INK, ORANGE, PAPER, PETROL, SHADE, VIOLET

if TYPE_CHECKING:
    from matplotlib.figure import Figure

VARIABLES = {
    INK: "ink",
    GREY: "grey",
    HAIRLINE: "hairline",
    SHADE: "shade",
    PETROL: "petrol",
    ORANGE: "orange",
    VIOLET: "violet",
    PAPER: "paper",
}
_ID = re.compile(r'\bid="([^"]+)"')
_REFERENCE = re.compile(r'(xlink:href="#|href="#|url\(#)([^")]+)')
_LONG_NUMBER = re.compile(r"(-?\d+\.\d{3,})(?![\d%])")
_MARKER_STYLE = re.compile(r'(<use [^>]*?) style="([^"]*)"')
_TAG = re.compile(r"<[^>]*>")
_COMMENT = re.compile(r"<!--.*?-->", re.DOTALL)


def to_svg(figure: "Figure", name: str, title: str) -> str:
    """Return ``figure`` as SVG for inlining.

    Ids are prefixed by ``name``, so that several figures share a page; colours become variables of the page, text keeps to
    the fonts of the page; no date, so that the same input gives the same bytes.
    """
    import matplotlib as mpl  # noqa: PLC0415  costs a second, wanted only where a figure is drawn

    buffer = io.StringIO()
    with mpl.rc_context({"svg.hashsalt": name, "svg.fonttype": "none"}):
        figure.savefig(
            buffer,
            format="svg",
            metadata={"Date": None, "Creator": None, "Format": None, "Type": None},
            transparent=True,
        )
    text = buffer.getvalue()
    text = text[text.index("<svg") :]
    text = _COMMENT.sub("", text)
    text = re.sub(r"<metadata>.*?</metadata>", "", text, flags=re.DOTALL)
    text = _ID.sub(lambda match: f'id="{name}-{match.group(1)}"', text)
    text = _REFERENCE.sub(lambda match: f"{match.group(1)}{name}-{match.group(2)}", text)
    for colour, variable in VARIABLES.items():
        text = re.sub(re.escape(colour), f"var(--{variable})", text, flags=re.IGNORECASE)
    text = re.sub(r"font-family: ?[^;\"]+;?", "", text)
    text = re.sub(r"font: ([\d.]+)px [^;\"]+", r"font-size: \1px", text)
    text = re.sub(r'width="[\d.]+pt" height="[\d.]+pt"', "", text, count=1)
    text = _TAG.sub(lambda tag: _LONG_NUMBER.sub(_shortened, tag.group(0)), text)
    text = _gathered(text)
    escaped = title.replace("&", "&amp;").replace("<", "&lt;").replace('"', "&quot;")
    text = text.replace("<svg ", f'<svg role="img" aria-label="{escaped}" ', 1)
    text = text.replace('<style type="text/css">*{stroke-linejoin: round; stroke-linecap: butt}</style>', "")
    return re.sub(r"\n\s*", "\n", text).strip()


def _shortened(match: re.Match[str]) -> str:
    """Two decimals of a point are far below what is seen; texts of the figure are not touched."""
    return f"{float(match.group(1)):.2f}".rstrip("0").rstrip(".")


def _gathered(text: str) -> str:
    """Move the style that all markers of a group share to the group: most of the bytes of a scatter are that style."""

    def group(match: re.Match[str]) -> str:
        inner = match.group(1)
        styles = set(_MARKER_STYLE.findall(inner))
        shared = {style for _, style in styles}
        if len(shared) != 1:
            return match.group(0)
        style = shared.pop()
        return f'<g style="{style}">{_MARKER_STYLE.sub(lambda use: use.group(1), inner)}</g>'

    return re.sub(r"<g>((?:\s*<use [^>]*/>\s*)+)</g>", group, text)
