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

import numpy as np
import xarray as xr

from pairmc.errors import InputError, PairmcError, Problem
from pairmc.files import remove_unfinished
from pairmc.results.collect import collect
from pairmc.results.dataset import build_dataset
from pairmc.results.load import load, read_attributes, run_settings
from pairmc.results.write import kept_blocks, write_result
from pairmc.runfile.digest import canonical, differing_keys, digest
from pairmc.runfile.read import read_run_file
from pairmc.runfile.run import RunFile
from pairmc.running.batch import run_batch
from pairmc.running.campaign import missing_batches, run_batches
from pairmc.running.parts import DamagedPartError, Parts
from pairmc.running.provenance import made_with


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


def default_result_path(run: RunFile) -> Path:
    """Return the run file's stem with .nc, beside it."""
    return Path(run.path).with_suffix(".nc")


def sample(
    run: RunFile | str | os.PathLike[str],
    into: str | os.PathLike[str] | None = None,
    workers: int | None = None,
) -> xr.Dataset:
    """Sample a run and return its result.

    Parameters
    ----------
    run
        A run, or the path of a run file.
    into
        Result file to write, which goes on where an interrupted one ended; None keeps nothing.
    workers
        Batches drawn side by side; None takes the cores that this process may use. The numbers are
        the same for any.

    Returns
    -------
    xarray.Dataset
        As documented in DEVELOPERS.md, "Result file".

    Raises
    ------
    InputError
        Where the run file or the output is refused.
    """
    known = run if isinstance(run, RunFile) else read_run_file(run)
    count = workers or available_cores()
    if into is not None:
        return sample_into(known, Path(into), count, warn=_warn)
    with tempfile.TemporaryDirectory() as folder:
        return sample_into(known, Path(folder) / "result.nc", count, warn=_warn)


def available_cores() -> int:
    """Return the number of cores this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def _warn(message: str) -> None:
    warnings.warn(message, stacklevel=3)


def sample_into(
    run: RunFile,
    path: Path,
    workers: int = 1,
    report: Callable[[Progress], None] = lambda progress: None,
    warn: Callable[[str], None] = lambda message: None,
) -> xr.Dataset:
    """Sample a run into a file; batches that an earlier, interrupted call finished are not redrawn.

    Parameters
    ----------
    run
        The run.
    path
        The result file.
    workers
        Batches drawn side by side, one thread each.
    report
        Told after every finished batch.
    warn
        Told what the user should know.

    Returns
    -------
    xarray.Dataset
        The result as read back.

    Raises
    ------
    InputError
        Where the file or its parts belong to another run; nothing is touched.
    BatchError
        Where a batch failed; those finished are kept.
    OSError
        Where the disk refuses; those finished are kept.
    """
    parts = Parts(path.with_name(path.name + ".parts"))
    check_target(path)
    if path.exists() and _is_complete(run, path):
        warn(f"{path} holds all {run.batches} batches already")
        return load(path)
    finished = _usable_parts(run, parts, warn)
    remove_unfinished(path.parent, path.name)
    parts.clean()
    missing = missing_batches(run.batches, finished)
    made = made_with(run)
    progress = Progress(run.batches - len(missing), run.batches, 0)
    report(progress)
    stop = threading.Event()
    work = partial(run_batch, run, stop=stop.is_set)
    with ThreadPoolExecutor(workers) as executor:
        try:
            for number, arrays in run_batches(missing, work, executor, 2 * workers):
                parts.write(number, arrays, made)
                progress = Progress(progress.finished + 1, run.batches, progress.drawn + 1)
                report(progress)
        finally:
            stop.set()
    return fold(run, path, parts, warn)


def fold(run: RunFile, path: Path, parts: Parts, warn: Callable[[str], None]) -> xr.Dataset:
    """Fold all parts of a run into its result file, read it back, and only then delete them.

    Raises
    ------
    PairmcError
        Where what was read back is not what was written; the parts are kept.
    """
    collected = collect(parts, range(run.batches), list(run.observables))
    if len(collected.made) > 1:
        warn("batches were drawn with different versions or processors: their last bits may differ")
    dataset = build_dataset(run, collected)
    write_result(path, dataset, run, kept_blocks(run, parts))
    result = load(path)
    for name in dataset.data_vars:
        if not np.array_equal(dataset[name].values, result[name].values, equal_nan=True):
            raise PairmcError(f"{path}: {name} was not read back as written; the parts are kept")
    parts.remove()
    return result


def check_target(path: Path) -> None:
    """Refuse an output that cannot be written, before anything is drawn.

    Raises
    ------
    InputError
        Where the folder is missing or not writable, or the name is a folder's.
    """
    folder = path.parent
    if not folder.is_dir():
        raise InputError(
            Problem(str(path), f"folder {folder} does not exist", "", "make it, or name another")
        )
    if path.is_dir():
        raise InputError(Problem(str(path), "a folder", "a file name", "add a file name to it"))
    if not os.access(folder, os.W_OK):
        raise InputError(
            Problem(str(path), f"folder {folder} is not writable", "", "name another with --into")
        )


def _is_complete(run: RunFile, path: Path) -> bool:
    """Return whether the file is this run's; refuse it where it is another's."""
    attributes = read_attributes(path)
    _refuse_other_run(run, path, run_settings(attributes))
    with xr.open_dataset(path, engine="netcdf4") as file:
        batches = file.sizes["batch"]
    if batches != run.batches:
        raise InputError(
            Problem(
                str(path),
                f"a result of this run with {batches} batches, {run.batches} asked for",
                "",
                "name another file with --into",
            )
        )
    return True


def _usable_parts(run: RunFile, parts: Parts, warn: Callable[[str], None]) -> list[int]:
    """Return the finished batches of this run; damaged ones are named, deleted and redrawn."""
    usable = []
    for batch in parts.finished():
        try:
            _, made = parts.read(batch)
        except DamagedPartError as error:
            warn(f"{parts.path(batch)} is damaged ({error}); the batch is drawn again")
            parts.discard(batch)
            continue
        if made["digest"] != digest(run):
            raise InputError(
                Problem(
                    str(parts.folder),
                    "unfinished batches of another run",
                    "",
                    "finish that run, delete the folder, or name another file with --into",
                )
            )
        usable.append(batch)
    return usable


def _refuse_other_run(run: RunFile, path: Path, settings: dict[str, object]) -> None:
    """Refuse a result file of another run, naming the keys that differ."""
    differing = differing_keys(settings, canonical(run))
    if differing:
        key, theirs, mine = differing[0]
        more = f" (and {len(differing) - 1} more keys)" if len(differing) > 1 else ""
        raise InputError(
            Problem(
                str(path),
                f"the result of another run: {key} is {theirs} there and {mine} here{more}",
                "",
                "name another file with --into, or move that one away",
            )
        )
