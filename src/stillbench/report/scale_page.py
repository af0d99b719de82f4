"""A scale factor as a page, as text and as the front end of a log sheet."""

import math

from stillbench.figures.scale import draw_residuals, draw_steps
from stillbench.figures.style import sheet
from stillbench.figures.svg import to_svg
from stillbench.foundation.rounding import decimals_for, fixed, significant
from stillbench.foundation.units import parse_unit
from stillbench.report.page import render_page
from stillbench.vocabulary.scale_factor import ScaleFactor

TURNING = (
    "A running wheel resists being turned and pulls on whoever turns it: hold it in a fixture, turn it slowly, keep hands and"
    " cables clear, and do not reach into the housing while the wheel runs or its excitation is on. Rate tables can start"
    " without warning. Local codes, and the practice of licensed people, come first."
)
MANY_DOF = 1_000.0
ONE_TURN_ON = "The scale factor is that of this turn-on, supply and temperature; it says nothing of the next."


def _with_error(value: float, error: float) -> tuple[str, str]:
    if not error > 0:
        return significant(value, 6), "not known"
    decimals = decimals_for(error)
    return fixed(value, decimals), fixed(error, decimals)


def spoken_factor(result: ScaleFactor) -> tuple[float, str]:
    """Return the scale factor and its unit, as a log sheet has them, such as 48.2 and mV/(deg/s)."""
    reading, quantity = parse_unit(result.reading_unit), parse_unit(result.quantity_unit)
    value, text = result.factor * quantity.factor / reading.factor, reading.text
    if text == "V" and abs(value) < 0.1:  # noqa: PLR2004  below, millivolts are spoken
        value, text = 1e3 * value, "mV"
    return value, f"{text}/({quantity.text})" if "/" in quantity.text else f"{text}/{quantity.text}"


def front_end_block(result: ScaleFactor, made_at: str) -> str:
    """Return the part of a log sheet that declares the scale factor."""
    value, unit = spoken_factor(result)
    reading = parse_unit(result.reading_unit)
    digits = max(1, decimals_for(result.relative * abs(value))) if result.relative > 0 else 6
    zero, _ = _with_error(result.zero / reading.factor, result.zero_uncertainty / reading.factor)
    count = len(result.steps)
    word = {"turns": "turns", "rates": "steady rates"}.get(result.method, "positions")
    name = result.label if result.label.replace("_", "").isalnum() else f'"{result.label}"'
    return (
        f"[channel.{name}.front_end]\n"
        f'zero = "{zero} {reading.text}"\n'
        f'scale_factor = "{fixed(value, digits)} {unit}"\n'
        f'scale_factor_uncertainty = "{significant(100.0 * result.relative, 2)} %"\n'
        f'scale_factor_origin = "{count} {word}, {made_at[:10]}"\n'
    )


def result_rows(result: ScaleFactor) -> list[tuple[str, str, str]]:
    """Return quantity, value and uncertainty in words."""
    value, unit = spoken_factor(result)
    ratio = value / result.factor
    text, error = _with_error(value, result.relative * abs(value))
    decimals = decimals_for(result.relative * abs(value)) if result.relative > 0 else 6
    ends = sorted((result.lower * ratio, result.upper * ratio))
    reading = parse_unit(result.reading_unit)
    zero, zero_error = _with_error(result.zero / reading.factor, result.zero_uncertainty / reading.factor)
    rows = [
        ("scale factor", f"{text} {unit}", f"{error} {unit} ({significant(100 * result.relative, 2)} %), standard"),
        (
            f"its {100 * result.coverage:g} % interval",
            f"{fixed(ends[0], decimals)} to {fixed(ends[1], decimals)} {unit}",
            "endless effective degrees of freedom"
            if result.dof > MANY_DOF
            else f"{result.dof:.3g} effective degrees of freedom",
        ),
        (
            "null",
            f"{zero} {reading.printed}",
            f"{zero_error} {reading.printed}, standard, from the scatter in this log",
        ),
    ]
    if result.asymmetry is not None and result.asymmetry_uncertainty is not None:
        asymmetry, spread = _with_error(100 * result.asymmetry, 100 * result.asymmetry_uncertainty)
        rows.append(("asymmetry (positive over negative, less one)", f"{asymmetry} %", f"{spread} %, standard"))
    else:
        rows.append(("asymmetry", "not seen", "needs both directions, and more than one rate or position"))
    rows.append(
        (
            "largest departure from the line",
            f"{significant(100 * result.nonlinearity, 2)} % of the largest input",
            "observed",
        )
    )
    rows.append(
        ("repeatability of single steps", f"{significant(100 * result.repeatability, 2)} %", "standard deviation")
    )
    return rows


def step_rows(result: ScaleFactor) -> list[tuple[str, ...]]:
    """Return number, times, what was applied and observed, and what is left, in words."""
    reading = parse_unit(result.reading_unit)
    turns = result.method == "turns"
    spoken = parse_unit(result.quantity_unit.split("/")[0] if turns else result.quantity_unit)
    seen = f"{reading.printed} s" if turns else reading.printed
    largest = max(abs(step.residual) for step in result.steps) / reading.factor
    decimals = decimals_for(largest) if largest > 0 else 6
    return [
        (
            str(number),
            f"{step.start:.2f} s",
            f"{step.stop:.2f} s",
            f"{step.applied / spoken.factor:.6g} {spoken.printed}",
            f"{fixed(step.observed / reading.factor, decimals)} {seen}",
            f"{fixed(step.residual / reading.factor, decimals)} {seen}",
        )
        for number, step in enumerate(result.steps, start=1)
    ]


def render_scale_page(result: ScaleFactor, *, source: str, made_at: str, version: str) -> bytes:
    """Return the page of a scale factor: a single HTML file.

    Parameters
    ----------
    result : ScaleFactor
    source : str
        File and digest, in words.
    made_at, version : str
    """
    drawn = {}
    for name, title, height, draw in (
        ("residuals", "What the line leaves of each step", 62, draw_residuals),
        ("course", "The log with its steps", 70, draw_steps),
    ):
        with sheet(height) as (figure, axes):
            draw(axes, result)
            figure.set_dpi(72)
            drawn[name] = to_svg(figure, f"scale-{name}", title)
    return render_page(
        "scale.html",
        title=f"Scale factor of {result.label}",
        subtitle=f"From {len(result.steps)} {result.method}.",
        rows=result_rows(result),
        remarks=result.remarks,
        steps=step_rows(result),
        contributions=[
            (
                part.name,
                f"{significant(100 * part.relative, 2)} %",
                "endless" if math.isinf(part.dof) else f"{part.dof:.0f}",
            )
            for part in result.contributions
        ],
        null_words="Stops before and after each turn take off the null and the rotation of the Earth along the axis."
        if result.method == "turns"
        else "The rotation of the Earth or gravity along the axis is taken off by latitude and attitude where they are declared.",
        front_end=front_end_block(result, made_at),
        cautions=(TURNING, ONE_TURN_ON),
        source=source,
        made_at=made_at,
        version=version,
        **drawn,
    )
