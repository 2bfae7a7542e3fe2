"""Writes a result file: whole, or not at all."""

from __future__ import annotations

import errno
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np
import xarray as xr

from pairmc.files import write_whole
from pairmc.physics.snapshots import NO_COMPONENT, Snapshots, widened
from pairmc.results.schema import TWIST_ATTRIBUTES
from pairmc.runfile.run import RunFile
from pairmc.running.batch import kept_in_batch
from pairmc.running.parts import Parts

# A batch and those of its snapshots that are kept, positions in length units.
Block = tuple[int, Snapshots]

# Rows of kept snapshots in one chunk of the file hold about this many bytes.
_CHUNK_BYTES = 1_000_000


def kept_in_parts(run: RunFile, parts: Parts, batches: range) -> Iterator[Block]:
    """Yield the kept snapshots of finished batches."""
    sides = np.array(run.system().sides)
    for batch in batches:
        if kept_in_batch(run, batch) == 0:
            return
        arrays, _ = parts.read(batch)
        position = (arrays["kept.position"].astype(np.float64) * sides).astype(np.float32)
        position[position >= sides.astype(np.float32)] = 0.0
        twist = arrays.get("kept.twist", np.empty((0, 0)))
        yield batch, Snapshots(position, arrays["kept.component"], twist)


def kept_in_file(path: Path, run: RunFile) -> Iterator[Block]:
    """Yield the kept snapshots of a result file, batch by batch.

    Positions come in the run's length unit, also where the file was written in another.
    """
    with netCDF4.Dataset(path) as file:
        if "position" not in file.variables:
            return
        file.set_auto_mask(False)
        same_unit = file["position"].units == run.gas.units.udunits(1)
        factors = np.array(run.system().sides) / file["side"][:]
        numbers = file["snapshot_batch"][:]
        for batch in np.unique(numbers):
            first, last = np.searchsorted(numbers, [batch, batch + 1])
            position = file["position"][first:last]
            if not same_unit:
                position = (position * factors).astype(np.float32)
            twist = np.empty((0, 0))
            if "snapshot_twist" in file.variables:
                twist = file["snapshot_twist"][first:last]
            yield int(batch), Snapshots(position, file["component"][first:last], twist)


def write_result(
    path: Path,
    dataset: xr.Dataset,
    run: RunFile,
    blocks: Callable[[], Iterator[Block]],
    check: Callable[[Path], None],
) -> None:
    """Write a result file under a temporary name and put it in place when it has been checked.

    Parameters
    ----------
    path
        The result file.
    dataset
        All but the kept snapshots.
    run
        The run.
    blocks
        Gives the kept snapshots, batch by batch; one batch is in memory at a time. They may come
        from the file that is about to be replaced.

    check
        Reads the finished file back before it gets its name.

    Raises
    ------
    OSError
        Where the disk refuses.
    """

    def write(temporary: Path) -> None:
        try:
            fill(temporary)
        except RuntimeError as error:  # what netCDF makes of a full disk
            raise OSError(errno.EIO, f"the result could not be written ({error})") from error

    def fill(temporary: Path) -> None:
        bare, bounds = _without_bounds(dataset)
        bare.to_netcdf(temporary, engine="netcdf4", encoding=encoding(dataset))
        kept = sum(kept_in_batch(run, batch) for batch in range(run.batches))
        with netCDF4.Dataset(temporary, "a") as file:
            for name, edges in bounds.items():
                file[name].setncattr("bounds", edges)
            for name in _labels(dataset):
                file[name].setncattr("_Encoding", "utf-8")
            if kept:
                widest = max(block.component.shape[1] for _, block in blocks())
                _append_kept(file, run, kept, widest, blocks())

    write_whole(path, write, check)


def _without_bounds(dataset: xr.Dataset) -> tuple[xr.Dataset, dict[str, str]]:
    """Return the dataset without its `bounds` attributes, and these by coordinate.

    Where xarray sees such an attribute it takes units and long_name away from the bounds, and every
    variable of a result carries its own.
    """
    bare, bounds = dataset.copy(), {}
    for name in dataset.coords:
        if "bounds" in dataset[name].attrs:
            bare[name].attrs = dict(dataset[name].attrs)
            bounds[str(name)] = bare[name].attrs.pop("bounds")
    return bare, bounds


def _labels(dataset: xr.Dataset) -> list[str]:
    """Return the variables that hold text; with an encoding named, readers give it as text."""
    return [str(name) for name, part in dataset.variables.items() if part.dtype.kind == "S"]


def encoding(dataset: xr.Dataset) -> dict[Any, dict[str, Any]]:
    """Return how each variable is stored: counts compressed in one chunk, no fill values."""
    chosen: dict[Any, dict[str, Any]] = {}
    for name, variable in dataset.variables.items():
        if variable.dtype.kind == "S":
            chosen[name] = {"dtype": "S1", "char_dim_name": f"{name}_characters"}
            continue
        chosen[name] = {"_FillValue": None}
        if variable.dtype.kind == "i" and variable.ndim > 1:
            chosen[name] |= {
                "zlib": True,
                "complevel": 1,
                "shuffle": True,
                "chunksizes": variable.shape,
            }
    return chosen


def _append_kept(
    file: netCDF4.Dataset, run: RunFile, kept: int, particles: int, blocks: Iterator[Block]
) -> None:
    """Add the variables of the kept snapshots, a batch at a time."""
    dimension = run.gas.dimension
    file.createDimension("snapshot", kept)
    file.createDimension("particle", particles)
    rows = max(1, min(kept, _CHUNK_BYTES // (4 * particles * dimension)))

    def create(name: str, kind: str, dimensions: tuple[str, ...], **attributes: Any) -> Any:
        sizes = [len(file.dimensions[part]) for part in dimensions]
        variable = file.createVariable(
            name, kind, dimensions, fill_value=False, chunksizes=[rows, *sizes[1:]]
        )
        variable.setncatts(attributes)
        return variable

    along = ("snapshot", "particle")
    position = create(
        "position",
        "f4",
        (*along, "axis"),
        units=run.gas.units.udunits(1),
        long_name="position in the periodic box, from 0 to the side; NaN is padding",
    )
    component = create(
        "component",
        "i1",
        along,
        long_name="spin component of the particle",
        flag_values=np.array([NO_COMPONENT, *range(len(run.gas.components))], dtype=np.int8),
        flag_meanings=" ".join(["padding", *run.gas.components]),
    )
    count = create("particle_count", "i4", ("snapshot",), units="1", long_name="particles")
    batches = create(
        "snapshot_batch", "i8", ("snapshot",), units="1", long_name="batch of the snapshot"
    )
    if run.twist == "averaged":
        twist = create("snapshot_twist", "f8", ("snapshot", "axis"), **TWIST_ATTRIBUTES)
    start = 0
    for batch, narrow in blocks:
        block = widened(narrow, particles)
        rows_here = slice(start, start + len(block.position))
        position[rows_here] = block.position
        component[rows_here] = block.component
        count[rows_here] = np.count_nonzero(block.component != NO_COMPONENT, axis=1)
        batches[rows_here] = batch
        if block.twist.size:
            twist[rows_here] = block.twist
        start = rows_here.stop
