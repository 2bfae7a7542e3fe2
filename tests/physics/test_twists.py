"""Twisted boundaries: exact values at one twist and at many, and snapshots each with its own.

Statistical checks use fixed seeds; together they raise a false alarm with probability below
FAMILY_ALPHA, each with an equal share.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction
from itertools import pairwise
from math import pi, sin

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.integrate import quad
from scipy.stats import kstest, qmc, spearmanr, ttest_1samp

from pairmc.physics.gas import Gas
from pairmc.physics.grids import SeparationGrid, separation_grid
from pairmc.physics.snapshots import Snapshots
from pairmc.physics.system import System, build_system
from pairmc.physics.theory import energy
from pairmc.physics.theory.pair_correlation import at_twists, expected
from tests.oracles import enumeration, pair_density, twists
from tests.oracles.significance import hotelling_p_value
from tests.oracles.twists import own_mean_p_value, pair_counts
from tests.physics.gases import draw, make_sampler, shells

FAMILY_ALPHA = 1e-4
STATISTICAL_CHECKS = 36
ALPHA = FAMILY_ALPHA / STATISTICAL_CHECKS

NAMES = ("up", "down", "strange")
# Ensemble and T/T_F.
STATES = (
    ("canonical", 0.0),
    ("grand-canonical", 0.0),
    ("canonical", 0.3),
    ("grand-canonical", 0.3),
)
# Ratio of the sides, populations, a twist: nothing symmetric.
BOXES = (
    ((1.0,), (4, 3), (0.3,)),
    ((1.0, 1.5), (7, 4), (0.25, -0.1)),
    ((1.0, 1.5, 1.75), (3, 2), (0.4, -0.33, 0.05)),
)


def make(
    ratio: Sequence[float],
    populations: Sequence[int],
    state: tuple[str, float] = STATES[0],
    twist: tuple[float, ...] | str | None = "averaged",
) -> System:
    """Return a gas at T/T_F of its majority, at one twist or each snapshot with its own."""
    ensemble, reduced = state
    names = NAMES[: len(populations)]
    gas = Gas(len(ratio), names, tuple(populations), 0.83, ensemble=ensemble)
    fermi_energy = 0.5 * gas.fermi_wavenumbers[gas.majority] ** 2
    return build_system(replace(gas, thermal_energy=reduced * fermi_energy), tuple(ratio), twist)


def filling(
    system: System, part: int, twist: Sequence[float], averaged: bool = True
) -> twists.Filling:
    """Return the oracle's filling of one component."""
    free = "following" if averaged else "mean"
    law = free if system.gas.ensemble == "grand-canonical" else "fixed"
    population, T = system.gas.populations[part], system.gas.thermal_energy
    return twists.filled(system.sides, twist, population, T, law)


def oracle(
    system: System, grid: SeparationGrid, twist: Sequence[float], averaged: bool = True
) -> tuple[NDArray, NDArray]:
    """Return g (pair, separation) and the energy of each component from the oracle."""
    populations = system.gas.populations
    fillings = [filling(system, part, twist, averaged) for part in range(len(populations))]
    share = [found.population / n for found, n in zip(fillings, populations, strict=True)]
    rows = [
        fillings[i].pair_correlation(grid.edges, populations[i])
        if i == j
        else np.full(len(grid.edges) - 1, share[i] * share[j])
        for _, i, j in grid.pairs
    ]
    return np.array(rows), np.array([found.energy for found in fillings])


def one_by_one(system: System, grid: SeparationGrid, some: NDArray) -> NDArray:
    """Return `expected` of the system at each of some twists."""
    return np.array([expected(system.at(twist), grid)["pair_correlation"] for twist in some])


def some_twists(count: int, dimension: int) -> NDArray:
    """Return twists that cover all evenly, the same always."""
    return qmc.Sobol(dimension, seed=9).random(count) - 0.5


