"""Which orbitals are filled in a snapshot, and with what probabilities.

An occupation answers three questions: draw the filled orbitals of many snapshots, the mean
occupation of each orbital, and the probability that two orbitals are filled together. The last is
given by classes: orbitals of one class are alike, so ⟨n_i n_j⟩ for i ≠ j depends on their classes.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.orbitals import Orbitals


@dataclass(frozen=True, eq=False)
class GroundState:
    """The T → 0 limit at fixed population: full levels, and an equal mixture in the last one.

    Where the last level of degeneracy D holds v < D particles, each of its D!/(v!(D−v)!) fillings
    is equally likely, independently in every snapshot.

    Parameters
    ----------
    orbitals
        Complete levels that hold at least `population` orbitals, the last level the one that the
        last particle is in.
    population
        Particles, fixed.
    """

    orbitals: Orbitals
    population: int

    @property
    def degeneracy(self) -> int:
        """Number of orbitals in the last level."""
        return int(np.count_nonzero(self.orbitals.level == self.orbitals.level[-1]))

    @property
    def core(self) -> int:
        """Number of orbitals in the levels below the last one, all filled."""
        return len(self.orbitals.level) - self.degeneracy

    @property
    def valence(self) -> int:
        """Particles in the last level."""
        return self.population - self.core

    @property
    def closed(self) -> bool:
        """True where the last level is full, so that the state is one determinant."""
        return self.valence == self.degeneracy

    def draw(self, rng: np.random.Generator, snapshots: int) -> NDArray[np.int64]:
        """Return the filled orbitals of independent snapshots.

        Parameters
        ----------
        rng
            Used only where the last level is partly filled; snapshot after snapshot.
        snapshots
            How many.

        Returns
        -------
        array (snapshot, particle) of int64
            Indices into `orbitals`, ascending in each snapshot.
        """
        filled = np.tile(np.arange(self.population, dtype=np.int64), (snapshots, 1))
        if not self.closed:
            keys = rng.random((snapshots, self.degeneracy))
            chosen = np.argsort(keys, axis=1)[:, : self.valence]
            filled[:, self.core :] = self.core + np.sort(chosen, axis=1)
        return filled

    def mean(self) -> NDArray[np.float64]:
        """Return ⟨n_k⟩ of every orbital: 1 in the full levels, v/D in the last one."""
        mean = np.ones(len(self.orbitals.level))
        mean[self.core :] = self.valence / self.degeneracy
        return mean

    def classes(self) -> NDArray[np.int64]:
        """Return the class of every orbital: 0 in the full levels, 1 in the last one."""
        classes = np.zeros(len(self.orbitals.level), dtype=np.int64)
        classes[self.core :] = 1
        return classes

    def pair_probability(self) -> NDArray[np.float64]:
        """Return ⟨n_i n_j⟩, i ≠ j, as a symmetric 2 × 2 table over the classes of i and j.

        Full with full 1 · full with last v/D · last with last v(v−1)/(D(D−1)).
        """
        v, D = self.valence, self.degeneracy
        both = v * (v - 1) / (D * (D - 1)) if D > 1 else 0.0
        return np.array([[1.0, v / D], [v / D, both]])
