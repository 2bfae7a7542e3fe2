"""Samples a run into a result file: what is missing is drawn, folded, read back."""

from __future__ import annotations

import os
import tempfile
import threading
import warnings
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from functools import partial
from pathlib import Path
from typing import NamedTuple

import xarray as xr

from pairmc.errors import InputError, Problem
from pairmc.files import known_suffix, refuse_unless_writable, remove_unfinished
from pairmc.results.fold import fold
from pairmc.results.load import load
from pairmc.results.standing import stored_batches, usable_parts
from pairmc.runfile.read import read_run_file
from pairmc.runfile.run import RunFile
from pairmc.running.batch import run_batch
from pairmc.running.campaign import missing_batches, run_batches
from pairmc.running.lock import OutputLock
from pairmc.running.parts import Parts
from pairmc.running.provenance import head_of
from pairmc.running.resources import available_cores, refuse_unless_it_fits


class Progress(NamedTuple):
    """How far a run is.

    Parameters
    ----------
    finished, batches
        Batches finished, and of how many.
    drawn
        Batches drawn in this call.
    """

    finished: int
    batches: int
    drawn: int


Report = Callable[[Progress], None]
Warn = Callable[[str], None]


def default_result_path(run: RunFile) -> Path:
    """Return the run file's stem with .nc, beside it."""
    return Path(run.path).with_suffix(".nc")


def sample(
    run: RunFile | str | os.PathLike[str],
    into: str | os.PathLike[str] | None = None,
    workers: int | None = None,
    more: int = 0,
) -> xr.Dataset:
    """Sample a run and return its result.

    Parameters
    ----------
    run
        A run, or the path of a run file.
    into
        Result file to write, .nc, which goes on where an interrupted one ended; None keeps nothing.
    workers
        Batches drawn side by side; None takes the cores that this process may use. The numbers are
        the same for any.
    more
        Snapshots to add to those in the file, rounded up to whole batches.

    Returns
    -------
    xarray.Dataset
        As documented in DEVELOPERS.md, "Result file".

    Raises
    ------
    InputError
        Where the run file, the output or an argument is refused.
    """
    known = run if isinstance(run, RunFile) else read_run_file(run)
    for name, number, least in (("workers", workers, 1), ("more", more, 0)):
        if number is not None and (not isinstance(number, int) or number < least):
            raise InputError(Problem(name, repr(number), f"a whole number, at least {least}"))
    count = workers or available_cores()
    if into is not None:
        sample_into(known, Path(into), count, more, warn=_warn)
        return load(into)
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "result.nc"
        sample_into(known, path, count, more, warn=_warn)
        return load(path)


def _warn(message: str) -> None:
    warnings.warn(message, stacklevel=3)


def sample_into(
    run: RunFile,
    path: Path,
    workers: int = 1,
    more: int = 0,
    report: Report = lambda progress: None,
    warn: Warn = lambda message: None,
) -> None:
    """Sample a run into a file; finished batches, in the file or in its parts, are not redrawn.

    Parameters
    ----------
    run
        The run.
    path
        The result file; its name ends in .nc.
    workers
        Batches drawn side by side, one thread each.
    more
        Snapshots to add to those in the file (or to the run's own, where there is no file yet),
        rounded up to whole batches.
    report
        Told after every finished batch.
    warn
        Told what the user should know.

    Raises
    ------
    InputError
        Where the file or its parts belong to another run, another process is sampling into it, or
        the machine has too little memory or disk space; nothing is touched.
    BatchError
        Where a batch failed; those finished are kept.
    OSError
        Where the disk refuses; those finished are kept.
    """
    refuse_unless_writable(path)
    known_suffix(path, ["nc"], "a result is a netCDF file; end its name in .nc")
    stored = stored_batches(run, path)
    wanted = run.with_batches(_batches_wanted(run, stored, more, warn))
    refuse_unless_it_fits(wanted, path.parent, workers)
    parts = Parts(path.with_name(path.name + ".parts"))
    with OutputLock(path):
        stored = stored_batches(run, path)
        remove_unfinished(path.parent, path.name)
        parts.clean()
        if stored >= wanted.batches:
            _say_complete(wanted, path, parts, warn)
            return
        finished = usable_parts(run, parts, warn)
        missing = missing_batches(wanted.batches, [*range(stored), *finished])
        _draw_missing(wanted, missing, parts, workers, report)
        fold(wanted, path, parts, stored, warn)


def _batches_wanted(run: RunFile, stored: int, more: int, warn: Warn) -> int:
    """Return how many batches the file is to hold in the end."""
    if not more:
        return max(run.batches, stored)
    added = -(-more // run.batch_size)
    if added * run.batch_size != more:
        what = "1 snapshot more is" if more == 1 else f"{more} snapshots more are"
        batches = "1 batch" if added == 1 else f"{added} batches"
        rounded = added * run.batch_size
        warn(f"{what} rounded up to {rounded}: {batches} of {run.batch_size}")
    if not stored:
        warn(
            f"there is no result yet: the run's own {run.snapshots} snapshots and "
            f"{added * run.batch_size} more are drawn"
        )
    return (stored or run.batches) + added


def _say_complete(run: RunFile, path: Path, parts: Parts, warn: Warn) -> None:
    """Say that nothing is missing, and delete parts that the file holds already."""
    warn(f"{path} holds all {run.batches} batches already")
    parts.remove(run.batches)
    further = len(parts.finished())
    if further:
        what, them = ("batch", "it") if further == 1 else ("batches", "them")
        warn(f"{parts.folder} holds {further} finished {what} beyond them; --more takes {them} up")


def _draw_missing(
    run: RunFile, missing: list[int], parts: Parts, workers: int, report: Report
) -> None:
    """Draw the missing batches and store each as it finishes."""
    finished, head = run.batches - len(missing), head_of(run)
    report(Progress(finished, run.batches, 0))
    stop = threading.Event()
    work = partial(run_batch, run, stop=stop.is_set)
    executor = ThreadPoolExecutor(workers)
    try:
        outcomes = run_batches(missing, work, executor, 2 * workers)
        for drawn, (number, arrays) in enumerate(outcomes, start=1):
            parts.write(number, arrays, head)
            report(Progress(finished + drawn, run.batches, drawn))
    finally:
        # threads end by themselves, at the latest after the snapshots they are drawing
        stop.set()
        executor.shutdown(wait=False, cancel_futures=True)
