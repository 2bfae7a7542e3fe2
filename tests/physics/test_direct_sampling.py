"""Snapshots against the law they are drawn from: whole snapshots, pairs, spacings, neighbours.

Every check has a fixed seed and each class of checks raises a false alarm with probability below
FAMILY_ALPHA, shared equally among its CHECKS. The same checks are then shown to reject planted
mistakes: no exchange hole, a wrong orbital, wrong images, exchanged components, snapshots mixed.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import norm, ttest_1samp

from pairmc.physics.grids import separation_grid
from pairmc.physics.observables import pair_correlation
from pairmc.physics.occupation.ground import GroundState
from pairmc.physics.snapshots import Snapshots
from pairmc.physics.system import System
from pairmc.physics.theory.pair_correlation import expected
from pairmc.statistics import Moments, hotelling, merge_for_test
from tests.oracles import enumeration, joint_density, pair_density, ring
from tests.oracles.significance import hotelling_p_value
from tests.physics.gases import (
    BRICK,
    FLAT,
    bin_counts,
    draw,
    make_sampler,
    make_system,
    pair_separations,
    positions_of,
    shells,
    with_wrong_orbital,
)

FAMILY_ALPHA = 1e-4


def uniform_points(snapshots: Snapshots, seed: int) -> Snapshots:
    """Return independent uniform points in place of the positions: no exchange hole."""
    rng = np.random.default_rng(seed)
    return Snapshots(rng.random(snapshots.position.shape), snapshots.component)


def mixed(snapshots: Snapshots) -> Snapshots:
    """Return snapshots in which every other particle comes from the next snapshot."""
    position = snapshots.position.copy()
    position[:, ::2] = np.roll(position[:, ::2], 1, axis=0)
    return Snapshots(position, snapshots.component)


def folded(snapshots: Snapshots) -> Snapshots:
    """Return snapshots whose last axis is folded: u and 1 − u are taken for the same place."""
    position = snapshots.position.copy()
    position[..., -1] = np.abs(2 * position[..., -1] - 1)
    return Snapshots(position, snapshots.component)


class TestWholeSnapshots:
    """All separations of a snapshot together, and the directions, against plain rejection."""

    CASES = (((1,), 2), ((1,), 3), (FLAT, 3), (BRICK, 2), (FLAT, 4), ((1,), 5))
    CHECKS = len(CASES)
    ALPHA = FAMILY_ALPHA / CHECKS
    PERMUTATIONS = int(1 / ALPHA)  # the smallest p-value is below ALPHA
    SIZE = 180

    @staticmethod
    def rejected(ratio: tuple, population: int, snapshots: int, rng: np.random.Generator):
        """Return snapshots by plain rejection; each fills one of the degenerate sets."""
        sides = make_system(ratio, (population,)).sides
        sets = enumeration.occupied_sets(population, ratio)
        shares = rng.multinomial(snapshots, np.full(len(sets), 1 / len(sets)))
        return np.concatenate(
            [
                joint_density.draw_by_rejection(waves, sides, share, rng)
                for waves, share in zip(sets, shares, strict=True)
                if share
            ]
        )

    def p_value(self, system: System, positions: np.ndarray, others: np.ndarray, seed: int):
        a, b = (joint_density.snapshot_features(x, system.sides) for x in (positions, others))
        rng = np.random.default_rng(seed)
        return ring.permutation_p_value(a, b, rng, self.PERMUTATIONS)

    @pytest.mark.parametrize(("ratio", "population"), CASES)
    def test_same_law_as_plain_rejection(self, ratio, population):
        rng = np.random.default_rng([41, len(ratio), population])
        system = make_system(ratio, (population,))
        drawn = positions_of(draw(system, self.SIZE, seed=42), 0, system.sides)
        others = self.rejected(ratio, population, self.SIZE, rng)
        assert self.p_value(system, drawn, others, seed=43) > self.ALPHA

    @pytest.mark.parametrize(("ratio", "population"), [((1,), 3), (FLAT, 3)])
    def test_a_wrong_orbital_is_seen(self, ratio, population):
        rng = np.random.default_rng(44)
        system = make_system(ratio, (population,))
        wrong = draw(with_wrong_orbital(system), self.SIZE, seed=45)
        drawn = positions_of(wrong, 0, system.sides)
        others = self.rejected(ratio, population, self.SIZE, rng)
        assert self.p_value(system, drawn, others, seed=46) < self.ALPHA

    def test_uniform_points_are_seen(self):
        rng = np.random.default_rng(47)
        system = make_system(FLAT, (4,))
        drawn = rng.random((self.SIZE, 4, 2)) * system.sides
        others = self.rejected(FLAT, 4, self.SIZE, rng)
        assert self.p_value(system, drawn, others, seed=48) < self.ALPHA


class TestPairs:
    """Pairs in bins of the separation, whole snapshots as units, two tests of each gas.

    The package's: its tally, its expectation, its covariance. The independent one: numpy counting,
    integrals of the pair density over shells, another Hotelling.
    """

    # Closed and open shells (features real and complex) of unequal populations.
    CASES = (
        ((1,), (21, 8)),
        ((1,), (5, 14)),
        (FLAT, (15, 7)),
        (FLAT, (8, 21)),
        ((1, 1), (3, 16)),
        (BRICK, (13, 6)),
        (BRICK, (12, 5)),
        ((1, 1, 1), (4, 19)),
    )
    CHECKS = 2 * len(CASES) + 4 + 2
    ALPHA = FAMILY_ALPHA / CHECKS
    SNAPSHOTS = 3000
    BINS = 12

    def package_p_value(self, snapshots: Snapshots, system: System, truth: System | None = None):
        """Return the package's global p-value of snapshots of `system` against `truth`."""
        grid = separation_grid(system, self.BINS)
        tallies = pair_correlation.empty(grid)
        pair_correlation.tally(snapshots, grid, tallies)
        count = len(snapshots.position)
        moments = Moments(count, tallies["moment_sum"], tallies["moment_product"])
        mean = grid.joint_sums(pair_correlation.mean_counts(expected(truth or system, grid), grid))
        return self._test(moments, mean, grid.blocks)

    @staticmethod
    def _test(moments: Moments, mean: np.ndarray, blocks: np.ndarray) -> float:
        groups = merge_for_test(moments.snapshots * mean, blocks, moments.snapshots)
        merged = np.array([mean[groups == g].sum() for g in range(groups.max() + 1)])
        return hotelling(moments.merged(groups), merged).p_value

    def independent_p_value(
        self, snapshots: Snapshots, ratio: tuple, populations: tuple, exchange: bool = True, **bug
    ) -> float:
        """Return the same from counting, enumeration and quadrature of the tests' own."""
        sides = make_system(ratio, populations).sides
        half = 0.5 * min(sides)
        # wide first bins, so that each expects 100 pairs; the last edge short of half the side, so
        # that no sum is fixed
        edges = half * np.array([0.0, 0.3, 0.45, 0.6, 0.75, 0.9, 0.97])
        ball = shells(len(ratio), edges) / np.prod(sides)
        parts = [positions_of(snapshots, part, sides) for part in (0, 1)]
        counts = [
            bin_counts(pair_separations(*pair, sides, **bug), edges)
            for pair in ((parts[0], None), (parts[0], parts[1]), (parts[1], None))
        ]
        means = [
            0.5 * n * n * ball * (self.brute(ratio, n, edges, sides) if exchange else 1.0)
            for n in populations
        ]
        means.insert(1, populations[0] * populations[1] * ball)
        mean = np.concatenate(means)
        kept = len(snapshots.position) * mean >= 100
        assert kept.sum() >= 14
        return hotelling_p_value(np.concatenate(counts, axis=1)[:, kept], mean[kept])

    @staticmethod
    def brute(ratio: tuple, population: int, edges: np.ndarray, sides: tuple) -> np.ndarray:
        sets = enumeration.occupied_sets(population, ratio)
        return pair_density.bin_averages(sets, sides, edges)

    @pytest.mark.parametrize(("ratio", "populations"), CASES)
    def test_of_sampled_gases(self, ratio, populations):
        system = make_system(ratio, populations)
        snapshots = draw(system, self.SNAPSHOTS, seed=51)
        assert self.package_p_value(snapshots, system) > self.ALPHA
        assert self.independent_p_value(snapshots, ratio, populations) > self.ALPHA

    @pytest.mark.parametrize(("ratio", "population"), [((1,), 2), ((1,), 3), (FLAT, 3), (BRICK, 2)])
    def test_against_the_whole_joint_density(self, ratio, population):
        """The chance of each bin by integrating |det|² over all particles."""
        system = make_system(ratio, (population,))
        snapshots = draw(system, 20_000, seed=52)
        edges = 0.5 * min(system.sides) * np.array([0.0, 0.4, 0.7, 0.97])
        pairs = population * (population - 1) // 2
        chances = np.mean(
            [
                joint_density.pair_bin_probabilities(waves, system.sides, edges)
                for waves in enumeration.occupied_sets(population, ratio)
            ],
            axis=0,
        )
        positions = positions_of(snapshots, 0, system.sides)
        counts = bin_counts(pair_separations(positions, None, system.sides), edges)
        assert hotelling_p_value(counts, pairs * chances) > self.ALPHA
        flat = pairs * shells(len(ratio), edges) / np.prod(system.sides)
        assert hotelling_p_value(counts, flat) < self.ALPHA

    @pytest.mark.parametrize(("ratio", "populations"), [(FLAT, (15, 7)), (BRICK, (12, 5))])
    def test_planted_mistakes_are_seen(self, ratio, populations):
        """By both tests, each of: no exchange, a wrong orbital, folding, mixing, labels, axes."""
        system = make_system(ratio, populations)
        right = draw(system, self.SNAPSHOTS, seed=53)
        exchanged = Snapshots(right.position, np.flip(right.component, axis=1).copy())
        turned = Snapshots(right.position[..., ::-1].copy(), right.component)
        for planted in (
            uniform_points(right, seed=54),
            draw(with_wrong_orbital(system), self.SNAPSHOTS, seed=55),
            folded(right),
            mixed(right),
            exchanged,
            turned,
        ):
            if planted is not exchanged:  # other numbers of pairs, a covariance without rank
                assert self.independent_p_value(planted, ratio, populations) < self.ALPHA
            assert self.package_p_value(planted, system) < self.ALPHA
        assert self.independent_p_value(right, ratio, populations, exchange=False) < self.ALPHA
        assert self.independent_p_value(right, ratio, populations, wrap=False) < self.ALPHA
        wrong_truth = make_system(ratio, populations[::-1])
        assert self.package_p_value(right, system, wrong_truth) < self.ALPHA

    def test_one_filling_for_all_snapshots_is_seen(self):
        """Control: a cube's open shell where every snapshot has the same degenerate filling."""
        system = make_system((1, 1, 1), (3, 1))
        state = system.occupations[0]
        numbers = state.orbitals.numbers[[0, 3, 4]]  # k = 0 and an opposite pair
        assert np.all(numbers[1] == -numbers[2])
        orbitals = replace(
            state.orbitals,
            numbers=numbers,
            energies=np.zeros(3),
            level=np.zeros(3, dtype=np.int64),
        )
        frozen = replace(system, occupations=(GroundState(orbitals, 3), system.occupations[1]))
        right, wrong = (draw(one, 12_000, seed=56) for one in (system, frozen))
        assert self.package_p_value(right, system) > self.ALPHA
        assert self.package_p_value(wrong, system) < self.ALPHA

    def test_many_components(self):
        system = make_system(FLAT, (9, 4, 6))
        snapshots = draw(system, self.SNAPSHOTS, seed=57)
        assert self.package_p_value(snapshots, system) > self.ALPHA
        assert self.package_p_value(mixed(snapshots), system) < self.ALPHA


