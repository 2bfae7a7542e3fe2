"""Folds finished batches into the result file, and believes it only once it has been read back."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path

import netCDF4
import numpy as np
import xarray as xr

from pairmc.errors import PairmcError
from pairmc.physics.snapshots import widened
from pairmc.results.collect import Collected
from pairmc.results.dataset import build_dataset
from pairmc.results.load import load
from pairmc.results.write import Block, kept_in_file, kept_in_parts, write_result
from pairmc.runfile.run import RunFile
from pairmc.running.parts import DamagedPartError, Parts


def fold(run: RunFile, path: Path, parts: Parts, stored: int, warn: Callable[[str], None]) -> None:
    """Fold batches into the result file, read it back, put it in place, delete the parts.

    Parameters
    ----------
    run
        The run, with the number of batches that the file is to hold.
    path
        The result file; the batches that it holds already stay in it.
    parts
        The finished batches from number `stored` on.
    stored
        How many batches the file holds already.
    warn
        Told what the user should know.

    Raises
    ------
    PairmcError
        Where what was read back is not what was written, or a part is damaged; the old file and the
        parts are kept.
    OSError
        Where the disk refuses; the old file and the parts are kept.
    """
    try:
        collected = _collect(run, path, parts, stored)
        if len(collected.made) > 1:
            warn("batches come from different versions or processors: their last bits may differ")
        dataset = build_dataset(run, collected)

        def kept() -> Iterator[Block]:
            return _kept(run, path, parts, stored)

        def check(written: Path) -> None:
            _compare(written, dataset, kept())

        write_result(path, dataset, run, kept, check)
    except DamagedPartError as error:
        raise PairmcError(
            f"a part was damaged while it was folded ({error}); the same command draws it again"
        ) from error
    parts.remove(run.batches)


def _collect(run: RunFile, path: Path, parts: Parts, stored: int) -> Collected:
    """Gather the tallies of all batches, those in the file first."""
    collected = Collected()
    names = list(run.observables)
    if stored:
        collected.add_result(names, load(path, snapshots=False))
    for batch in range(stored, run.batches):
        arrays, made = parts.read(batch)
        collected.add_part(names, arrays, made["versions"])
    return collected


def _kept(run: RunFile, path: Path, parts: Parts, stored: int) -> Iterator[Block]:
    """Yield the kept snapshots in batch order, those in the file first."""
    if stored:
        yield from kept_in_file(path, run)
    yield from kept_in_parts(run, parts, range(stored, run.batches))


def _compare(path: Path, dataset: xr.Dataset, blocks: Iterator[Block]) -> None:
    """Read a result file back and compare it with what was to be written."""
    result = load(path, snapshots=False)
    for name in dataset.data_vars:
        if not np.array_equal(dataset[name].values, result[name].values, equal_nan=True):
            raise PairmcError(f"{name} was not read back from the disk as it was written")
    with netCDF4.Dataset(path) as file:
        file.set_auto_mask(False)
        start = 0
        for _, narrow in blocks:
            block = widened(narrow, len(file.dimensions["particle"]))
            rows = slice(start, start + len(block.position))
            wanted = {"position": block.position, "component": block.component}
            if block.twist.size:
                wanted["snapshot_twist"] = block.twist
            if not all(
                np.array_equal(file[name][rows], part, equal_nan=True)
                for name, part in wanted.items()
            ):
                raise PairmcError("snapshots were not read back from the disk as they were written")
            start = rows.stop