class TestOneTwist:
    @pytest.mark.parametrize(("ratio", "populations", "twist"), BOXES)
    @pytest.mark.parametrize("state", [STATES[0], *STATES[2:]])
    def test_expectation_against_the_oracle(self, ratio, populations, twist, state):
        system = make(ratio, populations, state, twist)
        grid = separation_grid(system, 3)
        exact, energies = oracle(system, grid, twist, averaged=False)
        assert expected(system, grid)["pair_correlation"] == pytest.approx(exact, abs=1e-8)
        assert energy.expected(system) == pytest.approx(energies, rel=1e-9)

    @pytest.mark.parametrize(
        ("ratio", "population", "twist"),
        [((1, 1), 3, (-0.5, 0.25)), ((1, 1), 2, (-0.5, -0.5)), ((1, 1, 2), 4, (0.25, 0.25, 0.0))],
    )
    def test_open_shells_are_equal_mixtures(self, ratio, population, twist):
        sets = enumeration.occupied_sets(population, ratio, [Fraction(part) for part in twist])
        assert len(sets) > 1
        system = make(ratio, (population,), twist=twist)
        grid = separation_grid(system, 4)
        exact = pair_density.bin_averages(sets, system.sides, grid.edges)
        assert expected(system, grid)["pair_correlation"][0] == pytest.approx(exact, abs=1e-9)

    @pytest.mark.parametrize("population", [2, 4, 50])
    def test_even_ring_at_half_a_twist(self, population):
        """A determinant of N consecutive waves: g = 1 − [sin Nπx/(N sin πx)]², x = r/L."""
        system = make((1.0,), (population,), twist=(-0.5,))
        assert system.occupations[0].closed
        grid = separation_grid(system, 5)

        def hole(x: float) -> float:
            return (sin(population * pi * x) / (population * sin(pi * x))) ** 2 if x else 1.0

        edges = grid.edges / system.sides[0]
        exact = [
            1 - quad(hole, *edge, epsabs=1e-13, limit=300)[0] / (edge[1] - edge[0])
            for edge in pairwise(edges)
        ]
        assert expected(system, grid)["pair_correlation"][0] == pytest.approx(exact, abs=1e-10)
        # at fixed N each twist fills N consecutive waves, even or odd
        for n in (population, population + 1):
            averaged = make((1.0,), (n,))
            found = at_twists(averaged, separation_grid(averaged, 5), some_twists(16, 1))
            assert np.ptp(found, axis=0).max() < 1e-12

    @pytest.mark.parametrize("state", [STATES[0], *STATES[2:]])
    def test_no_twist_is_a_zero_and_mirrored_twists_are_alike(self, state):
        values = []
        for twist in (None, (0.0, 0.0), (0.2, -0.35), (-0.2, -0.35), (0.2, 0.35)):
            system = make((1.0, 1.5), (7, 4), state, twist)
            values.append(expected(system, separation_grid(system, 6))["pair_correlation"])
        assert np.array_equal(values[0], values[1])
        assert values[3] == pytest.approx(values[2], rel=1e-10)
        assert values[4] == pytest.approx(values[2], rel=1e-10)
        assert np.abs(values[2] - values[0]).max() > 1e-3


