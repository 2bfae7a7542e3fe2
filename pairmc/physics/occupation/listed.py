"""One determinant of named orbitals: a state that is listed, whatever its energy."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.axes.periodic import Periodic
from pairmc.physics.occupation.pairs import PairTerm, stacked
from pairmc.physics.orbitals import Orbitals, by_level, enumerate_orbitals, nothing_filled

Numbers = Sequence[int]


@dataclass(frozen=True, eq=False)
class Listed:
    """The determinant of all of its orbitals; nothing about it is random.

    Parameters
    ----------
    orbitals
        Those that are filled and no others, ordered by energy; their levels are the distinct
        energies among them, from 0, and need be neither complete nor the lowest of the box.
    """

    orbitals: Orbitals

    closed = True
    fixed = True

    @property
    def population(self) -> int:
        """Number of particles."""
        return len(self.orbitals)

    @property
    def mean_number(self) -> float:
        """Number of particles."""
        return self.population

    def draw(self, rng: np.random.Generator, snapshots: int) -> NDArray[np.int64]:
        """Return the filled orbitals of snapshots: all of them in each; `rng` is not used.

        Returns
        -------
        array (snapshot, particle) of int64
            Indices into `orbitals`, ascending.
        """
        return np.tile(np.arange(self.population, dtype=np.int64), (snapshots, 1))

    def mean(self) -> NDArray[np.float64]:
        """Return ⟨n_k⟩ = 1 of every orbital."""
        return np.ones(self.population)

    def pair_terms(self) -> Iterator[PairTerm]:
        """Yield ⟨n_i n_j⟩ = 1, i ≠ j, as its one term."""
        yield PairTerm(1.0, self.mean())

    def pair_factors(self) -> tuple[NDArray[np.complex128], NDArray[np.complex128]]:
        """Return the weights and factors of `pair_terms` as arrays (term,), (term, orbital)."""
        return stacked(self.pair_terms())


def listed_state(
    axes: Sequence[Periodic], numbers: Sequence[Numbers] | NDArray[np.int64]
) -> Listed:
    """Return the determinant of some orbitals, in whatever order they are named.

    Parameters
    ----------
    axes
        One axis per dimension, with its twist.
    numbers : (orbital, axis)
        Quantum numbers, no orbital twice; may be none.
    """
    rows = _rows(numbers, len(axes))
    if len(rows) == 0:
        return Listed(nothing_filled(len(axes)))
    energies = np.sum([axis.energies(rows[:, a]) for a, axis in enumerate(axes)], axis=0)
    order = np.argsort(energies, kind="stable")
    return Listed(by_level(rows[order], energies[order]))


def changed_numbers(
    axes: Sequence[Periodic],
    population: int,
    displaced: Numbers = (),
    emptied: Sequence[Numbers] = (),
    filled: Sequence[Numbers] = (),
) -> NDArray[np.int64]:
    """Return the filled orbitals of a ground state after changes.

    Parameters
    ----------
    axes
        One axis per dimension, with its twist.
    population
        Particles of the ground state, a closed shell.
    displaced
        Added to the quantum numbers of all filled orbitals; none is nothing.
    emptied, filled
        Quantum numbers, after the displacement, of orbitals that are taken out and put in.

    Returns
    -------
    array (orbital, axis) of int64
        Ordered by the quantum numbers, the first axis first.
    """
    dimension = len(axes)
    base = np.empty((0, dimension), dtype=np.int64)
    if population:
        base = enumerate_orbitals(axes, population).numbers[:population]
    shift = np.array(displaced or (0,) * dimension, dtype=np.int64)
    kept = {tuple(row) for row in (base + shift).tolist()} - {tuple(row) for row in emptied}
    return _rows(sorted(kept | {tuple(row) for row in filled}), dimension)


def _rows(numbers: Sequence[Numbers] | NDArray[np.int64], dimension: int) -> NDArray[np.int64]:
    """Return quantum numbers as an array (orbital, axis), also where there are none."""
    return np.array(numbers, dtype=np.int64).reshape(-1, dimension)
