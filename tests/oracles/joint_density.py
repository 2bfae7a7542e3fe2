"""The whole joint density |det|²/N! of a few plane waves, integrated and sampled by brute force."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from itertools import pairwise, product
from math import factorial

import numpy as np
from numpy.typing import NDArray

from tests.oracles.shells import gauss_legendre, shell_rule

MOST_POINTS = 4_000_000


def joint_density(positions: NDArray, waves: NDArray[np.int64], sides: Sequence[float]) -> NDArray:
    """Return p(r_1 … r_N) = |det e^{ik_j·r_i}|²/(N! V^N), which integrates to 1.

    Parameters
    ----------
    positions : array (…, particle, axis)
        Length units.
    waves : array (particle, axis) of int64
        The filled waves.
    sides
        Sides of the box, length units.

    Returns
    -------
    array (…)
        Per length**(N d).
    """
    norm = factorial(len(waves)) * float(np.prod(sides)) ** len(waves)
    return _squared_determinant(positions, waves, sides) / norm


def _squared_determinant(
    positions: NDArray, waves: NDArray[np.int64], sides: Sequence[float]
) -> NDArray:
    """Return |det e^{ik_j·r_i}|²."""
    scaled = 2 * np.pi * positions / np.asarray(sides, dtype=float)
    return np.abs(np.linalg.det(np.exp(1j * (scaled @ waves.T)))) ** 2


def expectation(
    function: Callable[[NDArray], NDArray],
    waves: NDArray[np.int64],
    sides: Sequence[float],
    degree: int = 0,
) -> float:
    """Return ∫ f p dr_1 … dr_N by the trapezoid rule in all N·d coordinates.

    Exact for a trigonometric polynomial f of at most `degree` in each coordinate.

    Parameters
    ----------
    function
        Takes positions (point, particle, axis), returns (point,).
    waves, sides
        As in `joint_density`.
    degree
        Highest harmonic of f in one coordinate.
    """
    points = _torus_grid(len(waves), np.ptp(waves, axis=0) + degree + 1, sides)
    volume = float(np.prod(sides)) ** len(waves)
    values = function(points) * joint_density(points, waves, sides)
    return float(values.mean() * volume)


def _torus_grid(particles: int, counts: NDArray[np.int64], sides: Sequence[float]) -> NDArray:
    """Return all configurations (point, particle, axis) on a product grid."""
    number = int(np.prod(np.asarray(counts, dtype=float)) ** particles)
    if number > MOST_POINTS:
        raise ValueError(f"{number} grid points are too many; use fewer particles")
    axes = [side * np.arange(count) / count for side, count in zip(sides, counts, strict=True)]
    one = np.array(list(product(*axes)))
    indices = np.indices((len(one),) * particles).reshape(particles, -1).T
    return one[indices]


def pair_density_from_joint(
    displacements: NDArray, waves: NDArray[np.int64], sides: Sequence[float]
) -> NDArray:
    """Return ρ⁽²⁾(r) = N(N−1) ∫ p(x, x + r, r_3 … r_N) dx/V dr_3 … dr_N.

    Parameters
    ----------
    displacements : array (point, axis)
    waves, sides
        As in `joint_density`.
    """
    particles = len(waves)
    grid = _torus_grid(particles - 1, np.ptp(waves, axis=0) + 1, sides)
    volume = float(np.prod(sides)) ** (particles - 2)
    density = np.empty(len(displacements))
    for i, displacement in enumerate(np.asarray(displacements, dtype=float)):
        second = grid[:, :1] + displacement
        positions = np.concatenate([grid[:, :1], second, grid[:, 1:]], axis=1)
        density[i] = joint_density(positions, waves, sides).mean() * volume
    return particles * (particles - 1) * density


def pair_bin_probabilities(
    waves: NDArray[np.int64], sides: Sequence[float], edges: Sequence[float]
) -> NDArray:
    """Return the probability that one given pair has its separation in each bin.

    Parameters
    ----------
    waves, sides
        As in `joint_density`.
    edges
        Bin edges, ascending, up to half the shortest side.
    """
    pairs = len(waves) * (len(waves) - 1)
    volume = float(np.prod(sides))
    chances = np.empty(len(edges) - 1)
    for b, (inner, outer) in enumerate(pairwise(edges)):
        points, weights = shell_rule(len(sides), inner, outer, _wavenumber(waves, sides))
        chances[b] = volume / pairs * weights @ pair_density_from_joint(points, waves, sides)
    return chances


def neighbour_survival(waves: NDArray[np.int64], sides: Sequence[float], radius: float) -> float:
    """Return the probability that the nearest neighbour of a particle is farther than `radius`.

    Two or three particles, by inclusion and exclusion over the ball B round the first:
    1 − Σ_j P(r_j ∈ B) + P(r_2 ∈ B, r_3 ∈ B).

    Parameters
    ----------
    waves, sides
        As in `joint_density`.
    radius
        Up to half the shortest side.
    """
    if len(waves) not in (2, 3):
        raise ValueError("two or three particles")
    if radius == 0.0:
        return 1.0
    inside = pair_bin_probabilities(waves, sides, [0.0, radius])[0]
    if len(waves) == 2:
        return float(1.0 - inside)
    points, weights = shell_rule(len(sides), 0.0, radius, _wavenumber(waves, sides))
    positions = np.zeros((len(points), len(points), 3, len(sides)))
    positions[:, :, 1] = points[:, None]
    positions[:, :, 2] = points[None, :]
    density = joint_density(positions, waves, sides) * float(np.prod(sides))
    return float(1.0 - 2.0 * inside + weights @ density @ weights)


def ring_mean_neighbour_distance(waves: NDArray[np.int64], side: float, nodes: int = 24) -> float:
    """Return the mean nearest-neighbour distance of two or three particles on a ring."""
    radii, weights = gauss_legendre(0.0, 0.5 * side, nodes)
    survival = [neighbour_survival(waves, [side], radius) for radius in radii]
    return float(weights @ np.array(survival))


def _wavenumber(waves: NDArray[np.int64], sides: Sequence[float]) -> float:
    """Return a bound on |k − k'| between filled waves."""
    return float(np.linalg.norm(2 * np.pi * np.ptp(waves, axis=0) / np.asarray(sides)))


