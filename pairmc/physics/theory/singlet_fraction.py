"""Exact fraction of pairs in the spin singlet, against separation, for two components.

With γ_s(r) = Σ_k n_k e^{ik·r}/V the fraction is ⟨n_1 n_2 + Re γ_1 γ_2*⟩/⟨Σ_ss' ρ⁽²⁾_ss'⟩, numerator
and denominator averaged separately over occupied sets, directions, the bin and twists: the
projection of the two-body matrix of a gas of two determinants on the singlet. A common rotation of
all spins changes nothing. 1 at contact; 1/4 far apart without polarisation.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.grids import SeparationGrid, shell_volumes
from pairmc.physics.occupation.averaged import AveragedGround
from pairmc.physics.system import System
from pairmc.physics.theory import pair_correlation
from pairmc.physics.theory.pair_densities import at_one_twist, of_infinite_system, singlet


def expected(system: System, grid: SeparationGrid) -> NDArray[np.float64]:
    """Return the exact fraction (separation,) for this finite system at its twist.

    Parameters
    ----------
    system
        The gas in its box; two components.
    grid
        The bins.
    """
    if system.pair is not None:
        return np.full(grid.bins, float(system.pair.kind == "singlet"))
    within, every = singlet(at_one_twist(system, grid.edges, cross=True))
    return np.asarray(within / every)


def bulk(system: System, grid: SeparationGrid) -> NDArray[np.float64]:
    """Return the fraction (separation,) in the infinite system of the same densities."""
    within, every = singlet(of_infinite_system(system.gas, grid.edges))
    return np.asarray(within / every)


def pairs_at_twists(
    system: System, grid: SeparationGrid, twists: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return the expected number of singlet pairs, for snapshots with twists of their own.

    Parameters
    ----------
    system, grid
        See `expected`.
    twists : array (snapshot, axis)
        In units of 2π.

    Returns
    -------
    array (snapshot, separation)
        Unordered pairs; the fraction is the ratio of their sum to that of all pairs.
    """
    share = shell_volumes(system.gas.dimension, grid.edges) / system.gas.volume
    return 0.5 * share * pair_correlation.singlet_at_twists(system, grid, twists)


def not_invariant(system: System) -> str:
    """Return why the state is not the same after a rotation of all spins; empty where it is.

    Only an invariant state has ⟨s_x s_x'⟩ = ⟨s_y s_y'⟩ = ⟨s_z s_z'⟩, from which detected labels
    alone give the singlet fraction.

    Parameters
    ----------
    system
        The gas in its box.
    """
    populations = system.gas.populations
    if system.pair is not None:
        return "" if system.pair.kind == "singlet" else "a triplet has a direction"
    if len(populations) != 2:
        return "the gas has not two components"
    if populations[0] != populations[1]:
        return "the populations differ"
    sets = [{tuple(row) for row in part.orbitals.numbers.tolist()} for part in system.occupations]
    if all(part.closed for part in system.occupations) and sets and sets[0] != sets[1]:
        return "the two components fill different orbitals"
    grand = system.gas.ensemble == "grand-canonical"
    closed = all(isinstance(part, AveragedGround) for part in system.averaged) and all(
        part.closed for part in system.occupations
    )
    if grand or closed:
        return ""
    return "populations are fixed and more than one set of orbitals occurs"
