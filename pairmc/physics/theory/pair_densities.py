"""Exact pair densities of a gas of plane waves: of prepared components, and as they are detected.

With γ_s(r) = Σ_k n_k e^{ik·r}/V of component s, everything follows from three averages over the
occupied sets, directions and the bin; times V² they are

    like   Σ_{k≠k'} ⟨n_k n_k'⟩ [1 − cos((k − k')·r)]    of a component with itself,
    number ⟨N_s⟩,
    cross  Σ_{k,k'} ⟨n_k⟩⟨n'_k'⟩ cos((k − k')·r)        V² Re γ_1 γ_2* of two components.

A common rotation of spins by θ turns the one-body matrix diag(γ_1, γ_2), and Wick's theorem gives
ρ⁽²⁾_ab = n_a n_b − |Γ_ab|² of one occupied set (`detected`).
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy import special

from pairmc.physics.gas import Gas
from pairmc.physics.grids import shell_volumes
from pairmc.physics.occupation.averaged import AveragedGround
from pairmc.physics.spin import shares
from pairmc.physics.system import System
from pairmc.physics.theory.differences import Overlaps
from pairmc.physics.theory.overlaps import (
    cross_overlaps,
    cross_overlaps_at_twists,
    overlaps,
    overlaps_at_twists,
)
from pairmc.physics.thermal import amplitude, ground_amplitude

FloatArray = NDArray[np.float64]

# Wave numbers handled at a time.
_CHUNK = 1000


class PairDensities(NamedTuple):
    """Averages that the pair densities of detected labels are made of, times V².

    Parameters
    ----------
    like : list of arrays (…, separation)
        Of each component with itself.
    number : list of arrays (…)
        Mean number of each component.
    cross : array (…, separation)
        Of the first two components with one another; zero where it was not asked for.
    """

    like: list[FloatArray]
    number: list[FloatArray]
    cross: FloatArray


def at_one_twist(system: System, edges: FloatArray, cross: bool) -> PairDensities:
    """Return the averages of a system at its twist.

    Parameters
    ----------
    system
        The gas in its box.
    edges : array (separation + 1,)
        Edges of the bins, length units.
    cross
        Whether the two components are wanted with one another.

    Returns
    -------
    PairDensities
        Arrays (separation,) and scalars.
    """
    like, number = [], []
    for occupation in system.occupations:
        like.append(_differing(system, overlaps(occupation), edges)[0])
        number.append(np.array(occupation.mean_number, dtype=np.float64))
    between = np.zeros(len(edges) - 1)
    if cross:
        weights = cross_overlaps(*system.occupations[:2])
        between = (weights.total[:, None] - _differing(system, weights, edges))[0]
    return PairDensities(like, number, between)


def at_ground_twists(
    system: System, edges: FloatArray, twists: FloatArray, cross: bool
) -> PairDensities:
    """Return the averages at each twist, at zero temperature.

    Parameters
    ----------
    system
        The gas in its box; every snapshot has a twist of its own.
    edges, cross
        See `at_one_twist`.
    twists : array (snapshot, axis)
        In units of 2π.

    Returns
    -------
    PairDensities
        Arrays (snapshot, separation) and (snapshot,).
    """
    states = [part for part in system.averaged if isinstance(part, AveragedGround)]
    like, number = [], []
    for state in states:
        pairs, count = np.empty((len(twists), len(edges) - 1)), np.empty(len(twists))
        for part, weights in overlaps_at_twists(state, twists):
            count[part] = weights.at_zero
            pairs[part] = _differing(system, weights, edges)
        like.append(pairs)
        number.append(count)
    between = np.zeros((len(twists), len(edges) - 1))
    if cross:
        for part, weights in cross_overlaps_at_twists(states[0], states[1], twists):
            between[part] = weights.total[:, None] - _differing(system, weights, edges)
    return PairDensities(like, number, between)


def singlet_at_ground_twists(system: System, edges: FloatArray, twists: FloatArray) -> FloatArray:
    """Return the first of `singlet` at each twist, at zero temperature; the rest is not needed.

    Parameters
    ----------
    system, edges, twists
        See `at_ground_twists`; two components.

    Returns
    -------
    array (snapshot, separation)
    """
    one, other = (part for part in system.averaged if isinstance(part, AveragedGround))
    found = np.empty((len(twists), len(edges) - 1))
    for part, weights in cross_overlaps_at_twists(one, other, twists):
        # all differences together are the product of the numbers
        found[part] = 2.0 * weights.total[:, None] - _differing(system, weights, edges)
    return found


def of_infinite_system(gas: Gas, edges: FloatArray) -> PairDensities:
    """Return the averages of the infinite system, as in a box of the gas's volume.

    γ_s = n_s f_s(r): at zero temperature f is the transform of the filled Fermi ball, 1D sin z/z ·
    2D 2J₁(z)/z · 3D 3(sin z − z cos z)/z³, z = k_F r (Giuliani & Vignale, 2005, ch. 1), warm as in
    `pairmc.physics.thermal`; averaged over each bin by Gauss–Legendre quadrature.

    Parameters
    ----------
    gas
        The gas.
    edges : array (separation + 1,)
        Edges of the bins, length units.
    """
    d = gas.dimension
    largest = np.sqrt(max(gas.fermi_wavenumbers) ** 2 + 20 * gas.thermal_energy)
    nodes, weights = np.polynomial.legendre.leggauss(
        16 + int(2 * largest * float(np.diff(edges).max()))
    )
    middle, half = 0.5 * (edges[1:] + edges[:-1]), 0.5 * np.diff(edges)
    r = middle[:, None] + half[:, None] * nodes
    measure = weights * r ** (d - 1)
    measure /= measure.sum(axis=1, keepdims=True)
    f = [_infinite_amplitude(gas, part, r) for part in range(len(gas.populations))]
    number = [np.array(population, dtype=np.float64) for population in gas.populations]
    like = [
        count**2 * (measure * (1.0 - part**2)).sum(axis=1)
        for count, part in zip(number, f, strict=True)
    ]
    cross = np.zeros(len(edges) - 1)
    if len(f) > 1:
        cross = number[0] * number[1] * (measure * f[0] * f[1]).sum(axis=1)
    return PairDensities(like, number, cross)


def detected(system: System, parts: PairDensities, first: int, second: int) -> FloatArray:
    """Return V² times the density of ordered pairs detected as two labels.

    With κ = cos² θ/2 and σ = sin² θ/2: like labels κ² like_1 + σ² like_2 + 2κσ (N_1 N_2 − cross),
    κ and σ exchanged for the second label; unlike labels
    κσ (like_1 + like_2) + (κ² + σ²) N_1 N_2 + 2κσ cross. Products of numbers are averages over
    independent components.

    Parameters
    ----------
    system
        The gas in its box.
    parts
        Its averages.
    first, second
        Labels.

    Returns
    -------
    array (…, separation)
    """
    both = (parts.number[first] * parts.number[second])[..., None]
    if system.rotation == 0:
        return parts.like[first] if first == second else both + 0.0 * parts.like[first]
    kept, turned = shares(system.rotation)
    both = (parts.number[0] * parts.number[1])[..., None]
    one, other = parts.like
    if first != second:
        mixed = kept * turned
        return np.asarray(
            mixed * (one + other) + (kept**2 + turned**2) * both + 2 * mixed * parts.cross
        )
    if first == 1:
        kept, turned = turned, kept
    return np.asarray(kept**2 * one + turned**2 * other + 2 * kept * turned * (both - parts.cross))


def singlet(parts: PairDensities) -> tuple[FloatArray, FloatArray]:
    """Return V² times the density of ordered pairs in the spin singlet, and of all pairs.

    N_1 N_2 + cross (the projection of the two-body matrix on the singlet); a rotation of all spins
    changes neither.

    Parameters
    ----------
    parts
        Averages of a gas of two components.

    Returns
    -------
    singlet, all : array (…, separation)
    """
    both = (parts.number[0] * parts.number[1])[..., None]
    return both + parts.cross, parts.like[0] + parts.like[1] + 2 * both


def shell_mean_cosine(
    dimension: int, wavenumbers: NDArray[np.float64], edges: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return cos(q·r) averaged over all directions and over shells.

    1D [sin qr]/q · 2D 2π[r J₁(qr)]/q · 3D 4π[r² j₁(qr)]/q between the edges of a shell, divided by
    the shell's volume (1D: both sides).

    Parameters
    ----------
    dimension
        1, 2 or 3.
    wavenumbers : array (difference,)
        |q| > 0, per length unit.
    edges : array (bins + 1,)
        Radii, length units.

    Returns
    -------
    array (difference, bins)
    """
    q = wavenumbers[:, None]
    z = q * edges
    if dimension == 1:
        integral = 2 * np.sin(z) / q
    elif dimension == 2:
        integral = 2 * np.pi * edges * special.j1(z) / q
    else:
        integral = 4 * np.pi * edges**2 * special.spherical_jn(1, z) / q
    return np.diff(integral, axis=1) / shell_volumes(dimension, edges)


def _differing(system: System, weights: Overlaps, edges: FloatArray) -> FloatArray:
    """Return Σ_q W(q) [1 − cos q·r], averaged over directions and bins: (…, separation)."""
    distinct, sums = weights.by_length(system.axes)
    total = np.zeros((len(sums), len(edges) - 1))
    # in pieces, so that many differences and many bins do not fill the memory
    for start in range(0, len(distinct), _CHUNK):
        part = slice(start, start + _CHUNK)
        waves = shell_mean_cosine(system.gas.dimension, distinct[part], edges)
        total += sums[:, part] @ (1.0 - waves)
    return total


def _infinite_amplitude(gas: Gas, component: int, r: FloatArray) -> FloatArray:
    """Return f(r) of one component of the infinite system; 0 where it has no particles."""
    if gas.populations[component] == 0:
        return np.zeros_like(r)
    if gas.thermal_energy == 0:
        return ground_amplitude(gas.dimension, gas.fermi_wavenumbers[component] * r)
    return amplitude(gas.dimension, gas.densities[component], gas.thermal_energy, r)
