"""Plane waves of a periodic box listed by brute force, with energies as exact fractions.

A wave is its integer vector m, or m + τ under a twist τ: k_a = 2π(m_a + τ_a)/L_a. Energies are
counted as Σ_a ((m_a + τ_a)/ratio_a)², a rational number where the ratio of the sides is rational,
so that two energies are equal or they are not.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from itertools import combinations, product
from math import comb

import numpy as np
from numpy.typing import NDArray

Vector = tuple[int, ...]
MOST_SETS = 100_000


def levels(
    ratio: Sequence[int | Fraction], count: int, twist: Sequence[int | Fraction] | None = None
) -> list[tuple[Fraction, list[Vector]]]:
    """Return the lowest levels, ascending, that together hold at least `count` waves.

    All integer vectors of a cube are listed. A level counts only if it lies below the energy of
    every vector outside the cube; the cube grows until enough levels do.

    Parameters
    ----------
    ratio
        Ratio of the sides, exact numbers.
    count
        Waves wanted.
    twist
        τ of each axis, exact numbers in [−½, ½]; zero if not given.

    Returns
    -------
    list of (Fraction, list of tuple of int)
        Energy and all waves of each level.
    """
    sides = [Fraction(side) for side in ratio]
    shifts = (
        [Fraction(shift) for shift in twist] if twist is not None else [Fraction(0)] * len(sides)
    )
    largest = 1
    while True:
        outside = min(
            ((largest + 1 - abs(shift)) / side) ** 2
            for side, shift in zip(sides, shifts, strict=True)
        )
        found: dict[Fraction, list[Vector]] = {}
        terms = [
            {m: ((m + shift) / side) ** 2 for m in range(-largest, largest + 1)}
            for side, shift in zip(sides, shifts, strict=True)
        ]
        for vector in product(range(-largest, largest + 1), repeat=len(sides)):
            energy = sum((term[m] for term, m in zip(terms, vector, strict=True)), Fraction(0))
            if energy < outside:
                found.setdefault(energy, []).append(vector)
        if sum(map(len, found.values())) >= count:
            return _until(sorted(found.items()), count)
        largest += 1 + largest // 3


def _until(
    ascending: list[tuple[Fraction, list[Vector]]], count: int
) -> list[tuple[Fraction, list[Vector]]]:
    """Cut the list after the level that brings the number of waves to `count`."""
    held = 0
    for position, (_, vectors) in enumerate(ascending):
        held += len(vectors)
        if held >= count:
            return ascending[: position + 1]
    raise AssertionError("the caller has checked that there are enough")


def closed_shells(
    ratio: Sequence[int | Fraction],
    largest_population: int,
    twist: Sequence[int | Fraction] | None = None,
) -> list[int]:
    """Return all populations up to the largest that leave no level partly filled, ascending."""
    closed: list[int] = []
    held = 0
    for _, vectors in levels(ratio, largest_population, twist):
        held += len(vectors)
        if held <= largest_population:
            closed.append(held)
    return closed


def core_and_last_level(
    population: int,
    ratio: Sequence[int | Fraction],
    twist: Sequence[int | Fraction] | None = None,
) -> tuple[list[Vector], list[Vector]]:
    """Return the waves of the levels below the last particle's, and those of its level."""
    *below, (_, last) = levels(ratio, population, twist)
    return [vector for _, vectors in below for vector in vectors], last


def occupied_sets(
    population: int,
    ratio: Sequence[int | Fraction],
    twist: Sequence[int | Fraction] | None = None,
) -> list[NDArray[np.int64]]:
    """Return every occupied set of lowest energy: one for a closed shell, more for an open one.

    Parameters
    ----------
    population
        Particles of one component.
    ratio, twist
        As in `levels`.

    Returns
    -------
    list of array (particle, axis) of int64
        Integer vectors m, each set once.
    """
    core, last = core_and_last_level(population, ratio, twist)
    valence = population - len(core)
    number = comb(len(last), valence)
    if number > MOST_SETS:
        raise ValueError(f"{number} degenerate sets are too many to list")
    return [
        np.array([*core, *filled], dtype=np.int64).reshape(population, len(ratio))
        for filled in combinations(last, valence)
    ]


def structure_factor(waves: NDArray[np.int64], transfer: Sequence[int]) -> Fraction:
    """Return S(q) = #{k filled : k + q empty}/N of one determinant, by counting.

    Parameters
    ----------
    waves : array (particle, axis) of int64
        The filled waves.
    transfer
        q in units of 2π/L_a, integers, not all zero.
    """
    filled = {tuple(int(m) for m in wave) for wave in waves}
    moved = [tuple(m + q for m, q in zip(wave, transfer, strict=True)) for wave in filled]
    return Fraction(sum(wave not in filled for wave in moved), len(filled))


def mean_square_wavenumber(
    waves: NDArray[np.int64], sides: Sequence[float], twist: Sequence[float] | None = None
) -> float:
    """Return N⁻¹ Σ_k |k|² of one filled set, per length²; the energy is half of it."""
    shifted = waves + (np.zeros(len(sides)) if twist is None else np.asarray(twist, dtype=float))
    wavenumbers = 2 * np.pi * shifted / np.asarray(sides, dtype=float)
    return float((wavenumbers**2).sum() / len(waves))
