"""Gathers the tallies of a run's batches from parts, and from an earlier result of the same run."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from pairmc.physics.observables import registry
from pairmc.statistics import Moments


@dataclass(eq=False)
class Tallies:
    """What one observable has counted.

    Parameters
    ----------
    counts : list of arrays
        One array a batch, in batch order.
    moment_sum, moment_product : arrays
        Σx and Σxxᵀ over all snapshots.
    """

    counts: list[NDArray[np.int64]] = field(default_factory=list)
    moment_sum: NDArray[np.int64] | int = 0
    moment_product: NDArray[np.int64] | int = 0

    def stacked(self) -> NDArray[np.int64]:
        """Return the counts as one array (batch, …)."""
        return np.stack(self.counts)

    def moments(self, snapshots: int) -> Moments:
        """Return the moments over all snapshots."""
        return Moments(snapshots, np.asarray(self.moment_sum), np.asarray(self.moment_product))


@dataclass(eq=False)
class Collected:
    """All tallies of a run's batches, in batch order, and what made them.

    Parameters
    ----------
    tallies
        Of each observable.
    populations
        Particles of each component in all snapshots of a batch, batch by batch.
    made
        Versions and processors that drew them, each set once.
    history
        Of the earlier result, or empty.
    """

    tallies: dict[str, Tallies] = field(default_factory=dict)
    populations: list[NDArray[np.int64]] = field(default_factory=list)
    made: list[dict[str, str]] = field(default_factory=list)
    history: str = ""

    def add_part(self, names: Sequence[str], arrays: dict[str, Any], made: dict[str, str]) -> None:
        """Add the next batch.

        Parameters
        ----------
        names
            Observables wanted.
        arrays
            As `pairmc.running.batch.run_batch` returns them.
        made
            What made them.
        """
        for name in names:
            mine = self.tallies.setdefault(name, Tallies())
            mine.counts.append(arrays[f"{name}.count"])
            mine.moment_sum = mine.moment_sum + arrays[f"{name}.moment_sum"]
            mine.moment_product = mine.moment_product + arrays[f"{name}.moment_product"]
        self.populations.append(arrays["population_sum"])
        self._note(made)

    def add_result(self, names: Sequence[str], result: xr.Dataset) -> None:
        """Add all batches of an earlier result of the same run.

        Parameters
        ----------
        names
            Observables wanted.
        result
            The earlier result.
        """
        self.history = result.attrs["history"]
        for name in names:
            mine = self.tallies.setdefault(name, Tallies())
            mine.counts.extend(result[registry.observable(name).COUNT_NAME].values)
            mine.moment_sum = mine.moment_sum + result[f"{name}_moment_sum"].values
            mine.moment_product = mine.moment_product + result[f"{name}_moment_product"].values
        sums = result["mean_population"].values * result["snapshot_count"].values[:, None]
        self.populations.extend(np.rint(sums).astype(np.int64))
        for made in json.loads(result.attrs["made_with"]):
            self._note(made)

    def _note(self, made: dict[str, str]) -> None:
        """Remember what made a batch, once."""
        if made not in self.made:
            self.made.append(made)
