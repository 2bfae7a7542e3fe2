"""The tally of pairs against a plain loop, and the bins.

One statistical check, fixed seed, a false alarm with probability FAMILY_ALPHA.
"""

from __future__ import annotations

from collections import Counter
from itertools import combinations

import numpy as np
import pytest

from pairmc.physics.grids import JOINT_BINS, separation_grid, shell_volumes
from pairmc.physics.observables import pair_correlation, registry
from pairmc.physics.observables.pair_correlation_settings import Settings
from pairmc.physics.snapshots import Snapshots
from pairmc.physics.system import System
from tests.oracles import shells
from tests.oracles.significance import hotelling_p_value
from tests.physics.gases import BRICK, FLAT, make_system

FAMILY_ALPHA = 1e-4

GASES = [((1,), (6, 3)), ((1,), (1,)), (FLAT, (7, 4, 2)), (BRICK, (5, 8, 3)), ((1, 1, 2), (1, 12))]


def random_snapshots(system: System, snapshots: int, seed: int) -> Snapshots:
    """Return uniform independent points, components in no order."""
    rng = np.random.default_rng(seed)
    gas = system.gas
    position = rng.random((snapshots, gas.particles, gas.dimension))
    component = np.repeat(np.arange(len(gas.populations), dtype=np.int8), gas.populations)
    return Snapshots(position, rng.permuted(np.tile(component, (snapshots, 1)), axis=1))


def count_plainly(snapshots: Snapshots, system: System, edges: np.ndarray) -> np.ndarray:
    """Return pairs (snapshot, pair, bin), one pair at a time, over all 3^d nearest images."""
    sides = np.array(system.sides)
    labels = system.gas.components
    rows = [(a, b) for a in range(len(labels)) for b in range(a, len(labels))]
    images = np.array(np.meshgrid(*[[-1, 0, 1]] * len(sides))).reshape(len(sides), -1).T * sides
    counts = np.zeros((len(snapshots.position), len(rows), len(edges) - 1), dtype=np.int64)
    for s, (position, component) in enumerate(zip(*snapshots[:2], strict=True)):
        for i, j in combinations(range(len(position)), 2):
            displacement = (position[i] - position[j]) * sides + images
            separation = np.sqrt((displacement**2).sum(axis=1)).min()
            assert np.abs(separation - edges).min() > 1e-12 * edges[-1]  # no pair on an edge
            inside = np.flatnonzero((edges[:-1] <= separation) & (separation < edges[1:]))
            row = rows.index(tuple(sorted((int(component[i]), int(component[j])))))
            counts[s, row, inside] += 1
    return counts


def tallied(snapshots: Snapshots, grid) -> dict:
    tallies = pair_correlation.empty(grid)
    pair_correlation.tally(snapshots, grid, tallies)
    return tallies


class TestTally:
    @pytest.mark.parametrize(("ratio", "populations"), GASES)
    @pytest.mark.parametrize("bins", [1, 9, 70])
    def test_equals_a_plain_loop(self, ratio, populations, bins):
        system = make_system(ratio, populations)
        grid = pair_correlation.grid(Settings(bins), system)
        snapshots = random_snapshots(system, 12, seed=1)
        plain = count_plainly(snapshots, system, grid.edges)
        tallies = tallied(snapshots, grid)
        assert np.array_equal(tallies["count"], plain.sum(axis=0))
        vectors = np.zeros((12, grid.joint_bins), dtype=np.int64)
        for s in range(12):
            np.add.at(vectors[s], grid.joint, plain[s])
        assert np.array_equal(tallies["moment_sum"], vectors.sum(axis=0))
        assert np.array_equal(tallies["moment_product"], vectors.T @ vectors)
        assert all(tally.dtype == np.int64 for tally in tallies.values())

    def test_adds_in_any_order_and_in_parts(self):
        system = make_system(FLAT, (7, 4, 2))
        grid = separation_grid(system, 9)
        snapshots = random_snapshots(system, 10, seed=2)
        whole = tallied(snapshots, grid)
        backward = Snapshots(*(part[::-1].copy() for part in snapshots))
        parts = pair_correlation.empty(grid)
        for cut in (slice(7, 10), slice(0, 0), slice(0, 7)):
            pair_correlation.tally(Snapshots(*(part[cut] for part in backward)), grid, parts)
        for name, tally in whole.items():
            assert np.array_equal(tally, parts[name])

    def test_shifted_bins_and_exchanged_labels_are_seen(self):
        system = make_system(FLAT, (7, 4, 2))
        grid = separation_grid(system, 9)
        snapshots = random_snapshots(system, 10, seed=3)
        count = tallied(snapshots, grid)["count"]
        shifted = count_plainly(snapshots, system, grid.edges + 0.1 * grid.edges[1])
        assert not np.array_equal(count, shifted.sum(axis=0))
        labels = np.array([1, 0, 2], dtype=np.int8)[snapshots.component]
        assert not np.array_equal(count, tallied(Snapshots(snapshots.position, labels), grid))

    def test_pairs_across_the_faces_of_the_box(self):
        """Known separations: minimum image along every axis, unequal sides."""
        system = make_system(FLAT, (2,))
        grid = separation_grid(system, 10)
        short, long = system.sides
        step = grid.edges[1]
        position = np.array(
            [
                [[0.02, 0.5], [0.98, 0.5]],  # 0.04 short
                [[0.5, 0.99], [0.5, 0.01]],  # 0.02 long
                [[0.0, 0.0], [0.0, 0.5]],  # half the long side: beyond the last bin
                [[0.0, 0.0], [0.47, 0.0]],  # 0.47 short, the last bin
            ]
        )
        snapshots = Snapshots(position, np.zeros((4, 2), dtype=np.int8))
        inside = Counter(int(r / step) for r in (0.04 * short, 0.02 * long, 0.47 * short))
        count = tallied(snapshots, grid)["count"][0]
        assert {b: n for b, n in enumerate(count.tolist()) if n} == dict(inside)

    def test_ideal_counts_are_those_of_independent_points(self):
        """Poisson numbers of uniform points: g = 1 with the densities' normalisation.

        For Poisson numbers the mean number of pairs is N̄²/2, so normalising by N(N − 1) instead
        is the bug that must be seen.
        """
        rng = np.random.default_rng(4)
        system = make_system(FLAT, (7, 4))
        grid = separation_grid(system, 4)
        vectors = []
        for _ in range(4000):
            numbers = rng.poisson((7, 4))
            position = rng.random((1, numbers.sum(), 2))
            component = np.repeat(np.arange(2, dtype=np.int8), numbers)[None]
            vectors.append(tallied(Snapshots(position, component), grid)["count"].ravel())
        ideal = grid.ideal
        assert hotelling_p_value(np.array(vectors), ideal.ravel()) > FAMILY_ALPHA
        pairs = ideal * np.array([6 / 7, 1.0, 3 / 4])[:, None]
        assert hotelling_p_value(np.array(vectors), pairs.ravel()) < FAMILY_ALPHA
        wrong = ideal[[2, 1, 0]]
        assert hotelling_p_value(np.array(vectors), wrong.ravel()) < FAMILY_ALPHA


