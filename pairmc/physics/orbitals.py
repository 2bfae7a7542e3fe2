"""Orbitals of the box: products of one-dimensional orbitals, in exact order of energy.

The one place that decides which energies are degenerate.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import hypot, pi, prod

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.axes.periodic import Periodic
from pairmc.physics.gas import fermi_wavenumber

# Energies closer than this fraction are one level. Rounding separates equal energies by some 1e-15
# of their size; different energies of a box with sides in a ratio of small whole numbers differ by
# far more than 1e-10.
DEGENERACY_TOLERANCE = 1e-10


@dataclass(frozen=True, eq=False)
class Orbitals:
    """The lowest complete levels of a box.

    Parameters
    ----------
    numbers : array (orbital, axis) of int64
        Quantum numbers, ordered by level and, within a level, by the numbers themselves.
    energies : array (orbital,)
        k²/2 of each orbital's level, in units of ħ²/(m · length²).
    level : array (orbital,) of int64
        Level of each orbital, from 0.
    """

    numbers: NDArray[np.int64]
    energies: NDArray[np.float64]
    level: NDArray[np.int64]

    def __len__(self) -> int:
        return len(self.numbers)

    @property
    def closed(self) -> NDArray[np.int64]:
        """Populations that fill the lowest levels and leave none partly filled, ascending."""
        return np.cumsum(np.bincount(self.level))


@dataclass(frozen=True, eq=False)
class TwistedOrbitals:
    """The orbitals that are filled at one twist or another, where every snapshot has its own.

    Parameters
    ----------
    numbers : array (orbital, axis) of int64
        Quantum numbers, in their own order.
    axes
        The axes without a twist.
    """

    numbers: NDArray[np.int64]
    axes: tuple[Periodic, ...]

    def __len__(self) -> int:
        return len(self.numbers)

    def energies(self, twists: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return k²/2 of every orbital at every twist.

        Parameters
        ----------
        twists : array (snapshot, axis)
            τ, in units of 2π.

        Returns
        -------
        array (snapshot, orbital)
        """
        total = np.zeros((len(twists), len(self.numbers)))
        for a, axis in enumerate(self.axes):
            k = axis.steps(self.numbers[:, a]) + 2 * pi / axis.length * twists[:, a, None]
            total += 0.5 * k * k
        return total


def enumerate_any_twist(axes: Sequence[Periodic], energy: float) -> TwistedOrbitals:
    """Return all orbitals whose energy is below `energy` at some twist.

    Parameters
    ----------
    axes
        One axis per dimension.
    energy
        In units of ħ²/(m · length²).
    """
    wavenumber = (2 * energy) ** 0.5
    choices = []
    for axis in axes:
        largest = int(wavenumber * axis.length / (2 * pi) + 0.5) + 1
        choices.append(np.arange(-largest, largest + 1, dtype=np.int64))
    grid = np.meshgrid(*choices, indexing="ij")
    numbers = np.stack([part.ravel() for part in grid], axis=1)
    nearest = np.maximum(np.abs(numbers) - 0.5, 0.0) * [2 * pi / axis.length for axis in axes]
    kept = (nearest * nearest).sum(axis=1) <= (1 + 1e-9) * wavenumber**2
    return TwistedOrbitals(numbers[kept], tuple(axes))


def filled_at_any_twist(axes: Sequence[Periodic], population: int) -> float:
    """Return an energy below which there are `population` orbitals whatever the twist.

    Every point of a ball of radius R lies within half the diagonal δ of the cell of wave vectors
    around one of them, so a ball of radius R + δ holds at least as many as R has cells: k_F + δ.

    Parameters
    ----------
    axes
        One axis per dimension.
    population
        At least 1.
    """
    density = population / prod(axis.length for axis in axes)
    diagonal = hypot(*(pi / axis.length for axis in axes))
    return float(0.5 * (fermi_wavenumber(len(axes), density) + diagonal) ** 2)


def nothing_filled(dimension: int) -> Orbitals:
    """Return no orbital at all, for a component without particles."""
    none = np.empty(0, dtype=np.int64)
    return Orbitals(np.empty((0, dimension), dtype=np.int64), np.empty(0), none)


def enumerate_orbitals(axes: Sequence[Periodic], count: int) -> Orbitals:
    """Return the lowest complete levels that hold at least `count` orbitals.

    Parameters
    ----------
    axes
        One axis per dimension.
    count
        Orbitals wanted, at least 1; the level of the last one is returned whole.

    Returns
    -------
    Orbitals
        Ordered by energy; equal energies (see `DEGENERACY_TOLERANCE`) by quantum numbers.
    """
    density = (count + 1) / prod(axis.length for axis in axes)
    cutoff = 0.5 * fermi_wavenumber(len(axes), density) ** 2
    while True:
        numbers, energies = _below(axes, cutoff)
        if len(energies) >= count:
            threshold = energies[count - 1] * (1 + 2 * DEGENERACY_TOLERANCE)
            if threshold <= cutoff:
                kept = energies <= threshold
                return by_level(numbers[kept], energies[kept])
        cutoff *= 1.3


def enumerate_below(axes: Sequence[Periodic], energy: float) -> Orbitals:
    """Return all levels up to an energy.

    Parameters
    ----------
    axes
        One axis per dimension.
    energy
        In units of ħ²/(m · length²).
    """
    return by_level(*_below(axes, energy * (1 + 2 * DEGENERACY_TOLERANCE)))


def _below(
    axes: Sequence[Periodic], cutoff: float
) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Return quantum numbers and energies of all orbitals up to `cutoff`, ascending."""
    choices = [axis.numbers_below(cutoff) for axis in axes]
    grid = np.meshgrid(*choices, indexing="ij")
    numbers = np.stack([part.ravel() for part in grid], axis=1)
    parts = [axis.energies(numbers[:, a]) for a, axis in enumerate(axes)]
    energies = np.sum(parts, axis=0)
    kept = energies <= cutoff
    numbers, energies = numbers[kept], energies[kept]
    order = np.argsort(energies, kind="stable")
    return numbers[order], energies[order]


def by_level(numbers: NDArray[np.int64], energies: NDArray[np.float64]) -> Orbitals:
    """Group orbitals into levels and order each level by its quantum numbers.

    Parameters
    ----------
    numbers : array (orbital, axis) of int64
        Quantum numbers.
    energies : array (orbital,)
        Ascending.
    """
    step = np.diff(energies) > DEGENERACY_TOLERANCE * energies[1:]
    level = np.concatenate(([0], np.cumsum(step)))
    keys = tuple(numbers[:, a] for a in reversed(range(numbers.shape[1])))
    order = np.lexsort((*keys, level))
    first = np.concatenate(([0], np.flatnonzero(step) + 1))
    return Orbitals(numbers=numbers[order], energies=energies[first][level], level=level)


def symmetric(numbers: NDArray[np.int64]) -> bool:
    """Return whether with each m also −m is among quantum numbers (orbital, axis)."""
    filled = {tuple(row) for row in numbers.tolist()}
    return all(tuple(-m for m in row) in filled for row in filled)


def nearest_closed(axes: Sequence[Periodic], population: int) -> tuple[int, ...]:
    """Return the closed-shell populations next below and next above (or just itself).

    Parameters
    ----------
    axes
        One axis per dimension.
    population
        Particles of one component.
    """
    closed = enumerate_orbitals(axes, population).closed
    if population in closed:
        return (population,)
    return tuple(int(number) for number in closed[-2:])
