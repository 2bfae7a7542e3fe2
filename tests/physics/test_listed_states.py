"""Listed states: which orbitals, their exact expectations, energy, wave vector and degeneracy.

The degeneracy is compared with plain listing (`tests.oracles.spinors`), with binomials where a
shell is open, and with the coefficients of Π_k (1 + z q^{k²}) in whole numbers where listing is
hopeless. Nothing here is statistical but one check of drawn positions, at a fixed seed, whose
false-alarm rate is FAMILY_ALPHA.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import replace
from itertools import product
from math import comb, pi

import numpy as np
import pytest
from numpy.typing import NDArray

from pairmc.physics import listed_states
from pairmc.physics.axes.periodic import Periodic
from pairmc.physics.grids import separation_grid
from pairmc.physics.listed_states import StateSummary, describe_state
from pairmc.physics.occupation.ground import GroundState
from pairmc.physics.occupation.listed import changed_numbers, listed_state
from pairmc.physics.orbitals import enumerate_orbitals
from pairmc.physics.system import System
from pairmc.physics.theory import energy
from pairmc.physics.theory.pair_correlation import expected
from tests.oracles import pair_density, spinors
from tests.oracles.significance import hotelling_p_value
from tests.physics.gases import bin_counts, draw, make_system, pair_separations, positions_of

FAMILY_ALPHA = 1e-4

# Sides, filled orbitals of each component: excited, displaced, unequal, nothing symmetric.
STATES: tuple[tuple[Sequence[float], tuple[list, ...]], ...] = (
    ((2 * pi,), ([(-3,), (1,), (2,)], [])),
    ((2.3,), ([(0,), (4,)], [(1,), (-1,)])),
    ((2.3,), ([(5,)], [(0,)])),
    ((1.0, 1.0), ([(0, 0), (1, 1), (-2, 0)], [])),
    ((1.0, 1.0), ([(5, 0)], [])),
    ((0.7, 1.4), ([(5, 0)], [])),
    ((1.0, 1.5), ([(0, 0), (2, 1), (-1, 0)], [(1, 1), (0, 0)])),
    ((1.0, 1.234), ([(0, 0), (2, 1), (-1, 0)], [(1, 1)])),
    ((1.0, 1.5, 1.75), ([(0, 0, 1), (1, 0, 0)], [(0, 1, -1), (0, 0, 0)])),
    ((1.0, 1.0, 1.0), ([(1, 1, 0), (0, 0, 0), (0, -1, 0)], [(0, 0, 1)])),
    ((1.0, 1.0, 2.0), ([(0, 0, 0)], [(0, 0, 0)])),
)


def arrays(sets: Sequence[Sequence], dimension: int) -> list[NDArray[np.int64]]:
    """Return quantum numbers as arrays (orbital, axis), also where there are none."""
    return [np.array(part, dtype=np.int64).reshape(-1, dimension) for part in sets]


def describe(
    sides: Sequence[float], sets: Sequence[Sequence], twist: Sequence[float] = (0.0, 0.0, 0.0)
) -> StateSummary:
    axes = [Periodic(side, part) for side, part in zip(sides, twist, strict=False)]
    return describe_state(axes, arrays(sets, len(sides)))


def squares(waves: NDArray) -> int:
    """Return Σ m², the energy of a box of equal sides in units of ½(2π/L)²."""
    return int((waves**2).sum())


def ways_by_polynomials(population: int, dimension: int, most: int) -> Counter[int]:
    """Return the number of sets of `population` waves of each Σ m² up to `most`.

    Coefficients of z^N in Π_m (1 + z q^{m²}), multiplied out wave by wave.
    """
    reach = int(most**0.5)
    energies = [
        sum(m * m for m in wave) for wave in product(range(-reach, reach + 1), repeat=dimension)
    ]
    table = [Counter({0: 1}), *(Counter[int]() for _ in range(population))]
    for step in sorted(part for part in energies if part <= most):
        for particles in range(population, 0, -1):
            for total, ways in table[particles - 1].items():
                if total + step <= most:
                    table[particles][total + step] += ways
    return table[population]


def with_occupations(system: System, sets: Sequence[NDArray]) -> System:
    """Return the system with listed states in place of the ground states."""
    return replace(system, occupations=tuple(listed_state(system.axes, waves) for waves in sets))


class TestOrbitals:
    @pytest.mark.parametrize(("sides", "sets"), STATES)
    def test_a_listed_state_fills_what_it_names(self, sides, sets):
        axes = [Periodic(side) for side in sides]
        for waves in arrays(sets, len(sides)):
            state = listed_state(axes, waves[::-1])
            assert {*map(tuple, state.orbitals.numbers.tolist())} == {*map(tuple, waves.tolist())}
            assert state.population == state.mean_number == len(waves) == len(state.orbitals)
            assert (np.diff(state.orbitals.energies) >= 0).all()
            assert state.orbitals.energies.sum() == pytest.approx(
                spinors.wave_energies(waves, sides).sum()
            )
            assert (
                len(set(state.orbitals.level.tolist())) == state.orbitals.level.max(initial=-1) + 1
            )
            assert state.closed
            assert state.fixed

    def test_levels_are_the_distinct_energies(self):
        axes = (Periodic(1.0), Periodic(1.0))
        state = listed_state(axes, [(3, 4), (0, 1), (5, 0), (1, 0), (-4, 3), (2, 2)])
        assert state.orbitals.numbers.tolist() == [
            [0, 1], [1, 0], [2, 2], [-4, 3], [3, 4], [5, 0],
        ]  # fmt: skip
        assert state.orbitals.level.tolist() == [0, 0, 1, 2, 2, 2]

    @pytest.mark.parametrize(
        ("ratio", "population", "twist"),
        [((1, 1), 13, (0.0, 0.0)), ((1, 1, 2), 9, (0.0,) * 3), ((1, 1), 12, (-0.5, -0.5))],
    )
    def test_the_ground_state_listed_is_the_ground_state(self, ratio, population, twist):
        axes = [Periodic(0.83 * side, part) for side, part in zip(ratio, twist, strict=True)]
        ground = GroundState(enumerate_orbitals(axes, population), population)
        state = listed_state(axes, ground.orbitals.numbers[::-1])
        for name in ("numbers", "energies", "level"):
            assert np.array_equal(getattr(state.orbitals, name), getattr(ground.orbitals, name))
        rng = np.random.default_rng(3)
        assert np.array_equal(state.draw(rng, 4), ground.draw(rng, 4))
        assert np.array_equal(state.mean(), ground.mean())
        for mine, theirs in zip(state.pair_factors(), ground.pair_factors(), strict=True):
            assert np.array_equal(mine, theirs)

    def test_changes(self):
        axes = (Periodic(1.0), Periodic(1.5))
        assert changed_numbers(axes, 3).tolist() == [[0, -1], [0, 0], [0, 1]]
        assert changed_numbers(axes, 3, (2, -1)).tolist() == [[2, -2], [2, -1], [2, 0]]
        found = changed_numbers(axes, 3, (2, -1), [(2, 0)], [(-7, 3)])
        assert found.tolist() == [[-7, 3], [2, -2], [2, -1]]
        assert changed_numbers(axes, 0, (2, -1)).shape == (0, 2)
        assert len(listed_state(axes, changed_numbers(axes, 0)).orbitals) == 0


class TestExpectations:
    """Theory needs nothing but the occupation: it holds for any listed state."""

    RATIO = (1.0, 1.5)
    SETS = ([(0, 0), (1, 0), (0, 1), (2, -1), (-1, 1)], [(0, 0), (3, 0), (0, -2)])

    def system(self, sets=SETS) -> System:
        waves = arrays(sets, 2)
        return with_occupations(make_system(self.RATIO, [len(part) for part in waves]), waves)

    def test_pair_correlation_and_energy(self):
        system = self.system()
        grid = separation_grid(system, 5)
        found = expected(system, grid)["pair_correlation"]
        for row, waves in zip((0, 2), arrays(self.SETS, 2), strict=True):
            exact = pair_density.bin_averages([waves], system.sides, grid.edges)
            assert found[row] == pytest.approx(exact, abs=1e-9)
        assert found[1] == pytest.approx(np.ones(5))
        energies = [
            spinors.wave_energies(waves, system.sides).sum() for waves in arrays(self.SETS, 2)
        ]
        assert energy.expected(system) == pytest.approx(energies)

    def test_a_displaced_state_looks_like_the_ground_state(self):
        """Positions do not know of a common wave vector; its energy and wave vector tell."""
        ground = make_system(self.RATIO, (9, 5))
        moved = with_occupations(ground, [changed_numbers(ground.axes, n, (2, -1)) for n in (9, 5)])
        grid = separation_grid(ground, 6)
        assert expected(moved, grid)["pair_correlation"] == pytest.approx(
            expected(ground, grid)["pair_correlation"], abs=1e-12
        )
        assert (energy.expected(moved) > 2 * energy.expected(ground)).all()

    def test_drawn_positions_follow_the_listed_orbitals_and_no_others(self):
        system = self.system()
        grid = separation_grid(system, 4)
        snapshots = draw(system, 6000, seed=7301)
        positions = positions_of(snapshots, 0, system.sides)
        found = bin_counts(pair_separations(positions, None, system.sides), grid.edges)
        other = self.system(([(0, 0), (1, 0), (0, 1), (0, -1), (-1, 1)], self.SETS[1]))
        exact, wrong = (
            grid.ideal[0] * expected(part, grid)["pair_correlation"][0] for part in (system, other)
        )
        assert hotelling_p_value(found, exact) > FAMILY_ALPHA
        assert hotelling_p_value(found, wrong) < 1e-9


class TestAgainstListing:
    @pytest.mark.parametrize(("sides", "sets"), STATES)
    def test_all_numbers(self, sides, sets):
        up, down = arrays(sets, len(sides))
        oracle = spinors.listed_state((up, down), list(sides))
        found = describe(sides, sets)
        assert found.energy == pytest.approx(oracle.energy, rel=1e-13)
        assert found.wave_vector == pytest.approx(oracle.wave_vector, abs=1e-12)
        assert found.degeneracy == oracle.same_energy
        assert describe(sides, sets[::-1]).degeneracy == oracle.same_energy

    @pytest.mark.parametrize("ratio", [(1.0,), (1.0, 1.0), (1.0, 1.5), (1.0, 1.5, 1.75)])
    def test_states_drawn_at_random(self, ratio):
        rng = np.random.default_rng(5100 + len(ratio))
        reach = 1 if len(ratio) == 3 else 2  # the listing grows fast
        near = np.array(list(product(range(-reach, reach + 1), repeat=len(ratio))))
        for _ in range(12):
            sizes = rng.integers(1, 3, size=2)
            sets = [near[rng.choice(len(near), size, replace=False)] for size in sizes]
            oracle = spinors.listed_state((sets[0], sets[1]), list(ratio))
            found = describe(ratio, sets)
            assert (found.degeneracy, found.energy) == (
                oracle.same_energy,
                pytest.approx(oracle.energy),
            )

    def test_three_components_are_one_product(self):
        """The states of three components: those of two, times those of the third, by energy."""
        one, two, three = [(1,), (0,)], [(2,)], [(0,), (-1,)]
        reach = 3
        singles = [(m,) for m in range(-reach, reach + 1)]
        pairs = [(a, b) for a in singles for b in singles if a < b]
        total = squares(np.array(one + two + three))
        energies = [
            [squares(np.array(part)) for part in group]
            for group in (pairs, [(m,) for m in singles], pairs)
        ]
        brute = sum(sum(parts) == total for parts in product(*energies))
        assert total < reach**2
        assert describe((1.7,), (one, two, three)).degeneracy == brute

    @pytest.mark.parametrize("twist", [(0.5, -0.5), (0.25, 0.25), (0.3, -0.11), (0.0, 0.2)])
    def test_a_twist_moves_everything(self, twist):
        """All sets of two waves, listed here with the shifted wave numbers."""
        sides, chosen = np.array([1.0, 1.5]), np.array([(0, 0), (1, -1)])
        waves = np.array(list(product(range(-4, 5), repeat=2)))
        k = 2 * pi * (waves + np.array(twist)) / sides
        single = 0.5 * (k**2).sum(axis=1)
        pairs = np.add.outer(single, single)[np.triu_indices(len(single), k=1)]
        mine = 2 * pi * (chosen + np.array(twist)) / sides
        total = 0.5 * (mine**2).sum()
        found = describe(sides, [chosen], twist)
        assert found.energy == pytest.approx(total)
        assert found.wave_vector == pytest.approx(mine.sum(axis=0))
        assert found.degeneracy == np.count_nonzero(np.abs(pairs - total) < 1e-9 * total)
        assert found.ground_energy == pytest.approx(np.sort(single)[:2].sum())


class TestAgainstCombinatorics:
    @pytest.mark.parametrize(
        ("ratio", "populations"),
        [
            ((1.0,), (4, 3)),
            ((1.0, 1.0), (8, 3)),
            ((1.0, 1.0), (11, 10, 2)),
            ((1.0, 1.5), (6, 5)),
            ((1.0, 1.0, 1.0), (40, 25)),
            ((1.0, 1.0, 1.0), (500, 4)),
            ((1.0, 1.5, 1.75), (30, 11)),
        ],
    )
    def test_open_ground_shells(self, ratio, populations):
        """D!/(v!(D − v)!) of each component, v particles in D orbitals of the last level."""
        axes = [Periodic(0.9 * side) for side in ratio]
        states = [GroundState(enumerate_orbitals(axes, n), n) for n in populations]
        sets = [state.orbitals.numbers[: state.population] for state in states]
        found = describe_state(axes, sets)
        ways = 1
        for state in states:
            ways *= comb(state.degeneracy, state.valence)
        assert found.degeneracy == ways
        assert found.energy == pytest.approx(found.ground_energy, rel=1e-13)

    @pytest.mark.parametrize(
        ("dimension", "population", "displaced"),
        [(1, 9, (2,)), (1, 21, (3,)), (2, 21, (1, 0)), (2, 13, (1, 2)), (3, 7, (1, 1, 0))],
    )
    def test_displaced_closed_shells(self, dimension, population, displaced):
        axes = [Periodic(1.3)] * dimension
        waves = changed_numbers(axes, population, displaced)
        exact = ways_by_polynomials(population, dimension, squares(waves))[squares(waves)]
        found = describe_state(axes, [waves])
        assert found.degeneracy == exact
        assert found.wave_vector == pytest.approx(2 * pi / 1.3 * population * np.array(displaced))
        moved = 0.5 * population * (2 * pi / 1.3) ** 2 * sum(part**2 for part in displaced)
        assert found.energy - found.ground_energy == pytest.approx(moved)

    def test_two_displaced_components(self):
        axes = [Periodic(1.0)] * 2
        sets = [changed_numbers(axes, 13, (1, 0)), changed_numbers(axes, 9, (0, 1))]
        lowest = [squares(changed_numbers(axes, n)) for n in (13, 9)]
        total = sum(squares(waves) for waves in sets)
        one = ways_by_polynomials(13, 2, total - lowest[1])
        two = ways_by_polynomials(9, 2, total - lowest[0])
        exact = sum(ways * two[total - part] for part, ways in one.items())
        assert exact > 2**32
        assert describe_state(axes, sets).degeneracy == exact

    def test_closed_shells_stand_alone(self):
        assert describe((1.0, 1.5), ([(0, 0)], [(0, 0), (0, 1), (0, -1)])).degeneracy == 1
        assert describe((3.0,), ([(0,)], [(0,)])).energy == 0.0
        assert describe((3.0,), ([(0,)], [(0,)])).degeneracy == 1

    def test_counting_is_given_up_where_it_would_not_end(self, monkeypatch):
        """Many particles far from the ground state; then a bound lowered until it bites."""
        many = [(m, n) for m in range(20) for n in range(20)]
        found = describe((1.0, 1.234), (many, [(0, 0)]), (0.1, 0.3))
        assert found.degeneracy is None
        assert found.energy > found.ground_energy > 0
        assert describe((1.0, 1.0, 1.0), ([(900, 900, 900)],)).degeneracy is None
        chosen = ((1.0, 1.0), ([(0, 0), (2, 1), (3, 0), (-1, 2)], [(1, 1), (2, 0)]))
        assert describe(*chosen).degeneracy
        monkeypatch.setattr(listed_states, "MOST_STATES", 500)
        assert describe(*chosen).degeneracy is None


class TestNegativeControls:
    @pytest.mark.parametrize("place", [0, 1, 2])
    def test_another_orbital_is_told_apart(self, place):
        sides, sets = (1.0, 1.5), [(0, 0), (2, 1), (-1, 0)]
        other = [wave if i != place else (0, 3) for i, wave in enumerate(sets)]
        one, two = describe(sides, [sets]), describe(sides, [other])
        assert abs(one.energy - two.energy) > 1e-3 * one.energy
        assert np.abs(one.wave_vector - two.wave_vector).max() > 1.0
        assert one.ground_energy == two.ground_energy

    def test_energies_that_differ_by_little_are_different(self):
        """(5, 0) and (3, 4) have one energy in a square; not where a side is 10⁻⁹ longer."""
        assert describe((1.0, 1.0), ([(5, 0)],)).degeneracy == 12
        assert describe((1.0, 1.0 + 1e-9), ([(5, 0)],)).degeneracy == 2
        assert describe((1.0, 1.0 + 1e-13), ([(5, 0)],)).degeneracy == 12