class TestValues:
    def test_normalised_by_the_densities(self):
        system = make_system(FLAT, (7, 4))
        grid = separation_grid(system, 6)
        count = np.arange(18).reshape(3, 6)
        values = pair_correlation.values(count, 5, grid)
        volume = np.prod(system.sides)
        ball = np.pi * np.diff(grid.edges**2)
        pairs = np.array([49 / 2, 28, 16 / 2]) / volume
        assert values["pair_correlation"] == pytest.approx(count / 5 / np.outer(pairs, ball))
        second = np.array([7, 4, 4])[:, None] / volume
        assert values["exchange_hole"] == pytest.approx(second * (values["pair_correlation"] - 1))
        assert pair_correlation.mean_counts(values, grid) == pytest.approx(count / 5)

    def test_of_every_batch(self):
        grid = separation_grid(make_system(FLAT, (7, 4)), 6)
        counts = np.arange(36).reshape(2, 3, 6)
        together = pair_correlation.values(counts, np.array([5, 8])[:, None, None], grid)
        for b, snapshots in enumerate((5, 8)):
            alone = pair_correlation.values(counts[b], snapshots, grid)
            for name in pair_correlation.VARIABLES:
                assert np.array_equal(together[name][b], alone[name])

    def test_registry_names_the_modules(self):
        for name in registry.NAMES:
            assert name == registry.observable(name).NAME
            assert registry.theory(name).expected is not None


class TestGrid:
    @pytest.mark.parametrize(("ratio", "populations"), GASES)
    def test_bins_fill_the_largest_ball_in_the_box(self, ratio, populations):
        system = make_system(ratio, populations)
        grid = separation_grid(system, 13)
        half = 0.5 * min(system.sides)
        assert grid.edges == pytest.approx(np.linspace(0, half, 14))
        assert (grid.edges[0], grid.edges[-1], grid.bins) == (0.0, half, 13)
        volumes = [
            shells.shell_rule(len(ratio), a, b, 1.0)[1].sum()
            for a, b in zip(grid.edges[:-1], grid.edges[1:], strict=True)
        ]
        assert shell_volumes(len(ratio), grid.edges) == pytest.approx(volumes, rel=1e-12)
        densities = np.array(system.gas.populations) / np.prod(system.sides)
        assert grid.density_second == pytest.approx([densities[j] for _, _, j in grid.pairs])
        assert grid.scale == system.gas.fermi_wavenumbers[system.gas.majority]
        coordinates = grid.coordinates()
        assert coordinates["scaled_separation"].values == pytest.approx(
            grid.scale * coordinates["separation"].values
        )
        assert np.array_equal(coordinates["separation_bounds"].values[:, 1], grid.edges[1:])
        assert coordinates["pair"].values[0] == b"up-up"

    @pytest.mark.parametrize("bins", [1, 7, 80, 100, 101, 250])
    @pytest.mark.parametrize("populations", [(4,), (7, 4), (7, 4, 2)])
    def test_joint_bins_are_neighbours_of_one_pair(self, bins, populations):
        grid = separation_grid(make_system(FLAT, populations), bins)
        assert grid.joint.shape == (len(grid.pairs), bins)
        assert np.array_equal(np.unique(grid.joint), np.arange(grid.joint_bins))
        steps = np.diff(grid.joint.ravel())
        assert set(np.unique(steps)) <= {0, 1}
        assert np.all(np.diff(grid.joint[:, [0, -1]].ravel())[1::2] == 1)  # none spans two pairs
        assert grid.joint_bins <= max(JOINT_BINS, len(grid.pairs))
        if bins * len(grid.pairs) <= JOINT_BINS:
            assert grid.joint_bins == bins * len(grid.pairs)
        owners = [grid.blocks[row] for row in grid.joint]
        assert all(np.all(owner == pair) for pair, owner in enumerate(owners))
        values = np.random.default_rng(5).random(grid.joint.shape)
        sums = np.zeros(grid.joint_bins)
        np.add.at(sums, grid.joint, values)
        assert grid.joint_sums(values) == pytest.approx(sums)
