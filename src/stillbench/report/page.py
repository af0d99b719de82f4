"""A template and its content to one HTML page with everything in it."""

from importlib import resources
from typing import Any


def markup(text: str) -> Any:  # noqa: ANN401  a markupsafe string
    """Mark text as HTML that needs no escaping: our own figures and style only."""
    from markupsafe import Markup  # noqa: PLC0415  wanted only where a page is made

    return Markup(text)  # noqa: S704  made by our own code, texts escaped


def render_page(template: str, **content: Any) -> bytes:  # noqa: ANN401  whatever the template asks for
    """Return a page: everything that is not our own markup is escaped, what is missing is an error.

    Parameters
    ----------
    template : str
        File name within report/templates.
    content
        What the template names, but for the style.
    """
    import jinja2  # noqa: PLC0415  wanted only where a page is made

    assets = resources.files("stillbench.report")
    loader = jinja2.FunctionLoader(lambda name: (assets / "templates" / name).read_text("utf-8"))
    environment = jinja2.Environment(
        loader=loader, autoescape=True, trim_blocks=True, lstrip_blocks=True, undefined=jinja2.StrictUndefined
    )
    environment.filters["figure"] = markup
    style = markup((assets / "assets" / "report.css").read_text("utf-8"))
    page = environment.get_template(template).render(style=style, **content)
    return (page.rstrip() + "\n").encode("utf-8")
