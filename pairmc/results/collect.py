"""Gathers the tallies of a run's batches from parts, and from an earlier result of the same run."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pairmc.running.parts import Parts
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
    """All tallies of a run's batches, in batch order, and what made them."""

    tallies: dict[str, Tallies] = field(default_factory=dict)
    made: list[dict[str, str]] = field(default_factory=list)

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
        if made not in self.made:
            self.made.append(made)


def collect(parts: Parts, batches: Sequence[int], names: Sequence[str]) -> Collected:
    """Gather the tallies of finished batches.

    Parameters
    ----------
    parts
        Where they are.
    batches
        Their numbers, in order.
    names
        Observables wanted.

    Raises
    ------
    pairmc.running.parts.DamagedPartError
        Where a part is not what was written.
    """
    collected = Collected()
    for batch in batches:
        arrays, made = parts.read(batch)
        collected.add_part(names, arrays, made)
    return collected
