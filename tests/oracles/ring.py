"""Fermions on a ring as eigenvalue angles of random unitary matrices, and a test for equal laws.

The eigenvalue angles of a Haar-distributed N × N unitary matrix have density Π|e^{iθ_j} −
e^{iθ_l}|²/(N!(2π)^N), which is |det|² of N consecutive plane waves (Mezzadri, Notices AMS 54, 592,
2007, for the sampler that scipy uses).

The pairs of one snapshot depend on each other, so two samples are compared with whole snapshots as
units: one vector a snapshot, and labels permuted between snapshots.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray
from scipy.spatial.distance import cdist
from scipy.stats import unitary_group

Form = Callable[[NDArray], NDArray]
CHUNK = 4096


def ring_angles(particles: int, snapshots: int, rng: np.random.Generator) -> NDArray:
    """Return eigenvalue angles in [0, 2π), ascending within a snapshot.

    Parameters
    ----------
    particles
        N, at least 2.
    snapshots
        How many independent matrices.
    rng
        Source of randomness.

    Returns
    -------
    array (snapshot, particle)
    """
    matrices = unitary_group(dim=particles, seed=rng).rvs(size=snapshots)
    eigenvalues = np.linalg.eigvals(matrices.reshape(snapshots, particles, particles))
    return np.sort(np.mod(np.angle(eigenvalues), 2 * np.pi), axis=1)


def poisson_angles(particles: int, snapshots: int, rng: np.random.Generator) -> NDArray:
    """Return independent uniform angles, ascending within a snapshot: no exchange hole."""
    return np.sort(2 * np.pi * rng.random((snapshots, particles)), axis=1)


def spacings(angles: NDArray) -> NDArray:
    """Return the spacings round the ring (snapshot, particle), in units of their mean."""
    ordered = np.sort(angles, axis=1)
    steps = np.diff(ordered, axis=1, append=ordered[:, :1] + 2 * np.pi)
    return steps * angles.shape[1] / (2 * np.pi)


def separation_histograms(angles: NDArray, edges: NDArray) -> NDArray:
    """Return unordered pairs per snapshot and bin of the shorter arc.

    Parameters
    ----------
    angles : array (snapshot, particle)
    edges : array (bin + 1,)
        In units of the mean spacing, from 0 to at most N/2.

    Returns
    -------
    array (snapshot, bin) of int64
    """
    particles = angles.shape[1]
    first, second = np.triu_indices(particles, k=1)
    arcs = np.abs(angles[:, first] - angles[:, second])
    arcs = np.minimum(arcs, 2 * np.pi - arcs) * particles / (2 * np.pi)
    return np.array([np.histogram(row, bins=edges)[0] for row in arcs])


def energy_form(vectors: NDArray) -> NDArray:
    """Return the quadratic form of 2E|X−Y| − E|X−X'| − E|Y−Y'|; sees any difference of the laws.

    A form Q gives the statistic sᵀQs of signed labels s: 1/M_a for snapshots of the first sample,
    −1/M_b for those of the second.
    """
    return -cdist(vectors, vectors)


def hotelling_form(vectors: NDArray) -> NDArray:
    """Return the form of |C^(−1/2)(mean X − mean Y)|², C of all snapshots; sees means, sharply.

    A monotone function of Hotelling's T². Directions in which nothing varies are left out.
    """
    centred = vectors - vectors.mean(axis=0)
    left, singular, _ = np.linalg.svd(centred, full_matrices=False)
    whitened = left[:, singular > 1e-8 * singular[0]]
    return len(vectors) * whitened @ whitened.T


def permutation_p_value(
    vectors_a: NDArray,
    vectors_b: NDArray,
    rng: np.random.Generator,
    permutations: int,
    form: Form = energy_form,
) -> float:
    """Return the p-value of "both samples of snapshots have one law".

    Each vector is one snapshot and stays whole; labels are permuted. The value is
    (1 + #{permuted ≥ observed})/(1 + permutations), valid at any sample size.

    Parameters
    ----------
    vectors_a, vectors_b : array (snapshot, feature)
        One vector per independent snapshot.
    rng
        Source of the permutations.
    permutations
        How many; the smallest p-value is 1/(1 + permutations).
    form
        `energy_form` or `hotelling_form` (which needs more snapshots than features).
    """
    pooled = np.concatenate([vectors_a, vectors_b]).astype(float)
    spread = pooled.std(axis=0)
    pooled = pooled[:, spread > 0.0] / spread[spread > 0.0]
    size_a, size_b = len(vectors_a), len(vectors_b)
    labels = np.concatenate([np.full(size_a, 1.0 / size_a), np.full(size_b, -1.0 / size_b)])
    matrix = form(pooled)
    observed = labels @ matrix @ labels
    bar = observed - 1e-9 * abs(observed)  # a tie is no smaller for its rounding
    reached = 0
    for start in range(0, permutations, CHUNK):
        rows = np.tile(labels, (min(CHUNK, permutations - start), 1))
        signs = rng.permuted(rows, axis=1)
        reached += np.count_nonzero(np.einsum("pi,pi->p", signs @ matrix, signs) >= bar)
    return (1 + reached) / (1 + permutations)
