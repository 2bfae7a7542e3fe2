"""Compiled draws of filled orbitals. Imported only where something is drawn."""

from __future__ import annotations

import numpy as np

from pairmc.compiled import kernel


@kernel
def fill_probabilities(log_weights, probability):
    """Tabulate the probability that orbital j is filled when n particles are in orbitals 0 … j.

    From Z_n(j) = Z_n(j−1) + x_j Z_{n−1}(j−1), all terms positive, in logarithms (Chen, Dempster &
    Liu, Biometrika 81, 457, 1994): p = x_j Z_{n−1}(j−1)/Z_n(j).

    Parameters
    ----------
    log_weights : array (orbital,)
        ln x_j = −ε_j/k_B T up to a constant.
    probability : array (orbital, population + 1)
        Filled.
    """
    orbitals, columns = probability.shape
    log_sums = np.full(columns, -np.inf)  # ln Z_n of the orbitals so far
    log_sums[0] = 0.0
    for j in range(orbitals):
        probability[j, 0] = 0.0
        for n in range(min(columns - 1, j + 1), 0, -1):
            filled = log_weights[j] + log_sums[n - 1]
            empty = log_sums[n]
            if empty == -np.inf:
                probability[j, n] = 1.0
                log_sums[n] = filled
            elif filled > empty:
                ratio = np.exp(empty - filled)
                probability[j, n] = 1.0 / (1.0 + ratio)
                log_sums[n] = filled + np.log1p(ratio)
            else:
                ratio = np.exp(filled - empty)
                probability[j, n] = ratio / (1.0 + ratio)
                log_sums[n] = empty + np.log1p(ratio)


@kernel
def draw_fixed(rng, probability, snapshots):
    """Draw the filled orbitals of snapshots of a fixed population, last orbital first."""
    orbitals, columns = probability.shape
    filled = np.empty((snapshots, columns - 1), dtype=np.int64)
    for s in range(snapshots):
        left = columns - 1
        for j in range(orbitals - 1, -1, -1):
            if left == 0:
                break
            if rng.random() < probability[j, left]:
                left -= 1
                filled[s, left] = j
    return filled


@kernel
def draw_independent(rng, mean, snapshots):
    """Draw the filled orbitals of snapshots, each orbital on its own; −1 is padding."""
    taken = np.zeros((snapshots, mean.size), dtype=np.bool_)
    most = 0
    for s in range(snapshots):
        count = 0
        for j in range(mean.size):
            if rng.random() < mean[j]:
                taken[s, j] = True
                count += 1
        most = max(most, count)
    filled = np.full((snapshots, most), -1, dtype=np.int64)
    for s in range(snapshots):
        count = 0
        for j in range(mean.size):
            if taken[s, j]:
                filled[s, count] = j
                count += 1
    return filled
