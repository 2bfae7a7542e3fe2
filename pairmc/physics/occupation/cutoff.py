"""Which orbitals a warm gas needs: all but a tail that holds next to no particle."""

from __future__ import annotations

from collections.abc import Sequence
from math import log, pi, prod, sqrt

import numpy as np
from scipy import optimize, special

from pairmc.physics.axes.periodic import Periodic
from pairmc.physics.gas import ball_volume
from pairmc.physics.occupation.grand_canonical import solve_potential
from pairmc.physics.orbitals import (
    Orbitals,
    TwistedOrbitals,
    enumerate_any_twist,
    enumerate_below,
    enumerate_orbitals,
    filled_at_any_twist,
)
from pairmc.physics.thermal import fermi_function

# Particles of one component that the orbitals left out would hold on average.
TAIL = 1e-12


def orbital_bound(axes: Sequence[Periodic], population: int, thermal_energy: float) -> float:
    """Return about how many orbitals are looked at: the cost, before any is enumerated.

    Parameters
    ----------
    axes
        One axis per dimension.
    population
        Particles of the component.
    thermal_energy
        k_B T > 0.
    """
    cutoff = _safe_cutoff(axes, thermal_energy, _above_potential(axes, population))
    return _volume(axes) * ball_volume(len(axes), sqrt(2 * cutoff) / (2 * pi))


def warm_orbitals(axes: Sequence[Periodic], population: int, thermal_energy: float) -> Orbitals:
    """Return the lowest levels: all but those that together hold less than `TAIL` particles.

    Parameters
    ----------
    axes
        One axis per dimension.
    population
        Particles of the component.
    thermal_energy
        k_B T > 0.
    """
    cutoff = _safe_cutoff(axes, thermal_energy, _above_potential(axes, population))
    orbitals = enumerate_below(axes, cutoff)
    potential = solve_potential(orbitals.energies, population, thermal_energy)
    mean = fermi_function(orbitals.energies, potential, thermal_energy)
    beyond = np.cumsum(mean[::-1])[::-1]  # in this orbital and all after it
    count = max(population, int(np.count_nonzero(beyond >= TAIL)))
    count = int(np.searchsorted(orbitals.level, orbitals.level[count - 1], side="right"))
    return Orbitals(orbitals.numbers[:count], orbitals.energies[:count], orbitals.level[:count])


def warm_orbitals_any_twist(
    axes: Sequence[Periodic], population: int, thermal_energy: float
) -> TwistedOrbitals:
    """Return all orbitals but those that hold less than `TAIL` particles at every twist.

    Parameters
    ----------
    axes
        One axis per dimension, without a twist.
    population
        Particles of the component.
    thermal_energy
        k_B T > 0.
    """
    above = filled_at_any_twist(axes, population + 1)
    return enumerate_any_twist(axes, _safe_cutoff(axes, thermal_energy, above))


def _above_potential(axes: Sequence[Periodic], population: int) -> float:
    """Return the level after the last one that N particles fill at T = 0: μ is below it."""
    return float(enumerate_orbitals(axes, population + 1).energies[-1])


def _safe_cutoff(axes: Sequence[Periodic], thermal_energy: float, reference: float) -> float:
    """Return an energy above which there are fewer than `TAIL` particles, whatever the shell.

    As if μ were `reference`, above any true one: the tail is then at most
    V c (d/2) (k_B T)^{d/2} Γ(d/2, ε/k_B T) e^{μ/k_B T}, where c ε^{d/2} orbitals per volume are
    below ε.
    """
    d, T = len(axes), thermal_energy
    constant = ball_volume(d, sqrt(2) / (2 * pi)) * _volume(axes) * 0.5 * d * T ** (0.5 * d)

    def excess(x: float) -> float:
        # ln Γ(d/2, x) of large x, where the function itself is too small
        scaled = special.gammaincc(0.5 * d, x) * special.gamma(0.5 * d)
        tail = log(scaled) if scaled > 1e-290 else (0.5 * d - 1) * log(x) - x
        return float(log(constant) + tail + reference / T - log(0.1 * TAIL))

    start = reference / T
    return T * float(optimize.brentq(excess, start, start + 200.0 + 4 * abs(log(constant))))


def _volume(axes: Sequence[Periodic]) -> float:
    return prod(axis.length for axis in axes)
