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


@kernel
def _occupation(energy, potential):
    """Return the Fermi function of energies in units of k_B T."""
    x = energy - potential
    if x > 0.0:
        small = np.exp(-x)
        return small / (1.0 + small)
    return 1.0 / (1.0 + np.exp(x))


@kernel
def _potential_near(energies, number):
    """Return μ/k_B T at which the mean number is within ¼ of `number`, by bisection."""
    low = energies.min() - np.log(energies.size / number) - 5.0
    high = energies.max() + 5.0
    middle = 0.5 * (low + high)
    for _ in range(200):
        middle = 0.5 * (low + high)
        mean = 0.0
        for j in range(energies.size):
            mean += _occupation(energies[j], middle)
        if abs(mean - number) < 0.25:
            break
        if mean < number:
            low = middle
        else:
            high = middle
    return middle


@kernel
def draw_of_number(rng, energies, number):
    """Draw a set of `number` orbitals for each snapshot, with weights Π e^{−ε}.

    Parameters
    ----------
    rng : Generator
        Used snapshot after snapshot.
    energies : array (snapshot, orbital)
        In units of k_B T, each snapshot its own.
    number : int
        Particles; fewer than there are orbitals.

    Returns
    -------
    array (snapshot, number) of int64
        Filled orbitals, ascending.
    """
    snapshots, orbitals = energies.shape
    filled = np.empty((snapshots, number), dtype=np.int64)
    mean = np.empty(orbitals)
    for s in range(snapshots):
        potential = _potential_near(energies[s], number)
        for j in range(orbitals):
            mean[j] = _occupation(energies[s, j], potential)
        count = -1
        while count != number:
            count = 0
            for j in range(orbitals):
                if rng.random() < mean[j]:
                    if count < number:
                        filled[s, count] = j
                    count += 1
    return filled


@kernel
def draw_of_potential(rng, energies, potential):
    """Draw the filled orbitals of each snapshot, each orbital on its own; −1 is padding.

    Parameters
    ----------
    rng : Generator
        Used snapshot after snapshot.
    energies : array (snapshot, orbital)
        In units of k_B T, each snapshot its own.
    potential : float
        μ/k_B T.
    """
    snapshots, orbitals = energies.shape
    filled = np.full((snapshots, orbitals), -1, dtype=np.int64)
    most = 0
    for s in range(snapshots):
        count = 0
        for j in range(orbitals):
            if rng.random() < _occupation(energies[s, j], potential):
                filled[s, count] = j
                count += 1
        most = max(most, count)
    return filled[:, :most].copy()
