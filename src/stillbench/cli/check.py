"""stillbench check LOG."""

from pathlib import Path

import click

from stillbench.cli.reading import one_log, reading_flags

HELP = """Say how a log is understood, what is odd about its clock, and how to say otherwise.

Nothing is computed from the samples. --write-sheet writes the log sheet that declares all of it, ready to be completed.
"""


@click.command(name="check", help=HELP)
@reading_flags
@click.option(
    "--write-sheet", "sheet_file", type=click.Path(path_type=Path), metavar="FILE", help="Write the log sheet there."
)
@click.option("--quiet", is_flag=True, help="No progress, and no word on what was written.")
def command(
    log: tuple[Path, ...],
    units: tuple[str, ...],
    rate: float | None,
    time: str | None,
    time_unit: str | None,
    log_sheet: Path | None,
    sheet_file: Path | None,
    *,
    joined: bool,
    quiet: bool,
) -> int:
    """Run the command; return the exit code."""
    from stillbench.cli.print_understanding import understanding_text  # noqa: PLC0415  --help must not wait
    from stillbench.cli.talk import progress_line  # noqa: PLC0415
    from stillbench.foundation.files import write_whole  # noqa: PLC0415
    from stillbench.logs.read import unit_flags  # noqa: PLC0415
    from stillbench.logs.understand import understand_log  # noqa: PLC0415
    from stillbench.pipeline import load_log_sheet  # noqa: PLC0415

    with progress_line(quiet=quiet) as progress:
        found = understand_log(
            one_log(log, joined=joined),
            sheet=load_log_sheet(log_sheet) if log_sheet else None,
            units=unit_flags(units),
            rate=rate,
            time=time,
            time_unit=time_unit,
            progress=progress,
        )
        if sheet_file is not None:
            write_whole({sheet_file: found.sheet.encode()})
    click.echo(understanding_text(found), nl=False)
    if sheet_file is not None and not quiet:
        click.echo(f"written: {sheet_file}", err=True)
    return 0
