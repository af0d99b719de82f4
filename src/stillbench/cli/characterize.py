"""stillbench characterize LOG."""

import contextlib
import importlib
import sys
import threading
from pathlib import Path

import click

from stillbench.cli.reading import one_log, reading_flags

HELP = """Noise terms, verdicts and a report from one log taken at rest.

LOG is delimited text, NPY/NPZ, MAT, HDF5, Parquet, Feather, WAV, MCAP, a ROS bag, or raw samples declared in a log sheet; plain,\n.gz, .zst, or one file in a .zip. 'stillbench check LOG' says how it is understood.

Exit codes: 0 conforms or nothing to judge; 1 the log or the analysis failed; 2 usage; 3 a requirement is not met; 4 none is
missed but one is undecided.
"""


@click.command(name="characterize", help=HELP)
@reading_flags
@click.option(
    "--channel",
    "channels",
    multiple=True,
    metavar="NAME",
    help="Column by head or number; repeatable; 'all' for every one that has a unit.",
)
@click.option("--spec", type=click.Path(path_type=Path), metavar="FILE", help="Requirements to judge (TOML).")
@click.option(
    "--converter-log",
    type=click.Path(path_type=Path),
    metavar="FILE",
    help="Log of the converter alone, its input shorted or terminated; same columns.",
)
@click.option(
    "--out", type=click.Path(path_type=Path), metavar="DIR", help="Write report.html, result.json and curve.csv there."
)
@click.option("--json", "json_file", metavar="FILE", help="Write the result as JSON; '-' for stdout, JSON alone.")
@click.option("--from", "start", metavar="T", help="Begin there: seconds from the start, clock time, or row:N.")
@click.option("--to", "stop", metavar="T", help="End there.")
@click.option("--exclude", multiple=True, metavar="T1:T2", help="Leave a span out; repeatable.")
@click.option("--coverage", type=float, default=0.95, show_default=True, help="Of two-sided intervals.")
@click.option("--report-unit", metavar="UNIT", help="Unit of deviations and bias in the report.")
@click.option("--made-at", metavar="ISO", help="Date-time to stand in the result, in place of the clock.")
@click.option("--no-exclusions", is_flag=True, help="Screening reports, and leaves nothing out.")
@click.option(
    "--keep", multiple=True, metavar="FINDING", help="Overrule a kind of finding (such as spike); needs --because."
)
@click.option(
    "--because", "reasons", multiple=True, metavar="TEXT", help="Why; one for each --keep, it stands in the report."
)
@click.option(
    "--scratch",
    type=click.Path(path_type=Path),
    metavar="DIR",
    help="Folder for the arrays of a log larger than memory.",
)
@click.option("--quiet", is_flag=True, help="No progress, and no word on what was written.")
def command(
    log: tuple[Path, ...],
    channels: tuple[str, ...],
    units: tuple[str, ...],
    rate: float | None,
    time: str | None,
    time_unit: str | None,
    log_sheet: Path | None,
    spec: Path | None,
    converter_log: Path | None,
    out: Path | None,
    json_file: str | None,
    start: str | None,
    stop: str | None,
    exclude: tuple[str, ...],
    coverage: float,
    report_unit: str | None,
    made_at: str | None,
    keep: tuple[str, ...],
    reasons: tuple[str, ...],
    scratch: Path | None,
    *,
    joined: bool,
    no_exclusions: bool,
    quiet: bool,
) -> int:
    """Run the command; return the exit code."""
    from stillbench.cli.print_result import result_text  # noqa: PLC0415  --help must not wait for the numbers
    from stillbench.cli.talk import progress_line  # noqa: PLC0415
    from stillbench.cli.write_result import REPORT, write_result  # noqa: PLC0415
    from stillbench.foundation.errors import OutputError, UsageError  # noqa: PLC0415
    from stillbench.foundation.scratch import scratch_in  # noqa: PLC0415
    from stillbench.logs.read import unit_flags  # noqa: PLC0415
    from stillbench.pipeline import characterize  # noqa: PLC0415
    from stillbench.selfcheck.run import remembered_summary  # noqa: PLC0415

    if len(keep) != len(reasons) or not all(reason.strip() for reason in reasons):
        raise UsageError(
            f"{len(keep)} --keep and {len(reasons)} --because",
            "one reason for each finding overruled",
            "add --because TEXT",
        )
    if out is not None and out.exists() and not out.is_dir():
        raise OutputError(f"{str(out)!r} is a file", "a folder for --out", "choose another name")
    if out is not None:
        # What draws the figures takes its time to load: that passes while the log is read.
        threading.Thread(target=_load_figures, daemon=True).start()
    with scratch_in(scratch), progress_line(quiet=quiet) as progress:
        result = characterize(
            one_log(log, joined=joined),
            channels=channels,
            unit=unit_flags(units),
            rate=rate,
            time=time,
            time_unit=time_unit,
            log_sheet=log_sheet,
            specification=spec,
            start=start,
            stop=stop,
            exclude=exclude,
            coverage=coverage,
            report_unit=report_unit,
            made_at=made_at,
            exclusions=not no_exclusions,
            keep=dict(zip(keep, reasons, strict=True)),
            selfcheck=remembered_summary(),
            converter_log=converter_log,
            progress=progress,
        )
        to_stdout = json_file == "-"
        if out is not None:
            progress.stage("writing the report")
        written = write_result(result, out, None if to_stdout or json_file is None else Path(json_file))
    if to_stdout:
        from stillbench.archive.codec import encode  # noqa: PLC0415

        sys.stdout.buffer.write(encode(result))
        sys.stdout.buffer.flush()
    else:
        click.echo(result_text(result), nl=False)
    if written and not quiet:
        first = out / REPORT if out is not None else written[0]
        click.echo(f"written: {', '.join(str(path) for path in written)}; open {first}", err=True)
    return result.exit_code


def _load_figures() -> None:
    with contextlib.suppress(Exception):  # what is wrong is said where the figures are drawn
        importlib.import_module("matplotlib.backends.backend_svg")
