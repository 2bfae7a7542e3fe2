"""Exact pair correlation: of this finite system, and of the infinite one.

Shares with the sampler only what the system *is* (which orbitals there are and how they are
filled): no orbital is evaluated at a point here, and no pair is counted.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.grids import SeparationGrid
from pairmc.physics.occupation.averaged import AveragedGround
from pairmc.physics.system import System, pair_labels
from pairmc.physics.theory import two_particles
from pairmc.physics.theory.pair_densities import (
    PairDensities,
    at_ground_twists,
    at_one_twist,
    detected,
    of_infinite_system,
    singlet,
    singlet_at_ground_twists,
)
from pairmc.physics.theory.twists import TwistFunction, slowest_fall


def expected(system: System, grid: SeparationGrid) -> dict[str, NDArray[np.float64]]:
    """Return the exact value of every bin for this finite system.

    Like components, averaged over directions and over the bin (physics: Giuliani & Vignale, 2005,
    ch. 1, before the thermodynamic limit):

        g(r) = N⁻² Σ_{k≠k'} ⟨n_k n_k'⟩ [1 − cos((k − k')·r)].

    Unlike components are independent and uniform: g = 1. With spins rotated before detection, see
    `pairmc.physics.theory.pair_densities`; a singlet or triplet of two particles, see
    `pairmc.physics.theory.two_particles`; where every snapshot has a twist of its own, see
    `at_twists`.

    Parameters
    ----------
    system
        The gas in its box.
    grid
        The bins; they must not reach beyond half the shortest side, where directions are cut off.

    Returns
    -------
    dict
        The variables of the observable, arrays (pair, separation).
    """
    if system.pair is not None:
        pair = two_particles.pair_correlation(system.pair, system.sides, grid.edges)
        return with_hole(pair, grid)
    return with_hole(_at_one_twist(system, grid.edges), grid)


def at_twists(
    system: System, grid: SeparationGrid, twists: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return g of every bin at each twist, for a system whose snapshots have twists of their own.

    Where populations follow the twist, g_ss' is normalised by the mean densities over all twists,
    so that a twist that fills more orbitals has a larger g, unlike pairs included:
    N_s(τ) N_s'(τ)/(⟨N_s⟩⟨N_s'⟩).

    Parameters
    ----------
    system
        The gas in its box.
    grid
        The bins.
    twists : array (snapshot, axis)
        In units of 2π.

    Returns
    -------
    array (snapshot, pair, separation)
        Their mean is the expectation of snapshots with these twists.
    """
    if all(isinstance(part, AveragedGround) for part in system.averaged):
        parts = at_ground_twists(system, grid.edges, twists, cross=system.rotation != 0)
        return np.moveaxis(_correlation(system, parts), 0, 1)
    return _warm(system, grid, twists)[:, : len(grid.pairs)]


def singlet_at_twists(
    system: System, grid: SeparationGrid, twists: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return V² times the density of ordered pairs in the spin singlet at each twist.

    Parameters
    ----------
    system, grid, twists
        See `at_twists`; two components.

    Returns
    -------
    array (snapshot, separation)
    """
    if all(isinstance(part, AveragedGround) for part in system.averaged):
        return singlet_at_ground_twists(system, grid.edges, twists)
    return _warm(system, grid, twists)[:, len(grid.pairs)]


def _warm(system: System, grid: SeparationGrid, twists: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return g of all pairs of labels, and for two components the row of the singlet."""
    values = _warm_function(system, grid.edges.tobytes())(twists)
    return values.reshape(len(twists), -1, grid.bins)


def bulk(system: System, grid: SeparationGrid) -> dict[str, NDArray[np.float64]]:
    """Return the value of every bin for the infinite system of the same densities.

    Like components: g = 1 − f(r)²; see `pairmc.physics.theory.pair_densities.of_infinite_system`.

    Parameters
    ----------
    system
        The gas in its box.
    grid
        The bins.

    Returns
    -------
    dict
        The variables of the observable, arrays (pair, separation).
    """
    return with_hole(_correlation(system, of_infinite_system(system.gas, grid.edges)), grid)


def with_hole(
    correlation: NDArray[np.float64], grid: SeparationGrid
) -> dict[str, NDArray[np.float64]]:
    """Return g and the exchange hole n_s'(g − 1)."""
    hole = (correlation - 1.0) * grid.density_second[:, None]
    return {"pair_correlation": correlation, "exchange_hole": hole}


def _at_one_twist(system: System, edges: NDArray[np.float64]) -> NDArray[np.float64]:
    return _correlation(system, at_one_twist(system, edges, cross=system.rotation != 0))


@lru_cache(maxsize=8)
def _warm_function(system: System, edges: bytes) -> TwistFunction:
    """Return the rows of `_warm` between edges (as their bytes), as a function of the twist."""
    bins, two = np.frombuffer(edges), len(system.gas.components) == 2

    def rows(twist: NDArray[np.float64]) -> NDArray[np.float64]:
        parts = at_one_twist(system.at(twist), bins, cross=two)
        below = singlet(parts)[:1] if two else np.empty((0, len(bins) - 1))
        return np.concatenate([_correlation(system, parts), below]).ravel()

    return TwistFunction(rows, system.gas.dimension, slowest_fall(system))


def _correlation(system: System, parts: PairDensities) -> NDArray[np.float64]:
    """Return g (pair, …, separation), normalised by the mean densities of detected labels."""
    means = system.detected_populations
    return np.stack(
        [detected(system, parts, i, j) / (means[i] * means[j]) for _, i, j in pair_labels(system)]
    )
