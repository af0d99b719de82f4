"""stillbench demo: two made night logs of an invented survey launch, both qualified."""

import time
from pathlib import Path

import click

PICTURE = "deviation.png"


@click.command(name="demo")
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    default=Path("reports/demo"),
    show_default=True,
    help="Folder to write to.",
)
@click.option("--quiet", is_flag=True, help="No progress.")
def command(out: Path, *, quiet: bool) -> int:
    """Make two night logs (8 h, 100 Hz) and qualify both sensors against one specification.

    The scenario is invented: the sonar mount of a harbour survey launch, steadied by a spinning-wheel rate gyro that is read
    as a voltage, with a MEMS part tried beside it.
    """
    from stillbench.cli.talk import progress_line  # noqa: PLC0415  --help must not wait for the numbers
    from stillbench.cli.write_result import REPORT, write_result  # noqa: PLC0415
    from stillbench.foundation.files import write_whole  # noqa: PLC0415
    from stillbench.pipeline import characterize  # noqa: PLC0415
    from stillbench.report.render import deviation_picture  # noqa: PLC0415
    from stillbench.report.words import ASCII_MARKS, verdict_row  # noqa: PLC0415
    from stillbench.selfcheck.run import remembered_summary  # noqa: PLC0415
    from stillbench.simulation.launch import BENCHES, MADE_AT, SPECIFICATION, write_bench  # noqa: PLC0415

    began = time.monotonic()
    logs = out / "logs"
    specification = logs / "specification.toml"
    write_whole({specification: SPECIFICATION.encode()})
    lines = []
    with progress_line(quiet=quiet) as progress:
        for bench in BENCHES:
            if not quiet:
                click.echo(f"making the night log of the {bench.words} ...", err=True)
            progress.stage(f"making {bench.name}")
            log, sheet = write_bench(bench, logs)
            if not quiet:
                click.echo(f"characterizing {log} ...", err=True)
            result = characterize(
                log,
                log_sheet=sheet,
                specification=specification,
                made_at=MADE_AT,
                selfcheck=remembered_summary(),
                progress=progress,
            )
            folder = out / bench.name
            write_result(result, folder, None)
            write_whole({folder / PICTURE: deviation_picture(result.channels[0])})
            lines.append(f"{bench.words}: open {folder / REPORT}")
            for channel in result.channels:
                for verdict in channel.verdicts:
                    row = verdict_row(verdict)
                    found = f"{row.found} {row.unit}" if row.value is not None else row.found
                    lines.append(
                        f"  {ASCII_MARKS[row.decision]} {row.decision:<17} {row.clause} {row.quantity}: {found}, limit {row.limit}"
                    )
            lines.append(
                f"  by hand: stillbench characterize {log} --log-sheet {sheet} --spec {specification} --out {folder}"
            )
    click.echo("\n".join(lines))
    click.echo(f"done in {time.monotonic() - began:.0f} s; logs and sheets in {logs}", err=True)
    return 0