class TestRing:
    """21 fermions on a ring and the eigenvalue angles of random unitary matrices.

    The two laws are one: Diaconis & Evans, Trans. AMS 353, 2615 (2001); the matrices are scipy's
    (Mezzadri, Notices AMS 54, 592, 2007).
    """

    CHECKS = 3
    ALPHA = FAMILY_ALPHA / CHECKS
    PERMUTATIONS = int(1 / ALPHA)
    SIZE = 150

    @staticmethod
    def angles(population: int, snapshots: int, seed: int) -> np.ndarray:
        system = make_system((1,), (population,))
        return 2 * np.pi * draw(system, snapshots, seed).position[:, :, 0]

    @staticmethod
    def spacings(angles: np.ndarray) -> np.ndarray:
        """All spacings of a snapshot, ordered by size."""
        return np.sort(ring.spacings(angles), axis=1)

    @staticmethod
    def separations(angles: np.ndarray) -> np.ndarray:
        """Pairs in bins of the separation up to four mean spacings."""
        return ring.separation_histograms(angles, np.linspace(0.0, 4.0, 17))

    @pytest.mark.parametrize("features", [spacings, separations])
    def test_against_random_unitary_matrices(self, features: Callable):
        rng = np.random.default_rng(61)
        matrices = features(ring.ring_angles(21, self.SIZE, rng))
        drawn = features(self.angles(21, self.SIZE, seed=62))
        independent = features(ring.poisson_angles(21, self.SIZE, rng))
        assert ring.permutation_p_value(drawn, matrices, rng, self.PERMUTATIONS) > self.ALPHA
        assert ring.permutation_p_value(drawn, independent, rng, self.PERMUTATIONS) < self.ALPHA

    def test_spacing_variance(self):
        """0.17954786 at N = 21, recomputed independently from the definition; infinite value
        0.17999, Bornemann, Markov Process. Relat. Fields 16, 803 (2010)."""
        squares = (ring.spacings(self.angles(21, 12_000, seed=63)) ** 2).mean(axis=1)
        batches = squares.reshape(40, 300).mean(axis=1) - 1.0
        assert ttest_1samp(batches, 0.17954786).pvalue > self.ALPHA
        # Controls: an orbital out of place, and independent points.
        system = with_wrong_orbital(make_system((1,), (21,)))
        wrong = 2 * np.pi * draw(system, 4000, seed=64).position[:, :, 0]
        independent = ring.poisson_angles(21, 4000, np.random.default_rng(65))
        for angles in (wrong, independent):
            squares = (ring.spacings(angles) ** 2).mean(axis=1)
            batches = squares.reshape(40, 100).mean(axis=1) - 1.0
            assert ttest_1samp(batches, 0.17954786).pvalue < self.ALPHA