def draw_by_rejection(
    waves: NDArray[np.int64],
    sides: Sequence[float],
    snapshots: int,
    rng: np.random.Generator,
) -> NDArray:
    """Return independent snapshots of the joint density, by plain rejection from uniform points.

    The bound is Hadamard's: N columns of N numbers of modulus one have |det|² ≤ N^N. One proposal
    in N^N/N! is kept: 4.5 for N = 3, 26 for N = 5, 163 for N = 7.

    Parameters
    ----------
    waves, sides
        As in `joint_density`.
    snapshots
        How many.
    rng
        Source of randomness.

    Returns
    -------
    array (snapshot, particle, axis)
        Length units, in [0, L_a).
    """
    particles, dimension = waves.shape
    bound = float(particles) ** particles
    block = min(int(1.2 * snapshots * bound / factorial(particles)) + 16, 100_000)
    kept: list[NDArray] = []
    missing = snapshots
    while missing > 0:
        proposed = rng.random((block, particles, dimension)) * np.asarray(sides, dtype=float)
        chance = _squared_determinant(proposed, waves, sides) / bound
        accepted = proposed[rng.random(block) < chance]
        kept.append(accepted)
        missing -= len(accepted)
    return np.concatenate(kept)[:snapshots]


def snapshot_features(positions: NDArray, sides: Sequence[float]) -> NDArray:
    """Return one vector per snapshot that keeps three-body and directional information.

    All N(N−1)/2 minimum-image separations of the snapshot in ascending order, and the mean square
    displacement of its pairs along each axis.

    Parameters
    ----------
    positions : array (snapshot, particle, axis)
    sides
        Sides of the box, length units.

    Returns
    -------
    array (snapshot, N(N−1)/2 + d)
    """
    lengths = np.asarray(sides, dtype=float)
    first, second = np.triu_indices(positions.shape[1], k=1)
    displacement = positions[:, first] - positions[:, second]
    displacement -= lengths * np.round(displacement / lengths)
    separations = np.sort(np.sqrt((displacement**2).sum(axis=2)), axis=1)
    return np.concatenate([separations, (displacement**2).mean(axis=1)], axis=1)
