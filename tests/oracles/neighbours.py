"""Exact nearest-neighbour distances and spacings, from determinants of overlap matrices.

Given a particle at the origin, the others are again a determinant, of the filled orbitals' span
without the one combination that does not vanish there: K(x,y) − K(x,0)K(0,y)/K(0,0). The chance
that a ball of radius R round it is empty is det(1 − M), M the overlaps of an orthonormal basis of
what is left, integrated over the ball.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import helmert
from scipy.special import j1, jv, spherical_jn

from tests.oracles.shells import gauss_legendre

TAIL = 1e-9


def overlap_matrix(waves: NDArray[np.int64], sides: Sequence[float], radius: float) -> NDArray:
    """Return M_kk' = V⁻¹ ∫_{|x|<R} e^{i(k'−k)·x} dx, R up to half the shortest side.

    With q = |k − k'|: 2 sin(qR)/q (1D), 2πR² J_1(qR)/(qR) (2D), 4πR³ j_1(qR)/(qR) (3D), over V.
    """
    wavenumbers = 2 * np.pi * waves / np.asarray(sides, dtype=float)
    difference = wavenumbers[:, None] - wavenumbers[None]
    z = radius * np.sqrt((difference**2).sum(axis=2))
    small = z < 1e-8
    safe = np.where(small, 1.0, z)
    if len(sides) == 1:
        shape, ball = np.sin(safe) / safe, 2 * radius
    elif len(sides) == 2:
        shape, ball = 2 * j1(safe) / safe, np.pi * radius**2
    else:
        shape, ball = 3 * spherical_jn(1, safe) / safe, 4 * np.pi * radius**3 / 3
    return ball / float(np.prod(sides)) * np.where(small, 1.0, shape)


def torus_survival(
    occupied_sets: Sequence[NDArray[np.int64]], sides: Sequence[float], radii: Sequence[float]
) -> NDArray:
    """Return the probability that the nearest neighbour is farther than each radius.

    Parameters
    ----------
    occupied_sets
        Sets of integer vectors of one population, equally likely.
    sides
        Sides of the box, length units.
    radii
        Up to half the shortest side.

    Returns
    -------
    array (radius,)
    """
    if max(radii) > 0.5 * min(sides) * (1 + 1e-12):
        raise ValueError("balls beyond half the shortest side leave the box")
    survival = np.zeros(len(radii))
    for waves in occupied_sets:
        basis = helmert(len(waves))  # rows orthonormal, all orthogonal to (1, …, 1)
        for i, radius in enumerate(radii):
            left = basis @ overlap_matrix(waves, sides, radius) @ basis.T
            survival[i] += np.linalg.det(np.eye(len(left)) - left) / len(occupied_sets)
    return survival


def torus_mean_distance(
    occupied_sets: Sequence[NDArray[np.int64]], sides: Sequence[float], panels: int = 6
) -> float:
    """Return the mean nearest-neighbour distance, ∫ survival dR up to half the shortest side.

    No farther than 3.5 n^(−1/d), where survival is below 1e-16 in any dimension. Refused where the
    rest, at most the survival there times the distance to the farthest point of the cell, could
    matter (fewer than 9 particles of a square, 27 of a cube).
    """
    spacing = (float(np.prod(sides)) / len(occupied_sets[0])) ** (1 / len(sides))
    half = min(0.5 * min(sides), 3.5 * spacing)
    farthest = 0.5 * float(np.linalg.norm(sides))
    rest = torus_survival(occupied_sets, sides, [half])[0] * (farthest - half)
    if rest > TAIL:
        raise ValueError(f"what lies beyond half the shortest side, up to {rest:.1e}, matters")
    bounds = np.linspace(0.0, half, panels + 1)
    rules = [gauss_legendre(a, b, 12) for a, b in pairwise(bounds)]
    radii = np.concatenate([nodes for nodes, _ in rules])
    weights = np.concatenate([weights for _, weights in rules])
    return float(weights @ torus_survival(occupied_sets, sides, radii))


def ring_gap_probability(particles: int, arc: float) -> float:
    """Return E(0; s): the chance that an arc of s mean spacings holds none of N on a ring.

    det(1 − M), M_jl = sin(π(j − l)s/N)/(π(j − l)).
    """
    steps = np.subtract.outer(np.arange(particles), np.arange(particles))
    overlap = arc / particles * np.sinc(steps * arc / particles)
    return float(np.linalg.det(np.eye(particles) - overlap))


def ring_spacing_variance(particles: int, panels: int = 8) -> float:
    """Return the variance of the spacing at unit mean: ⟨s²⟩ = ∫ s² E'' ds = 2 ∫ E(0; s) ds."""
    bounds = np.linspace(0.0, min(float(particles), 10.0), panels + 1)
    total = 0.0
    for lower, upper in pairwise(bounds):
        nodes, weights = gauss_legendre(lower, upper, 16)
        gaps = [ring_gap_probability(particles, arc) for arc in nodes]
        total += float(weights @ np.array(gaps))
    return 2.0 * total - 1.0


def bulk_survival(dimension: int, radius: float, palm: bool = True, nodes: int = 40) -> float:
    """Return the survival of the infinite gas at unit density, from its partial waves.

    The kernel in a ball falls into angular momenta l, each A Aᵀ with A(k, r) = √(2/π) cos kr,
    √(2/π) sin kr (1D: even, odd), √(kr) J_l(kr) (2D), √(2/π) kr j_l(kr) (3D), 0 < k < k_F,
    0 < r < R. Only l = 0 reaches the origin and loses a combination.

    Parameters
    ----------
    dimension
        1, 2 or 3.
    radius
        In units of n^(−1/d).
    palm
        True: round a particle (nearest neighbour). False: round any point (void).
    nodes
        Gauss–Legendre nodes in k and in r.
    """
    fermi = {1: np.pi, 2: np.sqrt(4 * np.pi), 3: np.cbrt(6 * np.pi**2)}[dimension]
    k, k_weights = gauss_legendre(0.0, fermi, nodes)
    r, r_weights = gauss_legendre(0.0, radius, nodes)
    kr = np.outer(k, r)
    largest = 1 if dimension == 1 else int(fermi * radius) + 25
    survival = 1.0
    for momentum in range(largest + 1):
        amplitude = _partial_wave(dimension, momentum, kr) * np.sqrt(np.outer(k_weights, r_weights))
        if palm and momentum == 0:
            origin = np.sqrt(k_weights) * k ** (0.5 * (dimension - 1))
            origin /= np.linalg.norm(origin)
            amplitude = amplitude - np.outer(origin, origin @ amplitude)
        empty = np.linalg.det(np.eye(nodes) - amplitude @ amplitude.T)
        survival *= empty ** _multiplicity(dimension, momentum)
    return float(survival)


def _partial_wave(dimension: int, momentum: int, kr: NDArray) -> NDArray:
    """Return A(k, r) of one angular momentum."""
    if dimension == 1:
        return np.sqrt(2 / np.pi) * (np.cos(kr) if momentum == 0 else np.sin(kr))
    if dimension == 2:
        return np.sqrt(kr) * jv(momentum, kr)
    return np.sqrt(2 / np.pi) * kr * spherical_jn(momentum, kr)


def _multiplicity(dimension: int, momentum: int) -> int:
    """Return how many partial waves share one angular momentum."""
    if dimension == 1 or momentum == 0:
        return 1
    return 2 if dimension == 2 else 2 * momentum + 1


def bulk_mean_distance(dimension: int) -> float:
    """Return the mean nearest-neighbour distance of the infinite gas at unit density."""
    total = 0.0
    for lower in (0.0, 0.5, 1.0, 1.5, 2.0, 2.5, 3.0):
        radii, weights = gauss_legendre(lower, lower + 0.5, 10)
        survival = [bulk_survival(dimension, radius) for radius in radii]
        total += float(weights @ np.array(survival))
    return total
