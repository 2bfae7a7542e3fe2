"""The exact pair correlation of one component on the torus, from its definition.

Two routes to the same function of the displacement: |Σ_k e^{ik·r}|² of the one-particle density
matrix, and the 2 × 2 minors of every pair of orbitals. Bin averages integrate over the actual
shell.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations, pairwise

import numpy as np
from numpy.typing import NDArray

from tests.oracles.shells import shell_rule

CHUNK = 8192


def pair_correlation(
    displacements: NDArray,
    occupied_sets: Sequence[NDArray[np.int64]],
    sides: Sequence[float],
    weights: Sequence[float] | None = None,
) -> NDArray:
    """Return g(r) = Σ_K w_K (1 − |N⁻¹ Σ_{k∈K} e^{ik·r}|²), one value per displacement vector.

    Parameters
    ----------
    displacements : array (point, axis)
        Length units.
    occupied_sets
        Sets of integer vectors, all of one population N.
    sides
        Sides of the box, length units.
    weights
        Probability of each set; equal if not given.
    """
    scaled = 2 * np.pi * np.asarray(displacements, dtype=float) / np.asarray(sides, dtype=float)
    total = np.zeros(len(scaled))
    for weight, waves in zip(_probabilities(occupied_sets, weights), occupied_sets, strict=True):
        for start in range(0, len(scaled), CHUNK):
            part = slice(start, start + CHUNK)
            amplitude = np.exp(1j * (scaled[part] @ waves.T)).sum(axis=1) / len(waves)
            total[part] += weight * (1.0 - np.abs(amplitude) ** 2)
    return total


def pair_density(
    displacements: NDArray,
    occupied_sets: Sequence[NDArray[np.int64]],
    sides: Sequence[float],
    weights: Sequence[float] | None = None,
) -> NDArray:
    """Return ρ⁽²⁾(r) = Σ_{k<k'} |φ_k(0) φ_k'(r) − φ_k'(0) φ_k(r)|², density of ordered pairs.

    Parameters and shapes as in `pair_correlation`; per length**(2d). Costs N²/2 evaluations a
    displacement and set.
    """
    volume = float(np.prod(sides))
    scaled = 2 * np.pi * np.asarray(displacements, dtype=float) / np.asarray(sides, dtype=float)
    total = np.zeros(len(scaled))
    for weight, waves in zip(_probabilities(occupied_sets, weights), occupied_sets, strict=True):
        here = np.full(len(waves), volume**-0.5, dtype=complex)
        there = np.exp(1j * (scaled @ waves.T)) * volume**-0.5
        for i, j in combinations(range(len(waves)), 2):
            total += weight * np.abs(here[i] * there[:, j] - here[j] * there[:, i]) ** 2
    return total


def bin_averages(
    occupied_sets: Sequence[NDArray[np.int64]],
    sides: Sequence[float],
    edges: Sequence[float],
    weights: Sequence[float] | None = None,
) -> NDArray:
    """Return g averaged over the volume of each separation bin.

    Parameters
    ----------
    occupied_sets, sides, weights
        As in `pair_correlation`.
    edges
        Bin edges, ascending, up to half the shortest side.

    Returns
    -------
    array (bin,)
    """
    if edges[-1] > 0.5 * min(sides) * (1 + 1e-12):
        raise ValueError("shells beyond half the shortest side leave the box")
    wavenumber = largest_transfer(occupied_sets, sides)
    averages = np.empty(len(edges) - 1)
    for b, (inner, outer) in enumerate(pairwise(edges)):
        points, volumes = shell_rule(len(sides), inner, outer, wavenumber)
        values = pair_correlation(points, occupied_sets, sides, weights)
        averages[b] = values @ volumes / volumes.sum()
    return averages


def largest_transfer(occupied_sets: Sequence[NDArray[np.int64]], sides: Sequence[float]) -> float:
    """Return a bound on |k − k'| within any of the sets: the diagonal of their extent."""
    extent = np.max([np.ptp(waves, axis=0) for waves in occupied_sets], axis=0)
    return float(np.linalg.norm(2 * np.pi * extent / np.asarray(sides, dtype=float)))


def _probabilities(
    occupied_sets: Sequence[NDArray[np.int64]], weights: Sequence[float] | None
) -> Sequence[float]:
    """Return the weights, equal ones where none are given."""
    if len({len(waves) for waves in occupied_sets}) != 1:
        raise ValueError("the sets differ in population")
    return [1.0 / len(occupied_sets)] * len(occupied_sets) if weights is None else weights
