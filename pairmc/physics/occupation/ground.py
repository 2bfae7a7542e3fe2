"""The ground state of fixed particle number.

An occupation answers three questions: draw the filled orbitals of many snapshots, the mean
occupation of each orbital, and the probability that two orbitals are filled together, as a sum of
products (pairs.py).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.occupation.pairs import PairTerm, stacked
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

    fixed = True

    @property
    def mean_number(self) -> float:
        """Number of particles."""
        return self.population

    @property
    def degeneracy(self) -> int:
        """Number of orbitals in the last level; 0 where nothing is filled."""
        if self.population == 0:
            return 0
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
        mean[self.core :] = self.valence / max(1, self.degeneracy)
        return mean

    def pair_terms(self) -> Iterator[PairTerm]:
        """Yield the terms of ⟨n_i n_j⟩, i ≠ j.

        Full with full level 1 · full with last v/D · last with last v(v−1)/(D(D−1)): the product of
        means, corrected within the last level.
        """
        v, D = self.valence, self.degeneracy
        yield PairTerm(1.0, self.mean())
        if D > 1 and not self.closed:
            last = np.zeros(len(self.orbitals.level))
            last[self.core :] = 1.0
            yield PairTerm(v * (v - 1) / (D * (D - 1)) - (v / D) ** 2, last)

    def pair_factors(self) -> tuple[NDArray[np.complex128], NDArray[np.complex128]]:
        """Return the weights and factors of `pair_terms` as arrays (term,), (term, orbital)."""
        return stacked(self.pair_terms())
