"""What can be shown of results, and which results are shown together."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    import xarray as xr

# In the words of the command line; the first is shown where nothing is said.
VIEWS = ("exchange-hole", "pair-correlation", "singlet-fraction")

# Of one gas, each at another angle, in one picture; each has a marker of its own.
MOST_ANGLES = 7

# Tables of a run's settings that say how much was drawn, not of what.
_OF_THE_DRAW = ("stream_version", "sampling")


def angle_of(dataset: xr.Dataset) -> float:
    """Return by how many degrees all spins were rotated."""
    return float(dataset["rotation"]) if "rotation" in dataset else 0.0


def differ_only_in_rotation(datasets: Sequence[xr.Dataset]) -> bool:
    """Return whether results are of one gas and box, each at another angle of spin rotation.

    Seeds, snapshots and batches may differ; bins are the same. Pairs may be missing: without a
    rotation nobody is detected as a component without particles.
    """
    if len(datasets) < 2 or len({angle_of(dataset) for dataset in datasets}) < len(datasets):
        return False
    first, *others = datasets
    return all(
        all("pair_correlation" in one and "run_settings" in one.attrs for one in (first, dataset))
        and _unrotated(dataset) == _unrotated(first)
        and np.array_equal(dataset["separation_bounds"], first["separation_bounds"])
        for dataset in others
    )


def with_all_pairs(datasets: Sequence[xr.Dataset]) -> list[xr.Dataset]:
    """Return results with the pairs that any of them has: those missing hold NaN, integers −1."""
    every = max((dataset["pair"].values for dataset in datasets), key=len)
    filled = []
    for dataset in datasets:
        of_pairs = dataset[[name for name in dataset if "pair" in dataset[name].dims]]
        nothing = {
            name: np.nan if part.dtype.kind == "f" else -1 for name, part in of_pairs.items()
        }
        aligned = of_pairs.reindex(pair=every, fill_value=nothing)
        filled.append(dataset.drop_dims("pair").assign(aligned.data_vars))
    return filled


def _unrotated(dataset: xr.Dataset) -> dict[str, Any]:
    """Return what decides the snapshots of a run, less the angle and how many were drawn."""
    from pairmc.results.load import run_settings

    settings = run_settings(dataset.attrs)
    spin = {key: value for key, value in settings.get("spin", {}).items() if key != "rotation"}
    return {key: settings[key] for key in settings if key not in _OF_THE_DRAW} | {"spin": spin}