class TestManyTwists:
    @pytest.mark.parametrize(("ratio", "populations", "twist"), BOXES)
    @pytest.mark.parametrize("state", STATES)
    def test_against_the_oracle(self, ratio, populations, twist, state):
        system = make(ratio, populations, state)
        grid = separation_grid(system, 3)
        some = np.vstack([twist, some_twists(2, len(ratio))])[: 2 if len(ratio) == 3 else 3]
        pairs, energies = zip(*(oracle(system, grid, one) for one in some), strict=True)
        # cold values are exact, warm ones interpolated between twists
        close = 1e-5 if state[1] else 1e-9
        assert at_twists(system, grid, some) == pytest.approx(np.array(pairs), abs=close)
        assert one_by_one(system, grid, some) == pytest.approx(np.array(pairs), abs=1e-8)
        assert energy.at_twists(system, some) == pytest.approx(np.array(energies), rel=close)
        alone = np.array([energy.expected(system.at(one)) for one in some])
        assert alone == pytest.approx(np.array(energies), rel=1e-8)
        for part in range(len(populations)):
            mean = system.at(some[0]).occupations[part].mean()
            exact = filling(system, part, some[0], averaged=True).population
            assert mean.sum() == pytest.approx(exact, rel=1e-8)

    @pytest.mark.parametrize(
        ("ratio", "populations", "state"),
        [
            ((1.0,), (5,), ("grand-canonical", 0.005)),
            ((1.0,), (3, 1), ("grand-canonical", 0.0023)),
            ((1.0,), (7, 3), ("canonical", 0.0025)),
            ((2.0, 1.0), (2,), ("canonical", 0.0033)),
            ((1.0, 1.0), (1, 1), ("grand-canonical", 0.003)),
            ((1.0, 1.5), (6, 1), ("canonical", 0.12)),
            ((1.0, 1.0), (1,), ("canonical", 0.01)),
        ],
    )
    def test_nearly_cold_and_small_gases(self, ratio, populations, state):
        """Values that change within a narrow range of twists only are not missed."""
        system = make(ratio, populations, state)
        grid = separation_grid(system, 3)
        near = np.array([[0.499, 0.45, 0.002, 0.33], [0.003, 0.497, 0.496, 0.49]])
        some = np.vstack([near[: len(ratio)].T, some_twists(16, len(ratio))])
        found = at_twists(system, grid, some)
        assert found == pytest.approx(one_by_one(system, grid, some), abs=1e-5)
        alone = np.array([energy.expected(system.at(one)) for one in some])
        assert energy.at_twists(system, some) == pytest.approx(alone, rel=1e-5)

    def test_a_twist_that_fills_nothing(self):
        """One particle of a square: no |k| ≤ k_F at half a twist."""
        system = make((1.0, 1.0), (1,), ("grand-canonical", 0.0))
        grid = separation_grid(system, 3)
        empty, one = np.array([0.5, 0.5]), np.array([0.1, 0.0])
        assert np.all(at_twists(system, grid, np.array([empty, one])) == 0.0)
        assert energy.at_twists(system, empty[None]).tolist() == [[0.0]]
        assert energy.expected(system.at(empty)).tolist() == [0.0]
        assert np.all(expected(system.at(empty), grid)["pair_correlation"] == 0.0)


class TestKineticEnergy:
    @pytest.mark.parametrize(
        ("dimension", "population", "percent"),
        # averaged over twists at fixed N: recomputed independently to the digits shown
        [(2, 49, "+0.08"), (3, 33, "+0.24"), (3, 57, "+0.08")],
    )
    def test_fixed_population(self, dimension, population, percent):
        system = make((1.0,) * dimension, (population,))
        found = energy.at_twists(system, some_twists(8192, dimension)).mean()
        excess = 100 * (found / population / energy.bulk_per_particle(system.gas)[0] - 1)
        assert f"{excess:+.2f}" == percent
        points = {2: 80, 3: 24}[dimension]
        assert excess == pytest.approx(
            100 * twists.energy_excess(dimension, population, points), abs=3e-3
        )

    @pytest.mark.parametrize("ratio", [(1.0,), (1.0, 1.5), (1.0, 1.5, 1.75)])
    @pytest.mark.parametrize("reduced", [0.0, 0.25])
    def test_fixed_potential_gives_the_infinite_system(self, ratio, reduced):
        """Density and energy are exact: randomly moved grids of twists, Student's t of 40."""
        populations = (9, 4)
        system = make(ratio, populations, ("grand-canonical", reduced))
        exact = np.array(populations) * energy.bulk_per_particle(system.gas)
        moves = np.random.default_rng(17).random((40, 1, len(ratio)))
        lattice = twists.twist_grid({1: 6, 2: 6, 3: 4}[len(ratio)], len(ratio), 0.0)
        some = (lattice + moves) % 1.0 - 0.5
        if reduced:  # what a finite grid adds falls exponentially
            found = energy.at_twists(system, some[0]).mean(axis=0)
            assert found == pytest.approx(exact, rel=1e-4)
            return
        found = np.array([energy.at_twists(system, part).mean(axis=0) for part in some])
        assert np.all(ttest_1samp(found, exact).pvalue > ALPHA / 6)
        # the number of one component, and of pairs of two
        numbers = np.array(
            [[filling(system, 0, twist).population for twist in part] for part in some]
        ).mean(axis=1)
        if len(ratio) == 1:
            assert numbers == pytest.approx(np.full(40, populations[0]))
        else:
            assert ttest_1samp(numbers, populations[0]).pvalue > ALPHA / 6

    def test_unlike_components_at_fixed_potential(self):
        """⟨N²⟩/⟨N⟩² − 1 ≈ 9e-4 at 2D ⟨N⟩ = 49: recomputed independently to the digit shown."""
        system = make((1.0, 1.0), (49, 49), ("grand-canonical", 0.0))
        found = at_twists(system, separation_grid(system, 2), some_twists(8192, 2))
        assert f"{found[:, 1].mean() - 1:.0e}" == "9e-04"
        fixed = make((1.0, 1.0), (49, 49))
        row = at_twists(fixed, separation_grid(fixed, 2), some_twists(16, 2))[:, 1]
        assert np.all(row == 1.0)


