"""stillbench scale LOG."""

from pathlib import Path

import click

from stillbench.cli.reading import one_log, reading_flags

HELP = """Scale factor, null and asymmetry from a log of known turns, steady rates, or positions under gravity.

Give one of --turns (angles turned about the input axis, with stops of some seconds between; no rate table is needed), --rates
(steady rates of a table) or --positions (an accelerometer held up, down, level, or at a tilt; needs --latitude). A list that is
shorter than the log is taken over and over: --turns "90 deg, -90 deg" serves for any even number of turns.

A running wheel resists being turned: hold it in a fixture, turn it slowly, keep hands and cables clear, and follow the maker's
procedures, local codes and licensed practice.
"""


@click.command(name="scale", help=HELP)
@reading_flags
@click.option("--channel", metavar="NAME", help="Column by head or number.")
@click.option("--turns", metavar="ANGLES", help="Such as '90 deg, -90 deg'.")
@click.option("--rates", metavar="RATES", help="Such as '0 deg/s, 10 deg/s, -10 deg/s'.")
@click.option("--positions", metavar="POSITIONS", help="Such as 'up, down', or 'tilt 30 deg, azimuth 0 deg; level'.")
@click.option("--applied-uncertainty", metavar="VALUE", help="Standard, of angle, rate or g, such as '0.05 deg'.")
@click.option(
    "--time-base", metavar="RATIO", help="Standard relative uncertainty of the sampling interval, such as '20 ppm'."
)
@click.option("--latitude", metavar="LATITUDE", help="Such as '53.5 N'.")
@click.option("--attitude", metavar="AXIS", help="Of the input axis for --rates: up, down, north, ...")
@click.option("--coverage", type=float, default=0.95, show_default=True, help="Of the two-sided interval.")
@click.option("--from", "start", metavar="T", help="Begin there.")
@click.option("--to", "stop", metavar="T", help="End there.")
@click.option(
    "--write-sheet",
    "sheet_file",
    type=click.Path(path_type=Path),
    metavar="FILE",
    help="Write the front end of the log sheet.",
)
@click.option("--out", type=click.Path(path_type=Path), metavar="DIR", help="Write scale.html and scale.json there.")
@click.option("--made-at", metavar="ISO", help="Date-time to stand in the result, in place of the clock.")
@click.option("--quiet", is_flag=True, help="No progress, and no word on what was written.")
def command(
    log: tuple[Path, ...],
    units: tuple[str, ...],
    rate: float | None,
    time: str | None,
    time_unit: str | None,
    log_sheet: Path | None,
    channel: str | None,
    turns: str | None,
    rates: str | None,
    positions: str | None,
    applied_uncertainty: str | None,
    time_base: str | None,
    latitude: str | None,
    attitude: str | None,
    coverage: float,
    start: str | None,
    stop: str | None,
    sheet_file: Path | None,
    out: Path | None,
    made_at: str | None,
    *,
    joined: bool,
    quiet: bool,
) -> int:
    """Run the command; return the exit code."""
    from stillbench.archive.codec import encode_noun  # noqa: PLC0415  --help must not wait for the numbers
    from stillbench.cli.print_result import ascii_text, table, wrapped  # noqa: PLC0415
    from stillbench.cli.talk import progress_line  # noqa: PLC0415
    from stillbench.foundation.files import write_whole  # noqa: PLC0415
    from stillbench.logs.read import unit_flags  # noqa: PLC0415
    from stillbench.pipeline import load_log_sheet, made_at_text, scale_factor_of  # noqa: PLC0415
    from stillbench.report.scale_page import (  # noqa: PLC0415
        TURNING,
        front_end_block,
        render_scale_page,
        result_rows,
        step_rows,
    )
    from stillbench.version import __version__  # noqa: PLC0415
    from stillbench.vocabulary.scale_factor import SCALE_SCHEMA, SCALE_VERSION  # noqa: PLC0415

    made = made_at_text(made_at)
    with progress_line(quiet=quiet) as progress:
        result, source = scale_factor_of(
            one_log(log, joined=joined),
            sheet=load_log_sheet(log_sheet) if log_sheet else None,
            channel=channel,
            units=unit_flags(units),
            rate=rate,
            time=time,
            time_unit=time_unit,
            turns=turns,
            rates=rates,
            positions=positions,
            applied_uncertainty=applied_uncertainty,
            time_base=time_base,
            latitude=latitude,
            attitude=attitude,
            coverage=coverage,
            start=start,
            stop=stop,
            progress=progress,
        )
        block = front_end_block(result, made)
        files: dict[Path, bytes] = {}
        if sheet_file is not None:
            files[sheet_file] = block.encode()
        if out is not None:
            words = f"{source.name}, {source.bytes} bytes, SHA-256 {source.sha256}"
            files[out / "scale.html"] = render_scale_page(result, source=words, made_at=made, version=__version__)
            extra = {"made_at": made, "stillbench": __version__, "source": source}
            files[out / "scale.json"] = encode_noun(result, SCALE_SCHEMA, SCALE_VERSION, extra)
        if files:
            write_whole(files)
    click.echo(table(("quantity", "value", "uncertainty"), result_rows(result)))
    for remark in result.remarks:
        click.echo(wrapped(f"! {remark}", "  "))
    click.echo(
        "\n" + table(("", "from", "to", "applied", "observed", "left"), step_rows(result), right=(0, 1, 2, 3, 4, 5))
    )
    click.echo("\n" + ascii_text(block), nl=False)
    click.echo("\n" + wrapped(f"Caution: {TURNING}", ""))
    if files and not quiet:
        click.echo(f"written: {', '.join(map(str, files))}", err=True)
    return 0