class TestNeighbours:
    """Mean distance to the nearest neighbour at unit density, a many-body number.

    0.6491277 (square, N = 49) and 0.6530301 (cube, N = 57), recomputed independently to the digits
    shown; the functions are those of Scardicchio, Zachary & Torquato, PRE 79, 041108 (2009).
    Independent points have 0.5 and 0.55396.
    """

    CASES = ((2, 49, 0.6491277, 0.5), (3, 57, 0.6530301, 0.55396))
    ALPHA = FAMILY_ALPHA / len(CASES)

    @staticmethod
    def batch_means(positions: np.ndarray, sides: tuple, wrap: bool = True) -> np.ndarray:
        """Return the mean nearest-neighbour distance of 40 batches, by looking at all pairs."""
        count, particles, _ = positions.shape
        one, two = np.triu_indices(particles, k=1)
        distance = np.full((count, particles, particles), np.inf)
        separations = pair_separations(positions, None, sides, wrap)
        distance[:, one, two] = separations
        distance[:, two, one] = separations
        return distance.min(axis=2).mean(axis=1).reshape(40, -1).mean(axis=1)

    @pytest.mark.parametrize(("dimension", "population", "exact", "independent"), CASES)
    def test_mean_distance(self, dimension, population, exact, independent):
        system = make_system((1,) * dimension, (population,), density=1.0)
        snapshots = draw(system, 1200, seed=71)
        positions = snapshots.position * system.sides
        means = self.batch_means(positions, system.sides)
        assert ttest_1samp(means, exact).pvalue > self.ALPHA
        assert ttest_1samp(means, independent).pvalue < self.ALPHA
        for planted in (
            self.batch_means(positions, system.sides, wrap=False),
            self.batch_means(mixed(snapshots).position * system.sides, system.sides),
            self.batch_means(folded(snapshots).position * system.sides, system.sides),
            self.batch_means(uniform_points(snapshots, 72).position * system.sides, system.sides),
        ):
            assert ttest_1samp(planted, exact).pvalue < self.ALPHA


