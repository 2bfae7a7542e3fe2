"""Gathers the tallies of a run's batches from parts, and from an earlier result of the same run."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from pairmc.errors import PairmcError
from pairmc.physics.observables import registry
from pairmc.statistics import Moments

# Sums over snapshots: of the joint bins and their products; the same less their expectations.
SUMS = ("moment_sum", "moment_product")
RESIDUAL_SUMS = ("residual_sum", "residual_product")


@dataclass(eq=False)
class Tallies:
    """What one observable has counted.

    Parameters
    ----------
    counts : list of arrays
        One array a batch, in batch order.
    expected_counts : list of arrays
        Where every snapshot has an expectation of its own: their sum, one array a batch.
    sums : dict of arrays
        `SUMS` of all snapshots, and with expectations of their own `RESIDUAL_SUMS`.
    """

    counts: list[NDArray[np.int64]] = field(default_factory=list)
    expected_counts: list[NDArray[np.float64]] = field(default_factory=list)
    sums: dict[str, NDArray[Any]] = field(default_factory=dict)

    def stacked(self) -> NDArray[np.int64]:
        """Return the counts as one array (batch, …)."""
        return np.stack(self.counts)

    def expected(self) -> NDArray[np.float64] | None:
        """Return the expected counts as one array (batch, …), where they differ between batches."""
        return np.stack(self.expected_counts) if self.expected_counts else None

    def moments(self, snapshots: int) -> Moments:
        """Return the moments over all snapshots, of what is left where expectations differ."""
        names = RESIDUAL_SUMS if self.expected_counts else SUMS
        first, second = (self.sums[name] for name in names)
        return Moments(snapshots, first, second)

    def add(self, sums: Mapping[str, NDArray[Any]]) -> None:
        """Add sums over further snapshots."""
        for name, part in sums.items():
            self.sums[name] = self.sums[name] + part if name in self.sums else part


@dataclass(eq=False)
class Collected:
    """All tallies of a run's batches, in batch order, and what made them.

    Parameters
    ----------
    tallies
        Of each observable.
    populations
        Particles of each component in all snapshots of a batch, batch by batch.
    energy_ratios
        Exact kinetic energy of each component as a multiple of the infinite system's, mean over the
        twists of a batch, batch by batch; only where every snapshot has a twist of its own.
    singlet_pairs
        Expected pairs in the spin singlet, batch by batch; of two components, only where every
        snapshot has a twist of its own.
    made
        Versions and processors that drew them, each set once.
    history
        Of the earlier result, or empty.
    """

    tallies: dict[str, Tallies] = field(default_factory=dict)
    populations: list[NDArray[np.int64]] = field(default_factory=list)
    energy_ratios: list[NDArray[np.float64]] = field(default_factory=list)
    singlet_pairs: list[NDArray[np.float64]] = field(default_factory=list)
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
            if f"{name}.expected_count" in arrays:
                mine.expected_counts.append(arrays[f"{name}.expected_count"])
            every = ((part, f"{name}.{part}") for part in (*SUMS, *RESIDUAL_SUMS))
            mine.add({part: arrays[key] for part, key in every if key in arrays})
        self.populations.append(arrays["population_sum"])
        if "energy_ratio" in arrays:
            self.energy_ratios.append(arrays["energy_ratio"])
        if "singlet_pairs" in arrays:
            self.singlet_pairs.append(arrays["singlet_pairs"])
        self._note(made)

    def add_result(self, names: Sequence[str], result: xr.Dataset) -> None:
        """Add all batches of an earlier result of the same run.

        Parameters
        ----------
        names
            Observables wanted.
        result
            The earlier result.

        Raises
        ------
        PairmcError
            Where an earlier version wrote it without what is needed.
        """
        if "mean_population" not in result:
            raise PairmcError(
                "the result was written by an earlier version and lacks what extending it needs; "
                "sample into another file with --into"
            )
        self.history = result.attrs["history"]
        for name in names:
            mine = self.tallies.setdefault(name, Tallies())
            count = registry.observable(name).COUNT_NAME
            mine.counts.extend(result[count].values)
            if f"{count}_expected" in result:
                mine.expected_counts.extend(result[f"{count}_expected"].values)
            every = ((part, f"{name}_{part}") for part in (*SUMS, *RESIDUAL_SUMS))
            mine.add({part: result[key].values for part, key in every if key in result})
        if "energy_ratio" in result:
            self.energy_ratios.extend(result["energy_ratio"].values)
        if "singlet_pair_count_expected" in result:
            self.singlet_pairs.extend(result["singlet_pair_count_expected"].values)
        sums = result["mean_population"].values * result["snapshot_count"].values[:, None]
        self.populations.extend(np.rint(sums).astype(np.int64))
        for made in json.loads(result.attrs["made_with"]):
            self._note(made)

    def _note(self, made: dict[str, str]) -> None:
        """Remember what made a batch, once."""
        if made not in self.made:
            self.made.append(made)
