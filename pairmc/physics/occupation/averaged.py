"""Which orbitals are filled where every snapshot has a twist of its own.

At fixed populations each twist fills the orbitals that are lowest there (Lin, Zong & Ceperley, PRE
64, 016702, 2001). Where numbers fluctuate, the chemical potential is that of the infinite gas at
every twist and the populations follow the twist; averaged over all twists they are the infinite
gas's, since the shifted wave vectors then cover all of space evenly.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.occupation.canonical import Canonical
from pairmc.physics.occupation.cutoff import warm_orbitals
from pairmc.physics.occupation.grand_canonical import GrandCanonical
from pairmc.physics.occupation.ground import GroundState
from pairmc.physics.orbitals import Orbitals, TwistedOrbitals

# Energies of orbitals handled at a time.
_CHUNK = 2_000_000


@dataclass(frozen=True, eq=False)
class AveragedGround:
    """Zero temperature: at each twist the lowest orbitals, or all below the Fermi energy.

    Parameters
    ----------
    orbitals
        All that some twist fills.
    population
        Particles, or their mean over twists.
    fermi_energy
        None: the population is fixed. Otherwise all orbitals up to here are filled, in
        ħ²/(m · length²).
    """

    orbitals: TwistedOrbitals
    population: int
    fermi_energy: float | None = None

    closed = False

    @property
    def fixed(self) -> bool:
        """True where the population is the same at every twist."""
        return self.fermi_energy is None

    def filled(self, twists: NDArray[np.float64]) -> NDArray[np.int64]:
        """Return the filled orbitals at each twist.

        Parameters
        ----------
        twists : array (snapshot, axis)
            In units of 2π.

        Returns
        -------
        array (snapshot, most) of int64
            Indices into `orbitals`, ascending, then −1.
        """
        return _padded(
            [self._filled(twists[part]) for part in _chunks(len(twists), len(self.orbitals))]
        )

    def _filled(self, twists: NDArray[np.float64]) -> NDArray[np.int64]:
        energies = self.orbitals.energies(twists)
        if self.population == 0:
            return np.empty((len(twists), 0), dtype=np.int64)
        if self.fermi_energy is None:
            last = self.population - 1
            lowest = np.argpartition(energies, last, axis=1)[:, : self.population]
            return np.sort(lowest, axis=1)
        below = energies <= self.fermi_energy
        count = below.sum(axis=1)
        order = np.argsort(~below, axis=1, kind="stable")[:, : int(count.max(initial=0))]
        return np.where(np.arange(order.shape[1]) < count[:, None], order, -1)

    def draw_at(self, rng: np.random.Generator, twists: NDArray[np.float64]) -> NDArray[np.int64]:
        """Return the filled orbitals of a snapshot at each twist: `filled`; nothing is random."""
        return self.filled(twists)

    def at(self, twist: NDArray[np.float64]) -> GroundState:
        """Return the occupation at one twist (axis,)."""
        chosen = self.filled(twist[None])[0]
        chosen = chosen[chosen >= 0]
        energies = self.orbitals.energies(twist[None])[0][chosen]
        order = np.argsort(energies, kind="stable")
        levels = np.arange(len(chosen), dtype=np.int64)
        numbers = self.orbitals.numbers[chosen][order]
        return GroundState(Orbitals(numbers, energies[order], levels), len(chosen))


@dataclass(frozen=True, eq=False)
class AveragedWarm:
    """A temperature: at each twist the canonical law, or independent occupations at one μ.

    A canonical set is a grand canonical one whose number happens to be N, whatever its μ; the μ
    that gives N on average makes this happen in one try of about (2π Var N)^{1/2}.

    Parameters
    ----------
    orbitals
        All that some twist fills.
    population
        Particles, or their mean over twists.
    thermal_energy
        k_B T > 0, in ħ²/(m · length²).
    potential
        None: the population is fixed. Otherwise μ at every twist.
    """

    orbitals: TwistedOrbitals
    population: int
    thermal_energy: float
    potential: float | None = None

    closed = False

    @property
    def fixed(self) -> bool:
        """True where the population is the same at every twist."""
        return self.potential is None

    def draw_at(self, rng: np.random.Generator, twists: NDArray[np.float64]) -> NDArray[np.int64]:
        """Return the filled orbitals of one snapshot at each twist.

        Parameters
        ----------
        rng
            Used snapshot after snapshot.
        twists : array (snapshot, axis)
            In units of 2π.

        Returns
        -------
        array (snapshot, most) of int64
            Indices into `orbitals`, ascending, then −1.
        """
        # compiled: imported where something is drawn
        from pairmc.physics.occupation.draws import draw_of_number, draw_of_potential

        rows = []
        for part in _chunks(len(twists), len(self.orbitals)):
            scaled = self.orbitals.energies(twists[part]) / self.thermal_energy
            if self.potential is None:
                rows.append(draw_of_number(rng, scaled, self.population))
            else:
                rows.append(draw_of_potential(rng, scaled, self.potential / self.thermal_energy))
        return _padded(rows)

    def at(self, twist: NDArray[np.float64]) -> Canonical | GrandCanonical:
        """Return the occupation at one twist (axis,)."""
        T = self.thermal_energy
        axes = [
            replace(axis, twist=float(part))
            for axis, part in zip(self.orbitals.axes, twist, strict=True)
        ]
        orbitals = warm_orbitals(axes, self.population, T)
        if self.potential is None:
            return Canonical(orbitals, self.population, T)
        return GrandCanonical(orbitals, self.population, T, self.potential)


def _chunks(snapshots: int, orbitals: int) -> list[slice]:
    """Return slices of the snapshots whose orbitals fit into memory together."""
    size = max(1, _CHUNK // max(1, orbitals))
    return [slice(start, start + size) for start in range(0, snapshots, size)]


def _padded(rows: list[NDArray[np.int64]]) -> NDArray[np.int64]:
    """Return arrays (snapshot, …) one below the other, as wide as the widest, −1 being padding."""
    width = max((row.shape[1] for row in rows), default=0)
    wide = [np.pad(row, ((0, 0), (0, width - row.shape[1])), constant_values=-1) for row in rows]
    return np.concatenate(wide) if wide else np.empty((0, 0), dtype=np.int64)