class TestIndependence:
    """Components do not know of each other, nor snapshots; single particles are uniform."""

    CHECKS = 8
    ALPHA = FAMILY_ALPHA / CHECKS

    @staticmethod
    def density_modes(snapshots: Snapshots, part: int) -> np.ndarray:
        """Return Σ_j e^{iq·r_j} of one component for the shortest q along each axis."""
        positions = snapshots.position[:, snapshots.component[0] == part]
        return np.exp(2j * np.pi * positions).sum(axis=1)

    @pytest.mark.parametrize(("ratio", "populations"), [(FLAT, (15, 7)), (BRICK, (6, 13))])
    def test_opposite_components(self, ratio, populations):
        """S_ss' = 0 for s ≠ s': products of density modes have mean zero."""
        snapshots = draw(make_system(ratio, populations), 4000, seed=81)
        first, second = (self.density_modes(snapshots, part) for part in (0, 1))
        products = first * second.conj()
        vectors = np.concatenate([products.real, products.imag], axis=1)
        zero = np.zeros(vectors.shape[1])
        assert hotelling_p_value(vectors, zero) > self.ALPHA
        # Control: a second component that follows the first weakly, one particle in common.
        shared = products + np.exp(2j * np.pi * snapshots.position[:, 0]) * first.conj()
        vectors = np.concatenate([shared.real, shared.imag], axis=1)
        assert hotelling_p_value(vectors, zero) < self.ALPHA

    @pytest.mark.parametrize(("ratio", "population"), [(FLAT, 15), (FLAT, 8), ((1,), 6)])
    def test_successive_snapshots(self, ratio, population):
        """Correlation of |ρ(q)|² with that of the next snapshot, r ~ N(0, 1/M)."""
        snapshots = draw(make_system(ratio, (population,)), 4000, seed=82)
        scalar = np.abs(self.density_modes(snapshots, 0)[:, 0]) ** 2
        assert self.successive_p_value(scalar) > self.ALPHA
        assert self.successive_p_value(np.repeat(scalar[:2000], 2)) < self.ALPHA
        carried = scalar + 0.2 * np.roll(scalar, 1)
        assert self.successive_p_value(carried) < self.ALPHA

    @staticmethod
    def successive_p_value(scalar: np.ndarray) -> float:
        correlation = np.corrcoef(scalar[:-1], scalar[1:])[0, 1]
        return float(2 * norm.sf(abs(correlation) * np.sqrt(len(scalar) - 1)))

    @pytest.mark.parametrize("population", [15, 8])
    def test_every_place_in_the_order_drawn_is_uniform(self, population):
        """The first and the last particle drawn are as uniform as all others."""
        snapshots = draw(make_system(FLAT, (population,)), 4000, seed=83)
        ends = snapshots.position[:, [0, -1]].reshape(4000, 4)
        vectors = np.concatenate([np.cos(2 * np.pi * ends), np.sin(2 * np.pi * ends)], axis=1)
        assert hotelling_p_value(vectors, np.zeros(8)) > self.ALPHA
        # Control: positions pushed a little towards one face.
        ends = ends**1.2
        vectors = np.concatenate([np.cos(2 * np.pi * ends), np.sin(2 * np.pi * ends)], axis=1)
        assert hotelling_p_value(vectors, np.zeros(8)) < self.ALPHA

    def test_batches(self):
        """Snapshots of the same number in two batches are not correlated."""
        system = make_system(FLAT, (9,))
        one, two = (make_sampler(system, seed=84, batch=b).draw(4000) for b in (0, 1))
        first, second = (np.abs(self.density_modes(s, 0)[:, 0]) ** 2 for s in (one, two))
        correlation = np.corrcoef(first, second)[0, 1]
        assert 2 * norm.sf(abs(correlation) * np.sqrt(4000)) > self.ALPHA
