"""Progress on standard error: a bar on a terminal, a plain line now and then elsewhere."""

from __future__ import annotations

import sys
import time
from types import TracebackType
from typing import Any

import click

from pairmc.cli import text
from pairmc.results.sample import Progress

# Seconds between two lines where there is no terminal.
_LINE_EVERY = 30.0


class ProgressDisplay:
    """Shows how far a run is; a context manager whose `report` is given to the sampling loop."""

    def __init__(self) -> None:
        self._bar: Any = None
        self._task: Any = None
        self._start = self._said = time.monotonic()

    def __enter__(self) -> ProgressDisplay:
        if sys.stderr.isatty():
            from rich.console import Console
            from rich.progress import (
                BarColumn,
                MofNCompleteColumn,
                TextColumn,
                TimeRemainingColumn,
            )
            from rich.progress import (
                Progress as Bar,
            )

            self._bar = Bar(
                TextColumn("batches"),
                BarColumn(),
                MofNCompleteColumn(),
                TextColumn("remaining"),
                TimeRemainingColumn(),
                console=Console(stderr=True),
                transient=True,
            )
            self._bar.start()
            self._task = self._bar.add_task("batches", total=None)
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        if self._bar is not None:
            self._bar.stop()

    def report(self, progress: Progress) -> None:
        """Show the progress, or say it where the last line is old enough."""
        if self._bar is not None:
            self._bar.update(self._task, completed=progress.finished, total=progress.batches)
            return
        now = time.monotonic()
        if now - self._said < _LINE_EVERY and progress.finished < progress.batches:
            return
        self._said = now
        line = f"batch {progress.finished} of {progress.batches}"
        if progress.drawn > 0 and progress.finished < progress.batches:
            each = (now - self._start) / progress.drawn
            remaining = each * (progress.batches - progress.finished)
            line += f", {text.duration(remaining)} remaining"
        self.say(line)

    def say(self, message: str) -> None:
        """Print a line that stays."""
        if self._bar is not None:
            self._bar.console.print(message, highlight=False, markup=False)
        else:
            click.echo(message, err=True)
