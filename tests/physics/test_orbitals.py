"""Orbitals, levels and closed shells, against exact arithmetic and outside tables."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pairmc.physics.axes.periodic import Periodic
from pairmc.physics.gas import Gas
from pairmc.physics.orbitals import Orbitals, enumerate_orbitals, nearest_closed
from pairmc.physics.system import build_system
from tests.oracles import enumeration

SCALE = 0.83  # length of a side of ratio 1, no special number

RATIOS = [
    (1,),
    (1, 1),
    (1, 2),
    (Fraction(3, 2), 1),
    (1, Fraction(1_000_001, 1_000_000)),
    (1, 1, 1),
    (1, 1, 2),
    (1, Fraction(3, 2), Fraction(7, 4)),
]

# Closed shells at zero twist, recomputed independently from the definition.
SQUARE = [1, 5, 9, 13, 21, 25, 29, 37, 45, 49, 57, 61, 69, 81, 89, 97, 101, 109, 113, 121]
CUBE = [1, 7, 19, 27, 33, 57, 81, 93, 123, 147, 171, 179, 203, 251, 257, 305, 341, 365, 389, 437]
CUBE += [461, 485, 515, 587, 619]


def axes_of(ratio: tuple) -> list[Periodic]:
    """Return periodic axes with sides in this ratio."""
    return [Periodic(SCALE * float(side)) for side in ratio]


def complaints(orbitals: Orbitals, ratio: tuple, count: int) -> list[str]:
    """Return everything in which these orbitals differ from the exact enumeration."""
    expected = enumeration.levels(ratio, count)
    found = []
    if len(orbitals.level) != sum(len(waves) for _, waves in expected):
        found.append("number of orbitals")
    if not np.array_equal(np.unique(orbitals.level), np.arange(len(expected))):
        found.append("numbering of levels")
    if np.any(np.diff(orbitals.level) < 0):
        found.append("order of levels")
    for index, (energy, waves) in enumerate(expected):
        here = orbitals.level == index
        if [tuple(row) for row in orbitals.numbers[here].tolist()] != sorted(waves):
            found.append(f"quantum numbers of level {index}")
        exact = 0.5 * (2 * np.pi / SCALE) ** 2 * float(energy)
        if not np.allclose(orbitals.energies[here], exact, rtol=1e-13, atol=0.0):
            found.append(f"energy of level {index}")
    return found


@pytest.mark.parametrize("ratio", RATIOS)
@pytest.mark.parametrize("count", [1, 2, 7, 20, 57])
def test_levels_against_exact_arithmetic(ratio, count):
    assert complaints(enumerate_orbitals(axes_of(ratio), count), ratio, count) == []


sides = st.fractions(min_value=Fraction(1, 3), max_value=3, max_denominator=12)


@settings(max_examples=60, deadline=None, derandomize=True)
@given(ratio=st.lists(sides, min_size=1, max_size=3).map(tuple), count=st.integers(1, 70))
def test_levels_of_any_rational_box(ratio, count):
    assert complaints(enumerate_orbitals(axes_of(ratio), count), ratio, count) == []


def test_a_wrong_orbital_is_seen():
    """Control: each planted fault is named by the comparison that the tests above rely on."""
    ratio, count = (1, Fraction(3, 2), Fraction(7, 4)), 20
    right = enumerate_orbitals(axes_of(ratio), count)
    swapped = right.numbers.copy()
    swapped[-1, 0] += 1
    doubled = right.numbers.copy()
    doubled[3] = doubled[2]
    energies = right.energies.copy()
    energies[-1] *= 1 + 1e-9
    merged = np.minimum(right.level, right.level[-1] - 1)
    for planted in (
        Orbitals(swapped, right.energies, right.level),
        Orbitals(doubled, right.energies, right.level),
        Orbitals(right.numbers, energies, right.level),
        Orbitals(right.numbers, right.energies, merged),
        Orbitals(right.numbers[:-1], right.energies[:-1], right.level[:-1]),
    ):
        assert complaints(planted, ratio, count)


@pytest.mark.parametrize(("ratio", "closed"), [((1, 1), SQUARE), ((1, 1, 1), CUBE)])
def test_closed_shells_of_square_and_cube(ratio, closed):
    assert enumerate_orbitals(axes_of(ratio), closed[-1]).closed.tolist() == closed


def test_every_odd_number_closes_on_a_ring():
    assert enumerate_orbitals(axes_of((1,)), 50).closed.tolist() == list(range(1, 52, 2))


@pytest.mark.parametrize("ratio", [(1, 1, 2), (1, Fraction(3, 2), Fraction(7, 4))])
def test_closed_shells_of_unequal_sides(ratio):
    closed = enumerate_orbitals(axes_of(ratio), 120).closed
    assert closed.tolist() == enumeration.closed_shells(ratio, int(closed[-1]))


@pytest.mark.parametrize("ratio", RATIOS)
def test_nearest_closed(ratio):
    closed = enumeration.closed_shells(ratio, 200)
    for population in range(1, 60):
        if population in closed:
            expected = (population,)
        else:
            below = max(number for number in closed if number < population)
            expected = (below, min(number for number in closed if number > population))
        assert nearest_closed(axes_of(ratio), population) == expected


@pytest.mark.parametrize("length", [1e-7, 1.0, 1e9])
def test_levels_do_not_depend_on_the_unit_of_length(length):
    ratio = (1.0, 1.5, 1.75)
    small = enumerate_orbitals([Periodic(length * side) for side in ratio], 60)
    assert np.array_equal(
        small.numbers, enumerate_orbitals([Periodic(x) for x in ratio], 60).numbers
    )


def test_an_index_means_the_same_orbital_in_every_component():
    gas = Gas(3, ("up", "down"), (27, 11), total_density=1.3)
    system = build_system(gas, (1.0, 1.5, 1.75))
    up, down = (occupation.orbitals for occupation in system.occupations)
    shared = len(down.level)
    assert shared < len(up.level)
    assert np.array_equal(up.numbers[:shared], down.numbers)
    assert np.array_equal(up.level[:shared], down.level)


def test_energies_of_a_periodic_axis():
    axis = Periodic(2.5)
    assert axis.wavenumbers(np.array([-3, 0, 2])) == pytest.approx(
        np.array([-3, 0, 2]) * 2.513274122871835,
        rel=1e-15,  # 2π/2.5
    )
    assert axis.energies(np.array([-3])) == pytest.approx([0.5 * (3 * 2 * np.pi / 2.5) ** 2])
    numbers = axis.numbers_below(0.5 * (4 * 2 * np.pi / 2.5) ** 2)
    assert set(range(-4, 5)) <= set(numbers.tolist())
