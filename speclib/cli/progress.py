"""Progress on a terminal: a bar on stderr for work that takes a while; silent in pipes and for short work."""

from __future__ import annotations

import sys
import time
from typing import Any

from speclib.progress import SILENT, Progress

SHOW_AFTER_S = 0.5


class TerminalProgress:
    """A rich progress bar that appears when the work has taken half a second."""

    def __init__(self) -> None:
        self._bar: Any = None
        self._label, self._total, self._done, self._began = "", 0, 0, 0.0

    def start(self, label: str, total: int) -> None:
        """Begin a stretch."""
        self._label, self._total, self._done, self._began = label, total, 0, time.monotonic()

    def advance(self, label: str = "") -> None:
        """One step done."""
        self._done += 1
        if self._bar is None:
            if time.monotonic() - self._began < SHOW_AFTER_S:
                return
            self._open()
        self._bar.update(self._task, completed=self._done, description=f"{self._label} {label}".strip())

    def _open(self) -> None:
        from rich.console import Console
        from rich.progress import Progress as Bar

        self._bar = Bar(console=Console(stderr=True), transient=True)
        self._task = self._bar.add_task(self._label, total=self._total, completed=self._done)
        self._bar.start()

    def finish(self) -> None:
        """Take the bar away."""
        if self._bar is not None:
            self._bar.stop()
            self._bar = None


def progress() -> Progress:
    """A bar on a terminal, silence elsewhere."""
    return TerminalProgress() if sys.stderr.isatty() else SILENT
