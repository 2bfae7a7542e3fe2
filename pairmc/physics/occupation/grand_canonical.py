"""A warm gas whose particle number fluctuates: every orbital is filled on its own."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from scipy import optimize

from pairmc.physics.occupation.pairs import PairTerm, stacked
from pairmc.physics.orbitals import Orbitals
from pairmc.physics.thermal import fermi_function


@dataclass(frozen=True, eq=False)
class GrandCanonical:
    """Independent occupations n̄_k = 1/(e^{(ε_k−μ)/k_B T} + 1), μ set by the mean population.

    Parameters
    ----------
    orbitals
        All that are ever filled.
    population
        Mean number of particles.
    thermal_energy
        k_B T > 0, in the energies' unit.
    potential
        μ, where it is given and the mean number follows from it; `population` is then a mean over
        twists.
    """

    orbitals: Orbitals
    population: int
    thermal_energy: float
    potential: float | None = None

    closed = False
    fixed = False

    @cached_property
    def chemical_potential(self) -> float:
        """μ, with Σ_k n̄_k = population unless it is given, in the energies' unit."""
        if self.potential is not None:
            return self.potential
        return solve_potential(self.orbitals.energies, self.population, self.thermal_energy)

    @property
    def mean_number(self) -> float:
        """Mean number of particles, Σ_k n̄_k."""
        return self.population if self.potential is None else float(self.mean().sum())

    def draw(self, rng: np.random.Generator, snapshots: int) -> NDArray[np.int64]:
        """Return the filled orbitals of independent snapshots.

        Returns
        -------
        array (snapshot, most) of int64
            Indices into `orbitals`, ascending, then −1; as wide as the fullest snapshot.
        """
        # compiled: imported where something is drawn
        from pairmc.physics.occupation.draws import draw_independent

        return np.asarray(draw_independent(rng, self.mean(), snapshots), dtype=np.int64)

    def mean(self) -> NDArray[np.float64]:
        """Return n̄_k of every orbital."""
        return fermi_function(self.orbitals.energies, self.chemical_potential, self.thermal_energy)

    def pair_terms(self) -> Iterator[PairTerm]:
        """Yield ⟨n_i n_j⟩ = n̄_i n̄_j, i ≠ j, as its one term."""
        yield PairTerm(1.0, self.mean())

    def pair_factors(self) -> tuple[NDArray[np.complex128], NDArray[np.complex128]]:
        """Return the weights and factors of `pair_terms` as arrays (term,), (term, orbital)."""
        return stacked(self.pair_terms())


def solve_potential(
    energies: NDArray[np.float64], population: float, thermal_energy: float
) -> float:
    """Return μ for which the mean occupations of given orbitals add up to `population`.

    Parameters
    ----------
    energies : array (orbital,)
        Ascending; more than `population` of them.
    population
        Positive.
    thermal_energy
        k_B T > 0.
    """

    def excess(potential: float) -> float:
        return float(fermi_function(energies, potential, thermal_energy).sum()) - population

    below = energies[0] - thermal_energy * (np.log(len(energies) / population) + 5.0)
    above = energies[-1] + 60.0 * thermal_energy
    return float(optimize.brentq(excess, below, above, xtol=1e-14 * max(above, -below)))
