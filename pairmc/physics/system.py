"""A gas in its box: the one value that samplers, observables and theory receive."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, TypeAlias, Union

from pairmc.physics.axes.periodic import Periodic
from pairmc.physics.gas import Gas
from pairmc.physics.occupation.ground import GroundState
from pairmc.physics.orbitals import enumerate_orbitals

if TYPE_CHECKING:
    from pairmc.physics.occupation.canonical import Canonical
    from pairmc.physics.occupation.grand_canonical import GrandCanonical

Occupation: TypeAlias = Union[GroundState, "Canonical", "GrandCanonical"]


@dataclass(frozen=True, eq=False)
class System:
    """A gas, its box, and which orbitals each component fills.

    Parameters
    ----------
    gas
        What the gas is.
    axes
        One axis per dimension.
    occupations
        One occupation per component. Orbitals are enumerated in one order for all components, so an
        orbital's index means the same in each.
    """

    gas: Gas
    axes: tuple[Periodic, ...]
    occupations: tuple[Occupation, ...]

    @property
    def sides(self) -> tuple[float, ...]:
        """Sides of the box, length units."""
        return tuple(axis.length for axis in self.axes)


def build_system(gas: Gas, sides_ratio: tuple[float, ...]) -> System:
    """Put a gas into a periodic box whose sides have the given ratio.

    Parameters
    ----------
    gas
        What the gas is.
    sides_ratio
        One positive number per dimension.
    """
    axes = tuple(Periodic(side) for side in gas.box(sides_ratio))
    return System(
        gas, axes, tuple(_occupation(gas, axes, population) for population in gas.populations)
    )


def _occupation(gas: Gas, axes: tuple[Periodic, ...], population: int) -> Occupation:
    """Return how one component fills its orbitals."""
    T = gas.thermal_energy
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


def pair_labels(components: tuple[str, ...]) -> tuple[tuple[str, int, int], ...]:
    """Return the unordered pairs of components: label "a-b" and the two indices, first with each.

    For components up, down: up-up, up-down, down-down.
    """
    return tuple(
        (f"{components[i]}-{components[j]}", i, j)
        for i in range(len(components))
        for j in range(i, len(components))
    )
