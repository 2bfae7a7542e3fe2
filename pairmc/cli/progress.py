"""Progress on standard error: a bar on a terminal, a plain line now and then elsewhere."""

from __future__ import annotations

import sys
import time
from types import TracebackType
from typing import Any

import click

from pairmc.cli import text
from pairmc.results.sample import Progress
from pairmc.runfile.run import RunFile

# Seconds between two lines where there is no terminal.
LINE_EVERY = 30.0


class ProgressDisplay:
    """Shows how far a run is: a context manager whose `report` is given to the sampling loop.

    Parameters
    ----------
    run
        The run.
    level
        0 shows nothing, 1 progress and remarks, 2 also what made the run and every batch.
    """

    def __init__(self, run: RunFile, level: int) -> None:
        self._run = run
        self._level = level
        self._bar: Any = None
        self._task: Any = None
        self._start = self._said = time.monotonic()

    def __enter__(self) -> ProgressDisplay:
        if self._level >= 2:
            self._say_what_runs()
        if self._level and sys.stderr.isatty():
            from rich import progress
            from rich.console import Console

            self._bar = progress.Progress(
                progress.TextColumn("batches"),
                progress.BarColumn(),
                progress.MofNCompleteColumn(),
                progress.TextColumn("{task.fields[rate]}"),
                console=Console(stderr=True),
                transient=True,
            )
            self._bar.start()
            self._task = self._bar.add_task("batches", total=None, rate="compiling or starting")
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
        now = time.monotonic()
        rate = self._rate(progress, now - self._start)
        if self._bar is not None:
            done, total = progress.finished, progress.batches
            self._bar.update(self._task, completed=done, total=total, rate=rate)
            return
        last = progress.finished == progress.batches
        if self._level >= 2 or last or now - self._said >= LINE_EVERY:
            self._said = now
            self.say(f"batch {progress.finished} of {progress.batches}{rate and ', '}{rate}")

    def say(self, message: str) -> None:
        """Print a line that stays."""
        if self._bar is not None:
            self._bar.console.print(message, highlight=False, markup=False, soft_wrap=True)
        elif self._level:
            click.echo(message, err=True)

    def _rate(self, progress: Progress, elapsed: float) -> str:
        """Return snapshots a second and the time that remains, once a batch has been drawn."""
        if not progress.drawn:
            return ""
        rate = f"{progress.drawn * self._run.batch_size / elapsed:.3g} snapshots/s"
        left = progress.batches - progress.finished
        if not left:
            return rate
        return f"{rate}, {text.duration(left * elapsed / progress.drawn)} remaining"

    def _say_what_runs(self) -> None:
        """Say the run digest, the versions and the processor."""
        from pairmc.runfile.digest import digest
        from pairmc.running.provenance import made_with

        versions = ", ".join(f"{name} {version}" for name, version in made_with().items())
        self.say(f"run digest {digest(self._run)}")
        self.say(versions)
