"""Small gases for the tests of the physics, their snapshots, and plain pair counting.

The counting here is numpy over all pairs; it shares nothing with the package's.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.gas import Gas
from pairmc.physics.occupation.ground import GroundState
from pairmc.physics.sampling.direct import DirectSampler
from pairmc.physics.snapshots import Snapshots
from pairmc.physics.system import System, build_system
from pairmc.streams import generator

NAMES = ("up", "down", "strange")

# Ratios of uneven sides, exact so that equal energies are equal.
FLAT = (Fraction(1), Fraction(3, 2))
BRICK = (Fraction(1), Fraction(3, 2), Fraction(7, 4))

Ratio = Sequence[int | Fraction]


def make_system(ratio: Ratio, populations: Sequence[int], density: float = 0.83) -> System:
    """Return a gas in a periodic box of this ratio of sides."""
    gas = Gas(len(ratio), NAMES[: len(populations)], tuple(populations), density)
    return build_system(gas, tuple(float(side) for side in ratio))


def make_sampler(system: System, seed: int, batch: int = 0) -> DirectSampler:
    """Return a sampler with streams of this seed."""

    def streams(role: str, part: int) -> np.random.Generator:
        return generator(seed, "sample", "5ca1ab1e", batch, role, part)

    return DirectSampler(system, streams)


def draw(system: System, snapshots: int, seed: int) -> Snapshots:
    """Return independent snapshots of the system."""
    return make_sampler(system, seed).draw(snapshots)


def with_wrong_orbital(system: System) -> System:
    """Return the system with the last filled orbital of every component moved farther out."""
    moved = []
    for state in system.occupations:
        numbers = state.orbitals.numbers.copy()
        numbers[-1] = 0
        numbers[-1, 0] = np.abs(state.orbitals.numbers).max() + 2
        moved.append(GroundState(replace(state.orbitals, numbers=numbers), state.population))
    return replace(system, occupations=tuple(moved))


def positions_of(snapshots: Snapshots, part: int, sides: Sequence[float]) -> NDArray:
    """Return the positions (snapshot, particle, axis) of one component, length units."""
    members = np.flatnonzero(snapshots.component[0] == part)
    return snapshots.position[:, members] * np.asarray(sides)


def pair_separations(
    first: NDArray, second: NDArray | None, sides: Sequence[float], wrap: bool = True
) -> NDArray:
    """Return the separations (snapshot, pair) of one component's pairs, or of two components'.

    Parameters
    ----------
    first, second : array (snapshot, particle, axis)
        Length units; `second` is None for pairs within `first`.
    sides
        Sides of the box.
    wrap
        False leaves out the minimum image, a bug to be seen.
    """
    if second is None:
        one, two = np.triu_indices(first.shape[1], k=1)
        displacement = first[:, one] - first[:, two]
    else:
        displacement = (first[:, :, None] - second[:, None]).reshape(len(first), -1, len(sides))
    if wrap:
        lengths = np.asarray(sides)
        displacement = displacement - lengths * np.round(displacement / lengths)
    return np.sqrt((displacement**2).sum(axis=2))


def bin_counts(separations: NDArray, edges: NDArray) -> NDArray[np.int64]:
    """Return pairs (snapshot, bin) in each bin."""
    return np.array([np.histogram(row, bins=edges)[0] for row in separations])


def shells(dimension: int, edges: NDArray) -> NDArray:
    """Return volumes between radii: 2 Δr, π Δr², (4π/3) Δr³."""
    return {1: 2.0, 2: np.pi, 3: 4 * np.pi / 3}[dimension] * np.diff(edges**dimension)
