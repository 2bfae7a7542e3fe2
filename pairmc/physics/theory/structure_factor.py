"""Exact structure factor of one component: of this finite system, and of the infinite one.

S(q) = ⟨|ρ(q)|²⟩/⟨N⟩ at q ≠ 0; for fermions 1 − Σ_k ⟨n_k n_{k+q}⟩/⟨N⟩.
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.gas import Gas, ball_volume
from pairmc.physics.occupation.averaged import AveragedGround
from pairmc.physics.system import System
from pairmc.physics.theory.overlaps import overlaps, overlaps_at_twists
from pairmc.physics.thermal import (
    bell,
    bell_density,
    bell_ends,
    chemical_potential,
    panel_nodes,
)


def expected(system: System, component: int, steps: tuple[int, ...]) -> float:
    """Return S(q) at one wave vector of the box.

    Parameters
    ----------
    system
        The gas in its box, at one twist.
    component
        Which component.
    steps
        q as whole steps 2π/L along each axis, not all 0.
    """
    occupation = system.occupations[component]
    weight = overlaps(occupation).at(steps)[0]
    return float((occupation.mean_number - weight) / system.gas.populations[component])


def at_twists(
    system: System, component: int, steps: tuple[int, ...], twists: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return S(q) at each twist, for a system whose snapshots have twists of their own.

    At zero temperature S(q) = ⟨|ρ(q)|²⟩/⟨N⟩ with the mean number over all twists.

    Parameters
    ----------
    system, component, steps
        See `expected`.
    twists : array (snapshot, axis)
        In units of 2π.

    Returns
    -------
    array (snapshot,)
    """
    occupation = system.averaged[component]
    if not isinstance(occupation, AveragedGround):
        return np.array([expected(system.at(twist), component, steps) for twist in twists])
    population = system.gas.populations[component]
    values = np.empty(len(twists))
    for part, weights in overlaps_at_twists(occupation, twists):
        values[part] = (weights.at_zero - weights.at(steps)) / population
    return values


def bulk(gas: Gas, component: int, wavenumber: float) -> float:
    """Return S(q) of the infinite system: 1 − n⁻¹ ∫ dᵈk/(2π)ᵈ n_k n_{k+q}.

    Zero temperature: the overlap of two Fermi balls (Giuliani & Vignale, 2005, ch. 1). Warm: of
    balls of all Fermi energies, with the weight −∂n_F/∂ε of each.

    Parameters
    ----------
    gas, component
        The gas, and which component.
    wavenumber
        q > 0, per length unit.
    """
    d, density, T = gas.dimension, gas.densities[component], gas.thermal_energy
    if T == 0:
        k = np.array(gas.fermi_wavenumbers[component])
        common = _common_volume(d, k, k, wavenumber)
    else:
        common = _mean_common_volume(d, chemical_potential(d, density, T), T, wavenumber)
    return float(1.0 - common / ((2 * np.pi) ** d * density))


def _mean_common_volume(
    dimension: int, potential: float, thermal_energy: float, distance: float
) -> NDArray[np.float64]:
    """Return the shared volume of two balls, mean over the bells of their Fermi energies.

    The volume as a function of one radius has kinks where a ball begins to touch, or to lie in, the
    other; the inner integral is taken between them.
    """
    lowest, highest = bell_ends(potential, thermal_energy)
    one, outer = bell(potential, thermal_energy, 0.0)
    kinks = np.clip(np.stack([np.abs(one - distance), one + distance]), lowest, highest)
    ends = [np.full_like(one, lowest), *np.sort(kinks, axis=0), np.full_like(one, highest)]
    total = np.zeros_like(one)
    for start, stop in pairwise(ends):
        other, inner = panel_nodes(start, stop)
        inner = inner * bell_density(other, potential, thermal_energy)
        total += (inner * _common_volume(dimension, one[:, None], other, distance)).sum(axis=1)
    return np.asarray(outer @ total)


def _common_volume(
    dimension: int, one: NDArray[np.float64], other: NDArray[np.float64], distance: float
) -> NDArray[np.float64]:
    """Return the volume that two balls of these radii share, their centres at a distance."""
    small, large = np.minimum(one, other), np.maximum(one, other)
    inside = ball_volume(dimension, 1.0) * small**dimension
    apart = distance >= small + large
    within = distance <= large - small
    q = distance
    if dimension == 1:
        lens = small + large - q
    elif dimension == 2:
        x = np.clip((q * q + small**2 - large**2) / (2 * q * small), -1.0, 1.0)
        y = np.clip((q * q + large**2 - small**2) / (2 * q * large), -1.0, 1.0)
        kite = np.sqrt(
            np.maximum(0.0, (small + large - q) * (q + small - large) * (q - small + large))
            * (q + small + large)
        )
        lens = small**2 * np.arccos(x) + large**2 * np.arccos(y) - 0.5 * kite
    else:
        lens = np.pi / (12 * q) * (small + large - q) ** 2
        lens = lens * (q * q + 2 * q * (small + large) - 3 * (large - small) ** 2)
    return np.asarray(np.where(apart, 0.0, np.where(within, inside, lens)))
