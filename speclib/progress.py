"""Progress of long work: workflows report to a `Progress`, faces decide how to show it."""

from __future__ import annotations

from typing import Protocol


class Progress(Protocol):
    """What long work calls while it runs."""

    def start(self, label: str, total: int) -> None:
        """Begin a stretch of `total` steps."""

    def advance(self, label: str = "") -> None:
        """One step done; `label` names what was done."""

    def finish(self) -> None:
        """End of the stretch, also after a failure."""


class SilentProgress:
    """Shows nothing."""

    def start(self, label: str, total: int) -> None:
        """Do nothing."""

    def advance(self, label: str = "") -> None:
        """Do nothing."""

    def finish(self) -> None:
        """Do nothing."""


SILENT = SilentProgress()
