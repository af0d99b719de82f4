"""Progress on stderr while a log is worked on."""

import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager

from stillbench.foundation.progress import SILENT, Progress


class _BarProgress:
    """Progress as one line of a terminal that is rewritten."""

    def __init__(self, bar: object, task: object) -> None:
        self._bar = bar
        self._task = task

    def stage(self, name: str) -> None:
        from rich.markup import escape  # noqa: PLC0415  wanted on a terminal only

        self._bar.update(self._task, description=escape(name), completed=0.0, refresh=True)  # type: ignore[attr-defined]

    def step(self, fraction: float) -> None:
        self._bar.update(self._task, completed=fraction)  # type: ignore[attr-defined]


@contextmanager
def progress_line(*, quiet: bool) -> Iterator[Progress]:
    """Give a Progress that writes to stderr when that is a terminal, and is silent otherwise."""
    if quiet or not sys.stderr.isatty():
        yield SILENT
        return
    from rich.console import Console  # noqa: PLC0415  wanted on a terminal only
    from rich.progress import BarColumn, Progress, TaskProgressColumn, TextColumn, TimeElapsedColumn  # noqa: PLC0415

    console = Console(stderr=True, no_color=bool(os.environ.get("NO_COLOR")))
    columns = (TextColumn("{task.description:<28}"), BarColumn(), TaskProgressColumn(), TimeElapsedColumn())
    with Progress(*columns, console=console, transient=True) as bar:
        task = bar.add_task("starting", total=1.0)
        yield _BarProgress(bar, task)
