"""A gas in its box: the one value that samplers, observables and theory receive."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Literal, TypeAlias, Union

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.axes.periodic import Periodic
from pairmc.physics.gas import Gas
from pairmc.physics.occupation.ground import GroundState
from pairmc.physics.orbitals import (
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

# How one component fills its orbitals: at one twist, or at a twist that each snapshot draws.
Occupation: TypeAlias = Union[GroundState, "Canonical", "GrandCanonical"]
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
        One occupation per component. At one twist orbitals are enumerated in one order for all
        components, so an orbital's index means the same in each. Empty where every snapshot has a
        twist of its own.
    averaged
        The same where every snapshot has a twist of its own, common to all components; else empty.
    rotation
        Angle in radians by which all spins of two components are turned before they are detected.
    """

    gas: Gas
    axes: tuple[Periodic, ...]
    occupations: tuple[Occupation, ...]
    averaged: tuple[Averaged, ...] = ()
    rotation: float = 0.0

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
    axes = tuple(Periodic(side) for side in gas.box(sides_ratio))
    components = range(len(gas.components))
    if twist == "averaged":
        averaged = tuple(_averaged(gas, axes, part) for part in components)
        return System(gas, axes, (), averaged, rotation)
    if twist is not None:
        axes = tuple(replace(axis, twist=part) for axis, part in zip(axes, twist, strict=True))
    occupations = tuple(_occupation(gas, axes, part) for part in components)
    return System(gas, axes, occupations, rotation=rotation)


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


def pair_labels(components: tuple[str, ...]) -> tuple[tuple[str, int, int], ...]:
    """Return the unordered pairs of components: label "a-b" and the two indices, first with each.

    For components up, down: up-up, up-down, down-down.
    """
    return tuple(
        (f"{components[i]}-{components[j]}", i, j)
        for i in range(len(components))
        for j in range(i, len(components))
    )
