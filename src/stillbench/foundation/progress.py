"""Progress as an object handed in, with a twin that does nothing."""

from typing import Protocol


class Progress(Protocol):
    """What a long computation reports to."""

    def stage(self, name: str) -> None:
        """Say that a stage of the work begins."""

    def step(self, fraction: float) -> None:
        """Say which fraction (0 to 1) of the present stage is done."""


class SilentProgress:
    """The twin that says nothing."""

    def stage(self, name: str) -> None:
        """Do nothing."""

    def step(self, fraction: float) -> None:
        """Do nothing."""


SILENT = SilentProgress()
