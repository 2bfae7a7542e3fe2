"""A gas in its box: the one value that samplers, observables and theory receive."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Literal, TypeAlias, Union

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.axes.periodic import Periodic
from pairmc.physics.gas import Gas
from pairmc.physics.occupation.ground import GroundState
from pairmc.physics.orbitals import (
    Orbitals,
    TwistedOrbitals,
    enumerate_any_twist,
    enumerate_orbitals,
    filled_at_any_twist,
    nothing_filled,
)
from pairmc.physics.spin import detected

if TYPE_CHECKING:
    from pairmc.physics.occupation.averaged import AveragedGround, AveragedWarm
    from pairmc.physics.occupation.canonical import Canonical
    from pairmc.physics.occupation.grand_canonical import GrandCanonical
    from pairmc.physics.occupation.listed import Listed
    from pairmc.physics.two_particles import TwoParticleState

# How one component fills its orbitals: at one twist, or at a twist that each snapshot draws.
Occupation: TypeAlias = Union[GroundState, "Listed", "Canonical", "GrandCanonical"]
Averaged: TypeAlias = Union["AveragedGround", "AveragedWarm"]

# A vector in units of 2π, or one drawn for each snapshot.
Twist: TypeAlias = tuple[float, ...] | Literal["averaged"]


@dataclass(frozen=True, eq=False)
class System:
    """A gas, its box, and which orbitals each component fills.

    Parameters
    ----------
    gas
        What the gas is.
    axes
        One axis per dimension, with its twist where that is the same in all snapshots.
    occupations
        One occupation per component. Empty where every snapshot has a twist of its own.
    averaged
        The same where every snapshot has a twist of its own, common to all components; else empty.
    rotation
        Angle in radians by which all spins of two components are turned before they are detected.
    pair
        A singlet or triplet of two particles, which is no determinant; `occupations` are then its
        means only.
    """

    gas: Gas
    axes: tuple[Periodic, ...]
    occupations: tuple[Occupation, ...]
    averaged: tuple[Averaged, ...] = ()
    rotation: float = 0.0
    pair: TwoParticleState | None = None

    @property
    def sides(self) -> tuple[float, ...]:
        """Sides of the box, length units."""
        return tuple(axis.length for axis in self.axes)

    @property
    def components(self) -> tuple[Occupation, ...] | tuple[Averaged, ...]:
        """How each component is occupied, whatever the twist."""
        return self.averaged or self.occupations

    @property
    def detected_populations(self) -> tuple[float, ...]:
        """Mean numbers of particles detected as each component."""
        return detected(self.rotation, self.gas.populations)

    @property
    def detected_densities(self) -> tuple[float, ...]:
        """Mean densities of particles detected as each component, per length unit**dimension."""
        return tuple(number / self.gas.volume for number in self.detected_populations)

    def at(self, twist: NDArray[np.float64]) -> System:
        """Return the system that a snapshot with this twist is drawn from.

        Parameters
        ----------
        twist : array (axis,)
            In units of 2π. Only for a system whose snapshots have twists of their own.
        """
        axes = tuple(
            replace(axis, twist=float(part)) for axis, part in zip(self.axes, twist, strict=True)
        )
        return System(
            self.gas, axes, tuple(part.at(twist) for part in self.averaged), rotation=self.rotation
        )


def build_system(
    gas: Gas,
    sides_ratio: tuple[float, ...],
    twist: Twist | None = None,
    rotation: float = 0.0,
) -> System:
    """Put a gas into a periodic box whose sides have the given ratio.

    Parameters
    ----------
    gas
        What the gas is.
    sides_ratio
        One positive number per dimension.
    twist
        One number per dimension, in units of 2π, or ``"averaged"``; None is no twist.
    rotation
        Angle in radians by which all spins are turned before they are detected; two components.
    """
    axes = build_axes(gas, sides_ratio, twist)
    components = range(len(gas.components))
    if twist == "averaged":
        averaged = tuple(_averaged(gas, axes, part) for part in components)
        return System(gas, axes, (), averaged, rotation)
    occupations = tuple(_occupation(gas, axes, part) for part in components)
    return System(gas, axes, occupations, rotation=rotation)


def build_axes(
    gas: Gas, sides_ratio: tuple[float, ...], twist: Twist | None = None
) -> tuple[Periodic, ...]:
    """Return the axes of the box; without a twist where that is no vector.

    Parameters
    ----------
    gas, sides_ratio, twist
        See `build_system`.
    """
    axes = tuple(Periodic(side) for side in gas.box(sides_ratio))
    if twist is None or twist == "averaged":
        return axes
    return tuple(replace(axis, twist=float(part)) for axis, part in zip(axes, twist, strict=True))


def build_listed(
    gas: Gas,
    axes: tuple[Periodic, ...],
    filled: Sequence[Sequence[Sequence[int]] | None],
    rotation: float = 0.0,
) -> System:
    """Return a gas of which the filled orbitals are named.

    Parameters
    ----------
    gas
        What the gas is, at zero temperature.
    axes
        See `build_axes`.
    filled
        Of each component the quantum numbers (orbital, axis) of its filled orbitals; None where it
        is in its ground state.
    rotation
        See `build_system`.
    """
    from pairmc.physics.occupation.listed import listed_state

    occupations = tuple(
        _occupation(gas, axes, part) if numbers is None else listed_state(axes, numbers)
        for part, numbers in enumerate(filled)
    )
    return System(gas, axes, occupations, rotation=rotation)


def build_pair(
    gas: Gas,
    axes: tuple[Periodic, ...],
    kind: Literal["singlet", "triplet"],
    numbers: Sequence[Sequence[int]],
    rotation: float = 0.0,
) -> System:
    """Return a singlet or triplet of two particles, one of each component.

    Parameters
    ----------
    gas
        One particle of each of two components, at zero temperature.
    axes
        See `build_axes`.
    kind
        ``"singlet"`` or ``"triplet"``.
    numbers : (2, axis)
        Quantum numbers of the two orbitals.
    rotation
        See `build_system`.
    """
    from pairmc.physics.two_particles import TwoParticleState

    rows = np.array(numbers, dtype=np.int64).reshape(2, len(axes))
    distinct = np.unique(rows, axis=0)
    energies = np.sum([axis.energies(distinct[:, a]) for a, axis in enumerate(axes)], axis=0)
    # each particle is in either orbital as often: one of a level of both
    level = Orbitals(distinct, energies, np.zeros(len(distinct), dtype=np.int64))
    occupations = (GroundState(level, 1), GroundState(level, 1))
    state = TwoParticleState(kind, rows, rotation)
    return System(gas, axes, occupations, rotation=rotation, pair=state)


def _occupation(gas: Gas, axes: tuple[Periodic, ...], component: int) -> Occupation:
    """Return how one component fills its orbitals."""
    T, population = gas.thermal_energy, gas.populations[component]
    if population == 0:
        return GroundState(nothing_filled(gas.dimension), 0)
    if T == 0:
        # numbers that fluctuate do not, at T = 0 in a closed shell; others are refused before
        return GroundState(enumerate_orbitals(axes, population), population)
    # scipy is imported only for a warm gas
    from pairmc.physics.occupation.canonical import Canonical
    from pairmc.physics.occupation.cutoff import warm_orbitals
    from pairmc.physics.occupation.grand_canonical import GrandCanonical

    orbitals = warm_orbitals(axes, population, T)
    if gas.ensemble == "grand-canonical":
        return GrandCanonical(orbitals, population, T)
    return Canonical(orbitals, population, T)


def _averaged(gas: Gas, axes: tuple[Periodic, ...], component: int) -> Averaged:
    """Return how one component fills its orbitals at the twist of each snapshot."""
    from pairmc.physics.occupation.averaged import AveragedGround, AveragedWarm
    from pairmc.physics.occupation.cutoff import warm_orbitals_any_twist
    from pairmc.physics.thermal import chemical_potential

    T, population = gas.thermal_energy, gas.populations[component]
    if population == 0:
        return AveragedGround(TwistedOrbitals(nothing_filled(gas.dimension).numbers, axes), 0)
    fluctuating = gas.ensemble == "grand-canonical"
    if T == 0:
        fermi_energy = 0.5 * gas.fermi_wavenumbers[component] ** 2
        highest = fermi_energy if fluctuating else filled_at_any_twist(axes, population)
        orbitals = enumerate_any_twist(axes, highest)
        return AveragedGround(orbitals, population, fermi_energy if fluctuating else None)
    orbitals = warm_orbitals_any_twist(axes, population, T)
    potential = chemical_potential(gas.dimension, gas.densities[component], T)
    return AveragedWarm(orbitals, population, T, potential if fluctuating else None)


def pair_labels(system: System) -> tuple[tuple[str, int, int], ...]:
    """Return the unordered pairs of components: label "a-b" and the two indices, first with each.

    For components up, down: up-up, up-down, down-down. A component that no particle is detected as
    has no pairs.
    """
    names, means = system.gas.components, system.detected_populations
    seen = [part for part in range(len(names)) if means[part] > 0]
    return tuple((f"{names[i]}-{names[j]}", i, j) for i in seen for j in seen if j >= i)
