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

_STARTING = "compiling or starting"


class Pace:
    """Tells how fast batches finish and how long the rest takes.

    The first batch of each worker waits for the kernels to be compiled; what is told of the time
    that remains rests on later ones, at least one a worker, since workers finish side by side.

    Parameters
    ----------
    workers
        Batches drawn side by side.
    start
        When the drawing began, seconds.
    """

    def __init__(self, workers: int, start: float) -> None:
        self._workers = workers
        self._since, self._drawn_then = start, 0

    def note(self, drawn: int, now: float) -> None:
        """Take notice that so many batches are drawn by now."""
        if not self._drawn_then and drawn >= self._workers:
            self._since, self._drawn_then = now, drawn

    def seconds(self, drawn: int, now: float) -> float | None:
        """Return the seconds a batch takes, all workers together; None while nothing tells it."""
        later = drawn - self._drawn_then
        if not self._drawn_then or later < self._workers or now <= self._since:
            return None
        return (now - self._since) / later


class ProgressDisplay:
    """Shows how far a run is: a context manager whose `report` is given to the sampling loop.

    Parameters
    ----------
    run
        The run.
    level
        0 shows nothing, 1 progress and remarks, 2 also what made the run and every batch.
    workers
        Batches drawn side by side.
    """

    def __init__(self, run: RunFile, level: int, workers: int = 1) -> None:
        self._run = run
        self._level = level
        self._bar: Any = None
        self._task: Any = None
        self._start = self._said = time.monotonic()
        self._pace = Pace(workers, self._start)

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
            self._task = self._bar.add_task("batches", total=None, rate=_STARTING)
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
        self._pace.note(progress.drawn, now)
        rate = self._rate(progress, now)
        if self._bar is not None:
            done, total = progress.finished, progress.batches
            waiting = "estimating" if progress.drawn else _STARTING
            self._bar.update(self._task, completed=done, total=total, rate=rate or waiting)
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

    def _rate(self, progress: Progress, now: float) -> str:
        """Return snapshots a second, and the time that remains once there is a base for it."""
        if not progress.drawn:
            return ""
        size, left = self._run.batch_size, progress.batches - progress.finished
        seconds = self._pace.seconds(progress.drawn, now)
        if seconds is not None:
            rate = f"{size / seconds:.3g} snapshots/s"
            return f"{rate}, {text.duration(left * seconds)} remaining" if left else rate
        if left:
            return ""
        overall = progress.drawn * size / max(now - self._start, 1e-9)
        return f"{overall:.3g} snapshots/s, start included"

    def _say_what_runs(self) -> None:
        """Say the run digest, the versions and the processor."""
        from pairmc.runfile.digest import digest
        from pairmc.running.provenance import made_with

        versions = ", ".join(f"{name} {version}" for name, version in made_with().items())
        self.say(f"run digest {digest(self._run)}")
        self.say(versions)
