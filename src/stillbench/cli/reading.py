"""Flags that say how a log is to be read, shared by the commands that take one."""

from collections.abc import Callable
from pathlib import Path
from typing import Any

import click

TIME_UNITS = ("s", "ms", "us", "ns", "iso", "unix", "day-first", "month-first")

OPTIONS = (
    click.argument("log", nargs=-1, required=True, type=click.Path(path_type=Path)),
    click.option("--joined", is_flag=True, help="Several LOGs are parts of one, in this order."),
    click.option(
        "--unit",
        "units",
        multiple=True,
        metavar="UNIT|NAME=UNIT",
        help="Unit of the samples, such as deg/s; there is no default.",
    ),
    click.option("--rate", type=float, metavar="HZ", help="Sampling rate, where there are no stamps."),
    click.option("--time", metavar="COLUMN", help="Time column; 'none' ignores stamps."),
    click.option(
        "--time-unit", type=click.Choice(TIME_UNITS), help="Unit of the stamps, or the order of written dates."
    ),
    click.option(
        "--log-sheet",
        type=click.Path(path_type=Path),
        metavar="FILE",
        help="What is known of the log and the unit (TOML).",
    ),
)


def reading_flags(command: Callable[..., Any]) -> Callable[..., Any]:
    """Add the flags to a command."""
    for option in reversed(OPTIONS):
        command = option(command)
    return command


def one_log(paths: tuple[Path, ...], *, joined: bool) -> Path | list[Path]:
    """Return the log, or the parts of it.

    Raises
    ------
    UsageError
        For several without --joined.
    """
    from stillbench.foundation.errors import UsageError  # noqa: PLC0415  --help must not wait

    if len(paths) == 1:
        return paths[0]
    if not joined:
        raise UsageError(
            f"{len(paths)} logs are given",
            "one",
            "add --joined if they are parts of one night; otherwise one at a time",
        )
    return list(paths)
