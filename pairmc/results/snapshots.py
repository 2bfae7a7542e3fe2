"""Snapshots as a dataset, without a result file."""

from __future__ import annotations

import os

import numpy as np
import xarray as xr

from pairmc.errors import InputError, Problem
from pairmc.physics.snapshots import joined
from pairmc.results.scales import component_labels
from pairmc.results.schema import TWIST_ATTRIBUTES
from pairmc.runfile.read import read_run_file
from pairmc.runfile.run import RunFile
from pairmc.running.batch import make_sampler


def draw_snapshots(
    run: RunFile | str | os.PathLike[str], count: int, seed: int | None = None
) -> xr.Dataset:
    """Draw the first `count` snapshots of a run.

    They are the same that `sample` would draw and keep (there rounded to single precision), batch
    after batch, also beyond the run's own number of batches.

    Parameters
    ----------
    run
        A run, or the path of a run file.
    count
        How many, at least 1.
    seed
        Replaces the run's seed; None keeps it.

    Returns
    -------
    xarray.Dataset
        ``position`` (snapshot, particle, axis), float64 in length units, from 0 to the side;
        ``component`` (snapshot, particle), int8, an index into ``spin``; ``side`` (axis). Where
        numbers fluctuate, places without a particle hold NaN and −1. Where every snapshot has a
        twist of its own, ``snapshot_twist`` (snapshot, axis), in units of 2π.

    Raises
    ------
    InputError
        Where the run file is refused, `count` is no positive whole number, or the seed is none.
    """
    known = run if isinstance(run, RunFile) else read_run_file(run)
    if isinstance(count, bool) or not isinstance(count, int | np.integer) or count < 1:
        raise InputError(Problem("count", repr(count), "a whole number, at least 1"))
    if seed is not None:
        known = known.with_seed(seed)
    batches = []
    for batch in range(-(-int(count) // known.batch_size)):
        wanted = min(known.batch_size, int(count) - batch * known.batch_size)
        batches.append(make_sampler(known, batch).draw(wanted))
    sides = np.array(known.system().sides)
    together = joined(batches, known.gas.particles, known.gas.dimension)
    position, component = together.position * sides, together.component
    unit = known.gas.units.udunits(1)
    twist = {}
    if known.twist == "averaged":
        twist["snapshot_twist"] = (("snapshot", "axis"), together.twist, TWIST_ATTRIBUTES)
    return xr.Dataset(
        twist
        | {
            "position": (
                ("snapshot", "particle", "axis"),
                position,
                {"units": unit, "long_name": "position in the periodic box, from 0 to the side"},
            ),
            "component": (
                ("snapshot", "particle"),
                component,
                {"long_name": "spin component of the particle, an index into spin"},
            ),
            "side": (("axis",), sides, {"units": unit, "long_name": "side of the periodic box"}),
        },
        coords={"spin": (("spin",), component_labels(known.gas).astype(str))},
        attrs={"title": known.title, "seed": str(known.seed)},
    )
