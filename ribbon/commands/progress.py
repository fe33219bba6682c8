"""Progress on standard error: a live line on a terminal, else a line now and then."""

from __future__ import annotations

import sys
import time
from types import TracebackType
from typing import Any

from ribbon.commands.output import note

__all__ = ["Progress"]

PATIENCE = 1.0
"""Seconds before anything is shown."""
PAUSE = 10.0
"""Seconds between lines where there is no terminal."""


class Progress:
    """Shows which stage is running and how far it is; silent when ``quiet``.

    Call it with a stage and, where known, the fraction of that stage that is done.
    """

    def __init__(self, *, quiet: bool = False) -> None:
        """Start the clock; show nothing yet."""
        self._quiet = quiet
        self._live: Any = None
        self._task: Any = None
        self._shown = ""
        self._start = time.monotonic()
        self._next = self._start + PATIENCE

    def __enter__(self) -> Progress:
        """Return itself."""
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        problem: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        """Take the live line away."""
        if self._live is not None:
            self._live.stop()

    def __call__(self, stage: str, fraction: float | None = None) -> None:
        """Say what is going on, if it has been going on for a while."""
        now = time.monotonic()
        if self._quiet or now < self._next:
            return
        if sys.stderr is not None and sys.stderr.isatty():
            self._draw(stage, fraction)
        elif stage != self._shown or now >= self._next:
            part = "" if fraction is None else f", {100 * fraction:.0f} %"
            note(f"ribbon: {stage}{part} ({now - self._start:.0f} s)")
            self._next = now + PAUSE
        self._shown = stage

    def _draw(self, stage: str, fraction: float | None) -> None:
        if self._live is None:
            from rich.console import Console
            from rich.progress import (
                BarColumn,
                TextColumn,
                TimeElapsedColumn,
            )
            from rich.progress import Progress as Bar

            self._live = Bar(
                TextColumn("{task.description}"),
                BarColumn(),
                TimeElapsedColumn(),
                console=Console(stderr=True),
                transient=True,
            )
            self._live.start()
            self._task = self._live.add_task(stage, total=None)
        self._live.update(
            self._task,
            description=stage,
            total=None if fraction is None else 1.0,
            completed=0.0 if fraction is None else fraction,
        )