class TestSnapshots:
    """Two unequal components in an uneven box, whole snapshots as units."""

    RATIO, POPULATIONS, SNAPSHOTS = (1.0, 1.5), (6, 3), 4000
    # of six equal bins the three next to contact are one
    FIRST = (0, 3, 4, 5)

    def drawn(self, state: tuple[str, float], seed: int) -> tuple[System, Snapshots]:
        system = make(self.RATIO, self.POPULATIONS, state)
        return system, draw(system, self.SNAPSHOTS, seed)

    def ideal(self, system: System, edges: NDArray) -> NDArray:
        """Return the pairs of a snapshot in each bin at g = 1 (pair, bin)."""
        first, second = self.POPULATIONS
        weights = [0.5 * first**2, first * second, 0.5 * second**2]
        return np.outer(weights, shells(2, edges) / np.prod(system.sides))

    def exact(self, system: System, grid: SeparationGrid, some: NDArray) -> NDArray:
        """Return the package's mean pairs (snapshot, pair · bin) at each twist."""
        mean = at_twists(system, grid, some) * self.ideal(system, grid.edges)
        return np.add.reduceat(mean, self.FIRST, axis=2).reshape(len(some), -1)

    def counts(self, system: System, snapshots: Snapshots) -> tuple[SeparationGrid, NDArray]:
        grid = separation_grid(system, 6)
        edges = grid.edges[[*self.FIRST, 6]]
        return grid, pair_counts(snapshots.position, snapshots.component, system.sides, edges)

    @pytest.mark.parametrize("state", STATES)
    def test_pairs_given_the_twists_drawn(self, state):
        system, snapshots = self.drawn(state, seed=91)
        grid, counts = self.counts(system, snapshots)
        mean = self.exact(system, grid, snapshots.twist)
        assert np.all(counts.sum(axis=0) > 100)
        assert own_mean_p_value(counts, mean) > ALPHA
        if state[1] == 0:  # Controls: half a twist off, and the twist of another snapshot.
            aside = self.exact(system, grid, (snapshots.twist + 1.0) % 1.0 - 0.5)
            assert own_mean_p_value(counts, aside) < ALPHA
            assert own_mean_p_value(counts, np.roll(mean, 1, axis=0)) < ALPHA

    @pytest.mark.parametrize("state", STATES)
    def test_pairs_over_all_twists(self, state):
        """Expectations of the tests' own: listed waves at many twists, or images of the box."""
        system, snapshots = self.drawn(state, seed=92)
        grid, counts = self.counts(system, snapshots)
        edges = grid.edges[[*self.FIRST, 6]]
        gas, sides, T = system.gas, system.sides, system.gas.thermal_energy
        if gas.ensemble == "canonical":
            # a warm gas needs few twists; the error of a cold one is small beside the snapshots'
            some = twists.twist_grid(4, 2) if T else some_twists(512, 2)
            g = np.mean([oracle(system, replace(grid, edges=edges), x)[0] for x in some], axis=0)
        else:
            g = twists.following_pair_correlation(sides, gas.densities, T, edges)
        mean = (g * self.ideal(system, edges)).ravel()
        assert hotelling_p_value(counts, mean) > ALPHA
        if T == 0:  # Control: no twist at all.
            still = build_system(replace(gas, ensemble="canonical"), self.RATIO)
            wrong = expected(still, grid)["pair_correlation"]
            wrong = np.add.reduceat(wrong * self.ideal(system, grid.edges), self.FIRST, axis=1)
            assert hotelling_p_value(counts, wrong.ravel()) < ALPHA

    def test_structure_factor_given_the_twists_drawn(self):
        """|ρ(q)|²/N of oblique q: exchanged or mirrored axes are seen too."""
        system, snapshots = self.drawn(STATES[0], seed=93)
        transfers = ((1, 0), (0, 1), (1, 1), (1, -1), (1, 2), (1, -2))
        ups = snapshots.position[snapshots.component == 0].reshape(self.SNAPSHOTS, 6, 2)
        waves = np.exp(2j * pi * ups @ np.array(transfers).T)
        found = np.abs(waves.sum(axis=1)) ** 2 / 6

        def exact(some: NDArray) -> NDArray:
            return np.array(
                [
                    [state.structure_factor(transfer) for transfer in transfers]
                    for state in (filling(system, 0, twist) for twist in some)
                ]
            )

        assert own_mean_p_value(found, exact(snapshots.twist)) > ALPHA
        mirrored = snapshots.twist * [1, -1]
        for wrong in (mirrored, snapshots.twist[:, ::-1], snapshots.twist[::-1]):
            assert own_mean_p_value(found, exact(wrong)) < ALPHA

    def test_populations_follow_the_common_twist(self):
        """Fixed k_F: N is what the twist says, of both components, in every snapshot."""
        system, snapshots = self.drawn(STATES[1], seed=94)
        numbers = np.stack([(snapshots.component == part).sum(axis=1) for part in (0, 1)], axis=1)
        for part in (0, 1):
            listed = [len(filling(system, part, twist).waves) for twist in snapshots.twist]
            assert np.array_equal(numbers[:, part], listed)

    def test_equal_components_have_a_common_twist(self):
        """Fixed k_F: ⟨N_u N_d⟩ > ⟨N_u⟩⟨N_d⟩, not where each has its own twist."""
        system = make((1.0, 1.0), (5, 5), STATES[1])
        snapshots = draw(system, 8000, seed=97)
        numbers = np.stack([(snapshots.component == part).sum(axis=1) for part in (0, 1)], axis=1)
        cold = twists.cold_amplitude(2, system.gas.densities[0])
        mean = twists.number_correlation(system.sides, (cold, cold), 100 * system.sides[0])
        assert mean > 1.02
        together = numbers.prod(axis=1) / 25
        apart = numbers[:, 0] * np.roll(numbers[:, 1], 1) / 25
        assert ttest_1samp(together, mean).pvalue > ALPHA
        assert ttest_1samp(apart, mean).pvalue < ALPHA
        assert ttest_1samp(apart, 1.0).pvalue > ALPHA

    def test_numbers_of_a_warm_gas(self):
        system, snapshots = self.drawn(STATES[3], seed=95)
        some = some_twists(64, 2)
        for part, n in enumerate(self.POPULATIONS):
            numbers = (snapshots.component == part).sum(axis=1)
            fillings = [filling(system, part, twist) for twist in some]
            square = [f.population**2 + (f.mean * (1 - f.mean)).sum() for f in fillings]
            assert ttest_1samp(numbers, n).pvalue > ALPHA
            assert ttest_1samp(numbers**2, np.mean(square)).pvalue > ALPHA

    def test_twists_are_uniform_and_independent(self):
        drawn = draw(make((1.0, 1.5), (1, 1)), 20_000, seed=96).twist
        assert drawn.shape == (20_000, 2)
        assert drawn.min() >= -0.5
        assert drawn.max() < 0.5
        for axis in (0, 1):
            assert kstest(drawn[:, axis], "uniform", (-0.5, 1), method="asymp").pvalue > ALPHA
            assert spearmanr(drawn[:-1, axis], drawn[1:, axis]).pvalue > ALPHA
        assert spearmanr(drawn[:, 0], drawn[:, 1]).pvalue > ALPHA
        fixed = draw(make((1.0, 1.5), (2, 1), twist=(0.25, 0.0)), 3, seed=97)
        assert fixed.twist.size == 0

    @pytest.mark.parametrize("state", STATES)
    def test_three_and_four_snapshots_are_seven(self, state):
        system = make(self.RATIO, self.POPULATIONS, state)
        one, other = make_sampler(system, seed=98), make_sampler(system, seed=98)
        whole = one.draw(7)
        for part, rows in ((other.draw(3), slice(0, 3)), (other.draw(4), slice(3, 7))):
            width = part.component.shape[1]
            assert np.array_equal(part.twist, whole.twist[rows])
            assert np.array_equal(part.component, whole.component[rows, :width])
            assert np.array_equal(part.position, whole.position[rows, :width], equal_nan=True)
