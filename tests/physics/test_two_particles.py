"""A singlet or triplet of two particles: exact values against the oracle, draws against both.

Statistical checks use fixed seeds; together they raise a false alarm with probability below
FAMILY_ALPHA, each with an equal share.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise, product
from math import pi

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.stats import chisquare

from pairmc.physics.theory.two_particles import pair_correlation, pair_correlation_at
from pairmc.physics.two_particles import TwoParticleState
from tests.oracles import spinors
from tests.oracles.significance import hotelling_p_value
from tests.physics.gases import shells

FAMILY_ALPHA = 1e-4
STATISTICAL_CHECKS = 23
ALPHA = FAMILY_ALPHA / STATISTICAL_CHECKS

ORACLE = {"singlet": "singlet", "triplet": "triplet 0"}
LABELS = ((0, 0), (0, 1), (1, 1))
THETAS = (0.0, 0.6, pi / 2, 2.5)

# Sides, two orbitals: steps of one and of several wavelengths, along one axis and along all.
BOXES = (
    ((1.3,), ((2,), (-1,))),
    ((1.0, 1.5), ((0, 0), (1, 0))),
    ((1.0, 1.5), ((1, 2), (1, -1))),
    ((1.0, 1.5, 1.75), ((1, 0, 1), (0, 2, 0))),
)
KINDS = ("singlet", "triplet")


def state(kind: str, waves: Sequence[Sequence[int]], theta: float = 0.0) -> TwoParticleState:
    return TwoParticleState(kind, np.array(waves, dtype=np.int64), theta)


def oracle(kind: str, waves: Sequence, theta: float, r: NDArray, sides: Sequence[float]) -> NDArray:
    """Return g of the three pairs of labels at displacements from the wave function."""
    pair = spinors.TwoParticles(ORACLE[kind], np.array(waves), theta)
    return np.array([spinors.two_particle_correlation(pair, r, sides, part) for part in LABELS])


def displacements(sides: Sequence[float], count: int = 17) -> NDArray:
    rng = np.random.default_rng(88)
    return rng.uniform(-1.0, 1.0, (count, len(sides))) * sides


def directions(dimension: int) -> tuple[NDArray, NDArray]:
    """Return unit vectors and weights: exact means over directions of smooth functions."""
    if dimension == 1:
        return np.array([[1.0], [-1.0]]), np.full(2, 0.5)
    angles = 2 * pi * np.arange(24) / 24
    circle = np.stack([np.cos(angles), np.sin(angles)], axis=1)
    if dimension == 2:
        return circle, np.full(24, 1 / 24)
    heights, weights = np.polynomial.legendre.leggauss(16)
    vectors = [(*(np.sqrt(1 - z * z) * part), z) for z, part in product(heights.tolist(), circle)]
    return np.array(vectors), np.repeat(weights, 24) / 48


def edges_of(sides: Sequence[float], bins: int = 4) -> NDArray:
    return np.linspace(0.0, 0.5 * min(sides), bins + 1)


class TestExactValues:
    @pytest.mark.parametrize(("sides", "waves"), BOXES)
    @pytest.mark.parametrize(("kind", "theta"), list(product(KINDS, THETAS)))
    def test_displacements_against_the_wave_function(self, kind, theta, sides, waves):
        r = displacements(sides)
        found = pair_correlation_at(state(kind, waves, theta), sides, r)
        assert found == pytest.approx(oracle(kind, waves, theta, r, sides), abs=1e-12)

    @pytest.mark.parametrize(("sides", "waves"), BOXES)
    @pytest.mark.parametrize("kind", KINDS)
    def test_bins_against_the_wave_function(self, kind, sides, waves):
        """The oracle averaged over directions and each bin by quadrature."""
        edges, (vectors, weights) = edges_of(sides), directions(len(sides))
        nodes, steps = np.polynomial.legendre.leggauss(8)
        exact = []
        for lower, upper in pairwise(edges):
            radii = 0.5 * (upper + lower) + 0.5 * (upper - lower) * nodes
            measure = steps * radii ** (len(sides) - 1)
            points = (radii[:, None, None] * vectors).reshape(-1, len(sides))
            values = oracle(kind, waves, 0.6, points, sides).reshape(3, len(radii), -1)
            exact.append(values @ weights @ measure / measure.sum())
        found = pair_correlation(state(kind, waves, 0.6), sides, edges)
        assert found == pytest.approx(np.array(exact).T, abs=1e-9)

    def test_two_particles_in_one_orbital(self):
        sides, waves = (1.0, 1.5), ((1, 2), (1, 2))
        r = displacements(sides)
        for theta in THETAS:
            found = pair_correlation_at(state("singlet", waves, theta), sides, r)
            assert found == pytest.approx(oracle("singlet", waves, theta, r, sides), abs=1e-12)
            assert found[1] == pytest.approx(np.ones(len(r)))
            binned = pair_correlation(state("singlet", waves, theta), sides, edges_of(sides))
            assert binned == pytest.approx(np.outer([0, 1, 0], np.ones(4)), abs=1e-12)

    @pytest.mark.parametrize(("sides", "waves"), BOXES)
    def test_identities(self, sides, waves):
        r, none = displacements(sides), np.zeros((1, len(sides)))
        for theta in THETAS:
            singlet, triplet = (state(kind, waves, theta) for kind in KINDS)
            one, other = (pair_correlation_at(part, sides, r) for part in (singlet, triplet))
            # a rotation does not change the singlet, nor the sum over labels of the triplet
            assert one == pytest.approx(pair_correlation_at(state("singlet", waves), sides, r))
            assert one[[0, 2]] == pytest.approx(0.0, abs=1e-15)
            unturned = pair_correlation_at(state("triplet", waves), sides, r)
            assert other.sum(axis=0) + other[1] == pytest.approx(unturned.sum(axis=0) + unturned[1])
            # equal mixture: one orbital for each component
            assert one[1] + unturned[1] == pytest.approx(2.0)
            assert pair_correlation_at(singlet, sides, none)[1] == pytest.approx(2.0)
            assert pair_correlation_at(triplet, sides, none) == pytest.approx(0.0, abs=1e-15)

    def test_a_triplet_turned_by_a_right_angle_is_seen_alike(self):
        found = pair_correlation(state("triplet", ((0,), (1,)), pi / 2), (2.0,), edges_of((2.0,)))
        assert found[1] == pytest.approx(0.0, abs=1e-15)
        # 1 − cos(2πr/L) averaged over a quarter of each half side
        ends = 2 * pi * edges_of((2.0,)) / 2.0
        exact = 1 - np.diff(np.sin(ends)) / np.diff(ends)
        assert found[0] == pytest.approx(exact)
        assert found[2] == pytest.approx(exact)


def drawn(
    kind: str, waves: Sequence, theta: float, snapshots: int, seed: int
) -> tuple[NDArray, NDArray]:
    """Return separations (snapshot, axis) as fractions of the sides, and which pair of labels."""
    found = state(kind, waves, theta).draw(np.random.default_rng(seed), snapshots)
    separation = found.position[:, 1] - found.position[:, 0]
    return separation, found.component.sum(axis=1)


def features(position: NDArray, pair: NDArray, step: NDArray) -> NDArray:
    """Return waves of the separation and of the first particle, and labels: (snapshot, feature)."""
    separation = position[:, 1] - position[:, 0]
    phase = 2 * pi * separation @ step
    single = 2 * pi * position[:, 0] @ step
    across = 2 * pi * separation[:, 0]
    columns = [np.cos(phase), np.sin(phase), np.cos(2 * phase), np.sin(3 * phase)]
    columns += [np.cos(single), np.sin(single), np.cos(single + phase), np.cos(across - 2 * phase)]
    seen = [pair == label for label in (0, 1, 2)]
    every = [*columns, *(column * part for column in columns[:1] for part in seen[::2])]
    return np.array([*every, seen[0], seen[2]], dtype=float).T


def expected_features(kind: str, theta: float) -> NDArray:
    """Return their means: ±½ for cos q·r, labels independent of positions."""
    sign = 1.0 if kind == "singlet" else -1.0
    alike = 0.0 if kind == "singlet" else 0.5 * np.sin(theta) ** 2
    return np.array([0.5 * sign, *[0.0] * 7, *[0.5 * sign * alike] * 2, alike, alike])


class TestDraws:
    @pytest.mark.parametrize(("sides", "waves"), BOXES)
    @pytest.mark.parametrize(("kind", "theta"), [("singlet", 0.6), ("triplet", 0.6)])
    def test_waves_and_labels(self, kind, theta, sides, waves):
        """8 checks; each would see a wrong sign, and the triplet half the angle."""
        found = state(kind, waves, theta).draw(np.random.default_rng(9200 + len(sides)), 20_000)
        pair = found.component.sum(axis=1)
        step = np.array(waves[0]) - np.array(waves[1])
        vectors = features(found.position, pair, step)
        exact = expected_features(kind, theta)
        varying = vectors.std(axis=0) > 0
        assert vectors[:, ~varying].mean(axis=0) == pytest.approx(exact[~varying])
        # where the step lies along the first axis alone, two features may be one
        independent = _independent(vectors[:, varying])
        chosen = np.flatnonzero(varying)[independent]
        assert hotelling_p_value(vectors[:, chosen], exact[chosen]) > ALPHA
        (other,) = {*KINDS} - {kind}
        assert hotelling_p_value(vectors[:, chosen], expected_features(other, theta)[chosen]) < 1e-9
        if kind == "triplet":
            half = expected_features(kind, 0.5 * theta)[chosen]
            assert hotelling_p_value(vectors[:, chosen], half) < 1e-9

    @pytest.mark.parametrize(("sides", "waves"), BOXES)
    @pytest.mark.parametrize(("kind", "theta"), [("singlet", 0.0), ("triplet", 0.7)])
    def test_pairs_in_bins(self, kind, theta, sides, waves):
        """8 checks: unordered pairs of each pair of labels, against ½ or 1 · Δv/V · g."""
        separation, pair = drawn(kind, waves, theta, 20_000, 9300 + len(sides))
        separation -= np.round(separation)
        radii = np.sqrt(((separation * sides) ** 2).sum(axis=1))
        edges = edges_of(sides)
        ideal = np.outer([0.5, 1.0, 0.5], shells(len(sides), edges)) / np.prod(sides)
        place = np.digitize(radii, edges) - 1
        inside = np.flatnonzero(place < len(edges) - 1)
        counted = np.zeros((len(radii), 3, len(edges) - 1))
        counted[inside, pair[inside], place[inside]] = 1.0
        counted = counted.reshape(len(radii), -1)
        rows = {
            other: (ideal * pair_correlation(state(other, waves, theta), sides, edges)).ravel()
            for other in KINDS
        }
        seen = counted.any(axis=0)
        assert rows[kind][~seen] == pytest.approx(0.0, abs=1e-15)
        assert hotelling_p_value(counted[:, seen], rows[kind][seen]) > ALPHA
        (other,) = {*KINDS} - {kind}
        assert hotelling_p_value(counted[:, seen], rows[other][seen]) < 1e-9

    @pytest.mark.parametrize(("kind", "seed"), [("singlet", 9401), ("triplet", 9402)])
    def test_separations_all_round_a_ring(self, kind, seed):
        """2 checks of the whole density 1 ± cos 2π·3u in 24 bins: no bin is favoured."""
        separation, _ = drawn(kind, ((2,), (-1,)), 0.0, 40_000, seed)
        counts = np.histogram(separation[:, 0] % 1.0, bins=24, range=(0.0, 1.0))[0]
        ends = np.linspace(0.0, 1.0, 25)
        waved = np.diff(np.sin(6 * pi * ends)) / (6 * pi)
        laws = {"singlet": 1 / 24 + waved, "triplet": 1 / 24 - waved}
        assert chisquare(counts, 40_000 * laws[kind]).pvalue > ALPHA
        (other,) = {*KINDS} - {kind}
        assert chisquare(counts, 40_000 * laws[other]).pvalue < 1e-12
        assert chisquare(counts).pvalue < 1e-12

    def test_one_orbital_leaves_both_anywhere(self):
        """2 checks: separations and positions are uniform."""
        found = state("singlet", ((3, 1), (3, 1)), 1.1).draw(np.random.default_rng(9501), 20_000)
        assert (found.component == [0, 1]).all()
        separation = (found.position[:, 1] - found.position[:, 0]) % 1.0
        for points in (separation, found.position[:, 1]):
            counts = np.histogram2d(*points.T, bins=6, range=[(0, 1), (0, 1)])[0]
            assert chisquare(counts.ravel()).pvalue > ALPHA

    @pytest.mark.parametrize("theta", THETAS)
    def test_a_singlet_is_seen_as_one_of_each_at_any_angle(self, theta):
        found = state("singlet", ((0,), (1,)), theta).draw(np.random.default_rng(5), 500)
        assert (found.component == [0, 1]).all()
        unturned = state("singlet", ((0,), (1,))).draw(np.random.default_rng(5), 500)
        assert np.array_equal(found.position, unturned.position)

    @pytest.mark.parametrize("theta", [pi / 2, -pi / 2, 1.5 * pi])
    def test_a_triplet_at_right_angles_is_seen_twice_in_one_component(self, theta):
        """3 checks: each component as often."""
        found = state("triplet", ((0,), (1,)), theta).draw(np.random.default_rng(9601), 4000)
        assert (found.component[:, 0] == found.component[:, 1]).all()
        assert chisquare(np.bincount(found.component[:, 0])).pvalue > ALPHA

    @pytest.mark.parametrize("theta", [0.0, pi, -pi])
    def test_a_triplet_unturned_or_turned_over_is_seen_as_one_of_each(self, theta):
        found = state("triplet", ((0,), (1,)), theta).draw(np.random.default_rng(5), 500)
        assert (found.component == [0, 1]).all()

    @pytest.mark.parametrize(("sides", "waves"), BOXES)
    @pytest.mark.parametrize("kind", KINDS)
    def test_shape_range_order_and_streams(self, kind, sides, waves):
        pair = state(kind, waves, 0.9)
        found = pair.draw(np.random.default_rng(7), 700)
        assert found.position.shape == (700, 2, len(sides))
        assert found.component.dtype == np.int8
        assert ((found.position >= 0) & (found.position < 1)).all()
        assert (np.diff(found.component, axis=1) >= 0).all()
        assert found.twist.size == 0
        # so many at a time changes nothing, nor does the order of the orbitals
        rng = np.random.default_rng(7)
        parts = [pair.draw(rng, count) for count in (300, 0, 400)]
        assert np.array_equal(np.concatenate([part.position for part in parts]), found.position)
        assert np.array_equal(np.concatenate([part.component for part in parts]), found.component)
        turned = state(kind, waves[::-1], 0.9).draw(np.random.default_rng(7), 700)
        assert np.array_equal(turned.position, found.position)


def _independent(vectors: NDArray) -> NDArray[np.int64]:
    """Return columns, the first of those that repeat or add up to others."""
    kept: list[int] = []
    for column in range(vectors.shape[1]):
        some = np.corrcoef(vectors[:, [*kept, column]], rowvar=False)
        if np.linalg.eigvalsh(np.atleast_2d(some))[0] > 1e-6:
            kept.append(column)
    return np.array(kept)
