"""What a listed state is beside all others: its energy, its wave vector, its degeneracy."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass
from math import comb, prod
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.axes.periodic import Periodic
from pairmc.physics.orbitals import (
    DEGENERACY_TOLERANCE,
    Orbitals,
    enumerate_below,
    enumerate_orbitals,
)
from pairmc.physics.system import System

FloatArray = NDArray[np.float64]

# The degeneracy is given up where more partial states than this would be looked at. Each step of
# the programme counts as some, since it takes time also where it finds none.
MOST_STATES = 2_000_000
_STEP = 20

# Points of the grid of quantum numbers that are enumerated at most.
_MOST_POINTS = 1_000_000

# Partial sums of energies closer than this fraction of the total are one; rounding separates equal
# ones by some 1e-15, and what is joined wrongly is still much closer than one level.
_SAME_SUM = 1e-3 * DEGENERACY_TOLERANCE


@dataclass(frozen=True, eq=False)
class StateSummary:
    """A state of filled orbitals in numbers.

    Parameters
    ----------
    energy
        Σ k²/2 over all filled orbitals of all components, in units of ħ²/(m · length²).
    wave_vector : array (axis,)
        Σ k, the twist included, per length unit.
    degeneracy
        Number of choices of orbitals, with the same population of each component, that have the
        same energy; the state itself counts. None where counting would take too long.
    ground_energy
        Lowest energy of these populations.
    """

    energy: float
    wave_vector: FloatArray
    degeneracy: int | None
    ground_energy: float

    @property
    def excitation_energy(self) -> float:
        """Energy above the ground state; 0 where they differ by rounding."""
        above = self.energy - self.ground_energy
        return above if above > DEGENERACY_TOLERANCE * self.energy else 0.0


def state_of(system: System) -> StateSummary | None:
    """Return the summary of a system in which one state is filled; None where there are several.

    Parameters
    ----------
    system
        The gas in its box.
    """
    if system.pair is not None:
        one, other = system.pair.numbers
        return describe_state(system.axes, [one[None], other[None]])
    if system.averaged or not all(part.closed for part in system.occupations):
        return None
    return describe_state(system.axes, [part.orbitals.numbers for part in system.occupations])


def describe_state(axes: Sequence[Periodic], sets: Sequence[NDArray[np.int64]]) -> StateSummary:
    """Return energy, wave vector and degeneracy of a state of all components.

    Parameters
    ----------
    axes
        One axis per dimension, with its twist.
    sets : arrays (orbital, axis)
        Quantum numbers of the filled orbitals of each component; may be empty, not all of them.
    """
    rows = np.concatenate([np.asarray(part).reshape(-1, len(axes)) for part in sets])
    energy = sum(float(axis.energies(rows[:, a]).sum()) for a, axis in enumerate(axes))
    wave_vector = [axis.wavenumbers(rows[:, a]).sum() for a, axis in enumerate(axes)]
    populations = [len(part) for part in sets]
    largest = max(populations)
    lowest = enumerate_orbitals(axes, largest).energies
    ground = sum(float(lowest[:population].sum()) for population in populations)
    # the highest orbital is filled where one particle has all energy above the ground state
    highest = (1 + DEGENERACY_TOLERANCE) * (float(lowest[largest - 1]) + max(energy - ground, 0.0))
    count = None
    if prod(len(axis.numbers_below(highest)) for axis in axes) <= _MOST_POINTS:
        count = _degeneracy(enumerate_below(axes, highest), populations, energy)
    return StateSummary(energy, np.array(wave_vector), count, ground)


def _degeneracy(orbitals: Orbitals, populations: Sequence[int], energy: float) -> int | None:
    """Return the number of choices of orbitals of one total energy; None beyond `MOST_STATES`.

    All sets of each component are counted by energy (`_Ladder.spectrum`), then those of all
    components that add up to the energy.

    Parameters
    ----------
    orbitals
        All that can be filled in a state of this energy.
    populations
        Particles of each component.
    energy
        Of all components together; closer than `DEGENERACY_TOLERANCE` is equal.
    """
    allowed = DEGENERACY_TOLERANCE * energy
    ladder = _Ladder(orbitals, joined=_SAME_SUM * energy)
    lowest = [ladder.lowest(0, population) for population in populations]
    spare = energy + allowed - sum(lowest)
    try:
        spectra = {n: ladder.spectrum(n, ladder.lowest(0, n) + spare) for n in set(populations)}
        total = _Spectrum(np.zeros(1), np.array([1], dtype=object))
        for i, population in enumerate(populations[:-1]):
            most = energy + allowed - sum(lowest[i + 1 :])
            total = ladder.added(total, spectra[population], most)
    except _TooManyError:
        return None
    return _count(total, spectra[populations[-1]], energy, allowed)


class _TooManyError(Exception):
    """More partial states than `MOST_STATES`."""


@dataclass(frozen=True, eq=False)
class _Spectrum:
    """Distinct energies (state,), ascending, and how many states have each, whole numbers."""

    energies: FloatArray
    ways: NDArray[Any]

    def shifted(self, energy: float, ways: int, count: int) -> _Spectrum:
        """Return the lowest `count` states, each with this energy more in so many ways."""
        return _Spectrum(self.energies[:count] + energy, self.ways[:count] * ways)


class _Ladder:
    """The levels of a box, and the programme that fills them from below.

    Parameters
    ----------
    orbitals
        All that may be filled.
    joined
        Partial sums of energies that differ by less are one.
    """

    def __init__(self, orbitals: Orbitals, joined: float) -> None:
        self._joined = joined
        self._sums = np.concatenate(([0.0], np.cumsum(orbitals.energies)))
        self._first = np.concatenate(([0], orbitals.closed))
        self._energies = orbitals.energies[self._first[:-1]]
        self._looked_at = 0

    def lowest(self, level: int, particles: int) -> float:
        """Return the lowest energy of some particles in this level and those above."""
        first = int(self._first[level])
        if first + particles >= len(self._sums):
            return np.inf
        return float(self._sums[first + particles] - self._sums[first])

    def spectrum(self, population: int, most: float) -> _Spectrum:
        """Return all sets of `population` orbitals up to the energy `most`, by energy.

        A partial state is how many particles are left and the energy so far, when all levels up to
        one are decided: of a level of D orbitals j are filled in D!/(j!(D − j)!) ways. It is
        followed only where the lowest energy of the particles left does not lead beyond `most`.
        """
        states = {population: _Spectrum(np.zeros(1), np.array([1], dtype=object))}
        complete: list[_Spectrum] = []
        for level, energy in enumerate(self._energies):
            complete += [states.pop(0)] if 0 in states else []
            following: dict[int, list[_Spectrum]] = defaultdict(list)
            size = int(self._first[level + 1] - self._first[level])
            for left, state in states.items():
                # fewer here are more in higher levels: the first that is too much ends it
                for filled in range(min(size, left), -1, -1):
                    here = filled * float(energy)
                    room = most - here - self.lowest(level + 1, left - filled)
                    count = int(np.searchsorted(state.energies, room, side="right"))
                    self._look(count)
                    if count == 0:
                        break
                    following[left - filled].append(state.shifted(here, comb(size, filled), count))
            states = {left: self._merged(parts) for left, parts in following.items()}
        complete += [states.pop(0)] if 0 in states else []
        return self._merged(complete)

    def added(self, one: _Spectrum, other: _Spectrum, most: float) -> _Spectrum:
        """Return all pairs of states up to an energy, by energy."""
        parts = []
        for energy, ways in zip(one.energies, one.ways, strict=True):
            count = int(np.searchsorted(other.energies, most - energy, side="right"))
            self._look(count)
            parts.append(other.shifted(float(energy), ways, count))
        return self._merged(parts)

    def _merged(self, parts: list[_Spectrum]) -> _Spectrum:
        """Return the states of all parts, those of equal energy added up."""
        if len(parts) == 1:
            return parts[0]
        energies = np.concatenate([part.energies for part in parts])
        order = np.argsort(energies, kind="stable")
        energies = energies[order]
        ways = np.concatenate([part.ways for part in parts])[order]
        first = np.concatenate(([0], np.flatnonzero(np.diff(energies) > self._joined) + 1))
        return _Spectrum(energies[first], np.add.reduceat(ways, first))

    def _look(self, states: int) -> None:
        self._looked_at += states + _STEP
        if self._looked_at > MOST_STATES:
            raise _TooManyError


def _count(one: _Spectrum, other: _Spectrum, energy: float, allowed: float) -> int:
    """Return the number of pairs of states whose energies add up to `energy`."""
    lower = np.searchsorted(other.energies, energy - allowed - one.energies, side="left")
    upper = np.searchsorted(other.energies, energy + allowed - one.energies, side="right")
    below = np.concatenate((np.array([0], dtype=object), np.cumsum(other.ways)))
    return int(np.sum(one.ways * (below[upper] - below[lower])))
