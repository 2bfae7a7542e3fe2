"""Exact kinetic energy: of this finite system, and of the infinite one.

In units of ħ²/(m · length²), as all energies of `pairmc.physics`.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.gas import Gas, fermi_wavenumber
from pairmc.physics.occupation.averaged import AveragedGround
from pairmc.physics.system import System
from pairmc.physics.theory.twists import TwistFunction, slowest_fall
from pairmc.physics.thermal import energy_per_particle


def expected(system: System) -> NDArray[np.float64]:
    """Return Σ_k ⟨n_k⟩ k²/2 of each component at the system's twist.

    Parameters
    ----------
    system
        The gas in its box.

    Returns
    -------
    array (component,)
        Of all particles of the component together.
    """
    return np.array(
        [occupation.mean() @ occupation.orbitals.energies for occupation in system.occupations]
    )


def at_twists(system: System, twists: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the same at each twist, for a system whose snapshots have twists of their own.

    Parameters
    ----------
    system
        The gas in its box.
    twists : array (snapshot, axis)
        In units of 2π.

    Returns
    -------
    array (snapshot, component)
    """
    if not all(isinstance(part, AveragedGround) for part in system.averaged):
        return _warm_function(system)(twists)
    totals = np.empty((len(twists), len(system.averaged)))
    for part, occupation in enumerate(system.averaged):
        if isinstance(occupation, AveragedGround):
            totals[:, part] = _ground_at_twists(occupation, twists)
    return totals


def bulk_per_particle(gas: Gas) -> NDArray[np.float64]:
    """Return the energy per particle of each component in the infinite system.

    NaN for a component without particles.

    Zero temperature: d/(d + 2) k_F²/2 (Giuliani & Vignale, 2005, ch. 1).
    """
    d, T = gas.dimension, gas.thermal_energy

    def of_density(density: float) -> float:
        if density == 0:
            return np.nan
        if T > 0:
            return energy_per_particle(d, density, T)
        return d / (d + 2) * 0.5 * fermi_wavenumber(d, density) ** 2

    return np.array([of_density(density) for density in gas.densities])


@lru_cache(maxsize=8)
def _warm_function(system: System) -> TwistFunction:
    return TwistFunction(
        lambda twist: expected(system.at(twist)), system.gas.dimension, slowest_fall(system)
    )


def _ground_at_twists(
    occupation: AveragedGround, twists: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return the energy of the filled orbitals at each twist (snapshot,)."""
    totals = np.empty(len(twists))
    for start in range(0, len(twists), 1000):
        part = slice(start, start + 1000)
        filled = occupation.filled(twists[part])
        energies = occupation.orbitals.energies(twists[part])
        here = np.take_along_axis(energies, np.maximum(filled, 0), axis=1)
        totals[part] = np.where(filled >= 0, here, 0.0).sum(axis=1)
    return totals
