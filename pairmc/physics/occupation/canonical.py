"""A warm gas of fixed particle number: sets of orbitals weighted by Π e^{−ε/k_B T}."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.occupation.grand_canonical import solve_potential
from pairmc.physics.occupation.pairs import PairTerm, stacked
from pairmc.physics.orbitals import Orbitals
from pairmc.physics.thermal import fermi_function


@dataclass(frozen=True, eq=False)
class Canonical:
    """Fixed population N: a set K of N orbitals has the probability Π_{k∈K} x_k/Z_N, x = e^{−βε}.

    Sets are drawn by the all-positive recursion (see draws.py). Means come from the projection of
    the grand canonical gas on N particles: with its occupations n̄ at the μ that gives N on average,

        ⟨A⟩_N ∝ Σ_θ e^{−iNθ} Π_k (1 − n̄_k + n̄_k e^{iθ}) A(θ),
        n_k → f_k(θ) = n̄_k e^{iθ}/(1 − n̄_k + n̄_k e^{iθ}),

    which is exact once the angles θ are more than the numbers that occur; nothing cancels, and
    levels that are or nearly are degenerate need no care.

    Parameters
    ----------
    orbitals
        All that are ever filled.
    population
        Number of particles N.
    thermal_energy
        k_B T > 0, in the energies' unit.
    """

    orbitals: Orbitals
    population: int
    thermal_energy: float

    closed = False
    fixed = True

    @property
    def mean_number(self) -> float:
        """Number of particles."""
        return self.population

    @cached_property
    def _probability(self) -> NDArray[np.float64]:
        """The table that sets are drawn from (orbital, population + 1)."""
        from pairmc.physics.occupation.draws import fill_probabilities

        energies = self.orbitals.energies
        probability = np.zeros((len(energies), self.population + 1))
        fill_probabilities((energies[0] - energies) / self.thermal_energy, probability)
        return probability

    def draw(self, rng: np.random.Generator, snapshots: int) -> NDArray[np.int64]:
        """Return the filled orbitals of independent snapshots.

        Returns
        -------
        array (snapshot, particle) of int64
            Indices into `orbitals`, ascending.
        """
        # compiled: imported where something is drawn
        from pairmc.physics.occupation.draws import draw_fixed

        return np.asarray(draw_fixed(rng, self._probability, snapshots), dtype=np.int64)

    def mean(self) -> NDArray[np.float64]:
        """Return ⟨n_k⟩ of every orbital."""
        total = np.zeros(len(self.orbitals.energies))
        for weight, factor in self.pair_terms():
            total += (weight * factor).real
        return total

    def pair_terms(self) -> Iterator[PairTerm]:
        """Yield the terms of ⟨n_i n_j⟩, i ≠ j: one an angle between 0 and π, the others conjugate.

        The same terms with one factor give ⟨n_i⟩.
        """
        energies, firsts = self._levels
        potential = solve_potential(self.orbitals.energies, self.population, self.thermal_energy)
        filled = fermi_function(energies, potential, self.thermal_energy)
        empty = fermi_function(-energies, -potential, self.thermal_energy)
        degeneracies = np.diff(np.append(firsts, len(self.orbitals.level)))
        spread = np.sqrt(np.sum(degeneracies * filled * empty))
        # numbers farther than 8σ + 24 from N occur with a chance below e^−35 (Bernstein)
        half = int(4.0 * spread) + 12
        phases = np.exp(1j * np.pi * (np.arange(half) + 0.5) / half)
        sums = empty + filled * phases[:, None]
        logarithm = np.log(sums) @ degeneracies - self.population * np.log(phases)
        weights = np.exp(logarithm - logarithm.real.max())
        weights /= weights.sum().real
        for weight, phase, row in zip(weights, phases, sums, strict=True):
            yield PairTerm(complex(weight), (filled * phase / row)[self.orbitals.level])

    def pair_factors(self) -> tuple[NDArray[np.complex128], NDArray[np.complex128]]:
        """Return the weights and factors of `pair_terms` as arrays (term,), (term, orbital)."""
        return stacked(self.pair_terms())

    @cached_property
    def _levels(self) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
        """The energy of each level, and its first orbital."""
        firsts = np.concatenate(([0], np.flatnonzero(np.diff(self.orbitals.level)) + 1))
        return self.orbitals.energies[firsts], firsts
