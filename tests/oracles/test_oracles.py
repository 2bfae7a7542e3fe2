"""The oracles against each other, against closed forms, and against numbers from outside.

Statistical checks use fixed seeds. Together they raise a false alarm with probability below
FAMILY_ALPHA: each gets an equal share.
"""

from __future__ import annotations

from fractions import Fraction
from math import comb, factorial

import numpy as np
import pytest
from scipy.special import jv, spherical_jn
from scipy.stats import kstest

from tests.oracles import (
    enumeration,
    joint_density,
    neighbours,
    pair_density,
    ring,
    running_integral,
    shells,
)
from tests.oracles.significance import hotelling_p_value

FAMILY_ALPHA = 1e-4
STATISTICAL_CHECKS = 8
ALPHA = FAMILY_ALPHA / STATISTICAL_CHECKS

THIRD = (Fraction(1), Fraction(3, 2), Fraction(7, 4))

# Closed and open shells, one to three dimensions, equal and unequal sides: ratio and population.
GASES = [
    ((1,), 7),
    ((1, 1), 13),
    ((1, Fraction(3, 2)), 8),
    ((1, 1, 1), 19),
    (THIRD, 9),
    ((1, 1, 2), 5),
]


def box(ratio: tuple) -> list[float]:
    """Return sides of no special size in this ratio."""
    return [2.3 * float(side) for side in ratio]


class TestEnumeration:
    # Closed shells of a periodic box at zero twist, recomputed independently from the definition.
    SQUARE = (1, 5, 9, 13, 21, 25, 29, 37, 45, 49, 57, 61, 69, 81, 89, 97, 101, 109, 113, 121)
    CUBE = (1, 7, 19, 27, 33, 57, 81, 93, 123, 147, 171, 179, 203, 251, 257, 305, 341, 365, 389)
    CUBE += (437, 461, 485, 515, 587, 619)

    def test_closed_shells_of_square_and_cube(self):
        assert tuple(enumeration.closed_shells([1, 1], 121)) == self.SQUARE
        assert tuple(enumeration.closed_shells([1, 1, 1], 619)) == self.CUBE

    def test_closed_shells_of_a_ring_are_odd_at_zero_twist_and_even_at_half(self):
        assert enumeration.closed_shells([1], 51) == list(range(1, 52, 2))
        half = [Fraction(1, 2)]
        assert enumeration.closed_shells([1], 50, half) == list(range(2, 51, 2))

    def test_levels_of_unequal_sides_by_hand(self):
        # Ratio 1 : 1 : 2: energies x² + y² + z²/4 = 0, 1/4, 1 (four of the plane and z = ±2), 5/4.
        found = enumeration.levels([1, 1, 2], 17)
        assert [(energy, len(waves)) for energy, waves in found] == [
            (Fraction(0), 1),
            (Fraction(1, 4), 2),
            (Fraction(1), 6),
            (Fraction(5, 4), 8),
        ]

    @pytest.mark.parametrize(
        ("ratio", "population", "number"),
        [((1, 1), 3, comb(4, 2)), ((1, 1, 1), 4, comb(6, 3)), ((1, 1, 2), 6, comb(6, 3))],
    )
    def test_open_shells_list_every_filling_once(self, ratio, population, number):
        sets = enumeration.occupied_sets(population, ratio)
        distinct = {frozenset(map(tuple, waves.tolist())) for waves in sets}
        assert len(sets) == len(distinct) == number
        energies = {
            sum(
                Fraction(int(m)) ** 2 / Fraction(side) ** 2
                for wave in waves
                for m, side in zip(wave, ratio, strict=True)
            )
            for waves in sets
        }
        assert len(energies) == 1

    def test_too_many_sets_are_refused(self):
        with pytest.raises(ValueError, match="too many to list"):
            enumeration.occupied_sets(45, [1, 1, 1])

    @pytest.mark.parametrize(
        ("dimension", "population", "percent"),
        [(2, 49, "+0.489"), (3, 33, "-0.502"), (3, 57, "+1.574")],
    )
    def test_kinetic_energy_against_the_infinite_gas(self, dimension, population, percent):
        # At zero twist; recomputed independently from the definition to the digits shown.
        (waves,) = enumeration.occupied_sets(population, [1] * dimension)
        error = _kinetic_error(enumeration.mean_square_wavenumber(waves, [1.0] * dimension), waves)
        assert f"{100 * error:+.3f}" == percent

    def test_kinetic_energy_averaged_over_twists(self):
        # +0.08 % for 49 particles of a square (recomputed independently to the digits shown);
        # the average over twists is taken at the centres of a grid over one octant's square.
        errors = []
        for i in range(8):
            for j in range(8):
                twist = [Fraction(2 * i + 1, 32), Fraction(2 * j + 1, 32)]
                waves = enumeration.occupied_sets(49, [1, 1], twist)[0]
                square = enumeration.mean_square_wavenumber(
                    waves, [1, 1], [float(t) for t in twist]
                )
                errors.append(_kinetic_error(square, waves))
        assert f"{100 * np.mean(errors):+.2f}" == "+0.08"

    @pytest.mark.parametrize(
        ("dimension", "population", "transfer", "expected"),
        [
            (2, 49, (1, 0), Fraction(9, 49)),
            (2, 49, (2, 0), Fraction(16, 49)),
            (3, 57, (1, 0, 0), Fraction(21, 57)),
            (3, 57, (2, 0, 0), Fraction(34, 57)),
        ],
    )
    def test_structure_factor_by_counting(self, dimension, population, transfer, expected):
        # Recomputed independently from the definition.
        (waves,) = enumeration.occupied_sets(population, [1] * dimension)
        assert enumeration.structure_factor(waves, transfer) == expected

    def test_structure_factor_of_a_ring(self):
        # min(m, N)/N: Diaconis & Evans, Trans. AMS 353, 2615 (2001).
        (waves,) = enumeration.occupied_sets(11, [1])
        for m in range(1, 20):
            assert enumeration.structure_factor(waves, [m]) == Fraction(min(m, 11), 11)


def _kinetic_error(mean_square: float, waves: np.ndarray) -> float:
    """Return the relative difference to the infinite gas, ⟨k²⟩ = d k_F²/(d + 2), unit sides."""
    population, dimension = waves.shape
    ball = {1: 2.0, 2: np.pi, 3: 4 * np.pi / 3}[dimension]
    fermi = 2 * np.pi * (population / ball) ** (1 / dimension)
    return mean_square / (dimension / (dimension + 2) * fermi**2) - 1.0


class TestShells:
    @pytest.mark.parametrize(("dimension", "volume"), [(1, 2.0), (2, np.pi), (3, 4 * np.pi / 3)])
    def test_volume_and_plane_wave(self, dimension, volume):
        # The mean of e^{iq·r} over directions: cos z, J_0(z), j_0(z), z = qr (textbook).
        inner, outer, q = 0.7, 1.3, np.array([3.0, -17.0, 8.0])[:dimension]
        points, weights = shells.shell_rule(dimension, inner, outer, np.linalg.norm(q))
        assert weights.sum() == pytest.approx(
            volume * (outer**dimension - inner**dimension), rel=1e-13
        )
        z = np.linalg.norm(q) * 1.1
        vectors, shares = shells.directions(dimension, z)
        mean = {1: np.cos(z), 2: jv(0, z), 3: spherical_jn(0, z)}[dimension]
        assert shares @ np.exp(1j * 1.1 * vectors @ q) == pytest.approx(mean, abs=1e-13)
        assert np.all(np.linalg.norm(points, axis=1) > inner)


class TestPairDensity:
    @pytest.mark.parametrize(("ratio", "population"), GASES)
    def test_two_routes_agree(self, ratio, population):
        sets = enumeration.occupied_sets(population, ratio)[:40]
        sides = box(ratio)
        displacements = np.random.default_rng(5).random((25, len(ratio))) * sides
        density = population / np.prod(sides)
        definition = density**2 * pair_density.pair_correlation(displacements, sets, sides)
        minors = pair_density.pair_density(displacements, sets, sides)
        assert minors == pytest.approx(definition, rel=1e-11, abs=1e-13 * density**2)

    @pytest.mark.parametrize("ratio", [(1,), (1, Fraction(3, 2))])
    @pytest.mark.parametrize("population", [2, 3])
    def test_joint_density_gives_the_same(self, ratio, population):
        sides = box(ratio)
        displacements = np.random.default_rng(6).random((7, len(ratio))) * sides
        for waves in enumeration.occupied_sets(population, ratio):
            joint = joint_density.pair_density_from_joint(displacements, waves, sides)
            assert joint == pytest.approx(
                pair_density.pair_density(displacements, [waves], sides), rel=1e-11
            )

    def test_ring_closed_form(self):
        # Dirichlet kernel: 1 − [sin(πNu)/(N sin πu)]², u = r/L.
        sets = enumeration.occupied_sets(11, [1])
        u = np.linspace(0.01, 0.5, 40)
        expected = 1 - (np.sin(11 * np.pi * u) / (11 * np.sin(np.pi * u))) ** 2
        assert pair_density.pair_correlation(3 * u[:, None], sets, [3.0]) == pytest.approx(
            expected, abs=1e-13
        )

    @pytest.mark.parametrize(
        ("dimension", "population", "bulk", "percent"),
        [(2, 49, 1 / 4, "+0.489"), (3, 33, 1 / 5, "-0.502"), (3, 57, 1 / 5, "+1.574")],
    )
    def test_small_separation_coefficient(self, dimension, population, bulk, percent):
        # Infinite gas: g → z²/4 (2D), z²/5 (3D), z = k_F r (Giuliani & Vignale, Quantum Theory of
        # the Electron Liquid, 2005, ch. 1; from memory). At finite N the curvature is the kinetic
        # energy, so it is off by the energy's finite-size error.
        sets = enumeration.occupied_sets(population, [1] * dimension)
        fermi = {2: np.sqrt(4 * np.pi * population), 3: np.cbrt(6 * np.pi**2 * population)}[
            dimension
        ]
        radius = 1e-4 / fermi
        vectors, shares = shells.directions(dimension, 1e-3)
        g = shares @ pair_density.pair_correlation(radius * vectors, sets, [1.0] * dimension)
        assert f"{100 * (g / 1e-8 / bulk - 1):+.3f}" == percent

    def test_small_separation_coefficient_of_a_ring(self):
        # z²/3 (1 − 1/N²): the infinite z²/3 (textbook, from memory) and ⟨k²⟩ by summation.
        sets = enumeration.occupied_sets(9, [1])
        g = pair_density.pair_correlation([[1e-4 / (9 * np.pi)]], sets, [1.0])[0]
        assert g / 1e-8 == pytest.approx((1 - 1 / 81) / 3, rel=1e-6)

    @pytest.mark.parametrize(("ratio", "population"), GASES)
    def test_bin_averages_against_closed_overlaps(self, ratio, population):
        """Quadrature over shells against Bessel functions: n∫|f|² over a ball is Σ_kk' M_kk'/N."""
        sets = enumeration.occupied_sets(population, ratio)[:40]
        sides = box(ratio)
        edges = np.linspace(0.0, 0.5 * min(sides), 8)
        ball = {1: 2.0, 2: np.pi, 3: 4 * np.pi / 3}[len(ratio)]
        filled = np.mean(
            [[neighbours.overlap_matrix(waves, sides, r).sum() for r in edges] for waves in sets],
            axis=0,
        )
        within = np.diff(filled) * np.prod(sides) / population**2
        expected = 1 - within / (ball * np.diff(edges ** len(ratio)))
        averages = pair_density.bin_averages(sets, sides, edges)
        assert averages == pytest.approx(expected, abs=1e-11)
        charges = running_integral.hole_charge(sets, sides, edges[1:])
        assert charges == pytest.approx(-filled[1:] / population, abs=1e-11)

    def test_bins_beyond_half_the_shortest_side_are_refused(self):
        sets = enumeration.occupied_sets(5, [1, 2])
        with pytest.raises(ValueError, match="leave the box"):
            pair_density.bin_averages(sets, [1.0, 2.0], [0.0, 0.6])
        with pytest.raises(ValueError, match="leave the box"):
            running_integral.hole_charge(sets, [1.0, 2.0], [0.6])

    def test_weights_mix_sets(self):
        sets = enumeration.occupied_sets(3, [1, 1])[:2]
        at = [[0.3, 0.1]]
        first, second = (pair_density.pair_correlation(at, [one], [1.0, 1.0])[0] for one in sets)
        mixed = pair_density.pair_correlation(at, sets, [1.0, 1.0], weights=[0.25, 0.75])[0]
        assert mixed == pytest.approx(0.25 * first + 0.75 * second)
        assert abs(first - second) > 1e-3


class TestRunningIntegral:
    @pytest.mark.parametrize(("ratio", "population"), GASES)
    def test_the_whole_box_holds_minus_one(self, ratio, population):
        sets = enumeration.occupied_sets(population, ratio)[:40]
        charge = running_integral.box_transform(sets, box(ratio), (0,) * len(ratio))
        assert charge == pytest.approx(-1.0, abs=1e-12)

    @pytest.mark.parametrize(("ratio", "population"), GASES)
    def test_fourier_transform_is_the_counted_structure_factor(self, ratio, population):
        waves = enumeration.occupied_sets(population, ratio)[0]
        for transfer in ((1, 0, 0), (2, 1, 0), (0, 3, 1), (-1, 1, 2), (9, 9, 9)):
            q = transfer[: len(ratio)]
            if any(q):
                hole = running_integral.box_transform([waves], box(ratio), q)
                counted = float(enumeration.structure_factor(waves, q))
                assert 1 + hole == pytest.approx(counted, abs=1e-12)

    def test_a_missing_orbital_is_seen(self):
        """Control: another occupied set has the same total charge but another running integral."""
        (waves,) = enumeration.occupied_sets(13, [1, 1])
        wrong = waves.copy()
        wrong[-1] = (2, 1)
        right, planted = (
            running_integral.hole_charge([one], [1.0, 1.0], [0.1, 0.2]) for one in (waves, wrong)
        )
        assert np.abs(right - planted).max() > 1e-3


class TestJointDensity:
    @pytest.mark.parametrize(
        ("ratio", "population"),
        [((1,), 2), ((1,), 3), ((1,), 5), ((1, 2), 3), ((1, 1), 3), (THIRD, 2)],
    )
    def test_normalisation_and_structure_factor(self, ratio, population):
        sides = box(ratio)
        transfer = np.array([1, 0, 1][: len(ratio)])

        def squared_density_mode(positions):
            phases = 2 * np.pi * (positions / sides) @ transfer
            return np.abs(np.exp(1j * phases).sum(axis=1)) ** 2

        for waves in enumeration.occupied_sets(population, ratio)[:4]:
            one = joint_density.expectation(lambda x: np.ones(len(x)), waves, sides)
            assert one == pytest.approx(1.0, rel=1e-12)
            square = joint_density.expectation(squared_density_mode, waves, sides, degree=1)
            counted = float(enumeration.structure_factor(waves, transfer))
            assert square / population == pytest.approx(counted, rel=1e-11)

    @pytest.mark.parametrize("population", [2, 3])
    @pytest.mark.parametrize("ratio", [(1,), (1, Fraction(3, 2))])
    def test_bin_probabilities(self, ratio, population):
        """P = g Δv N/((N − 1) V)."""
        sides = box(ratio)
        waves = enumeration.occupied_sets(population, ratio)[0]
        edges = np.linspace(0.0, 0.5 * min(sides), 6)
        ball = {1: 2.0, 2: np.pi}[len(ratio)]
        volumes = ball * np.diff(edges ** len(ratio))
        g = pair_density.bin_averages([waves], sides, edges)
        expected = g * volumes * population / (population - 1) / np.prod(sides)
        chances = joint_density.pair_bin_probabilities(waves, sides, edges)
        assert chances == pytest.approx(expected, rel=1e-10)

    @pytest.mark.parametrize(
        ("ratio", "population"), [((1,), 2), ((1,), 3), ((1, Fraction(3, 2)), 3), (THIRD, 2)]
    )
    def test_neighbour_survival_against_determinants(self, ratio, population):
        sides = box(ratio)
        waves = enumeration.occupied_sets(population, ratio)[-1]
        radii = np.array([0.13, 0.31, 0.5]) * min(sides)
        direct = [joint_density.neighbour_survival(waves, sides, radius) for radius in radii]
        assert direct == pytest.approx(neighbours.torus_survival([waves], sides, radii), abs=1e-10)

    def test_mean_neighbour_distance_on_a_small_ring(self):
        for population in (2, 3):
            waves = enumeration.occupied_sets(population, [1])[0]
            direct = joint_density.ring_mean_neighbour_distance(waves, 3.0)
            assert direct == pytest.approx(
                neighbours.torus_mean_distance([waves], [3.0]), abs=1e-12
            )

    def test_limits_are_refused(self):
        (waves,) = enumeration.occupied_sets(9, [1, 1])
        with pytest.raises(ValueError, match="two or three"):
            joint_density.neighbour_survival(waves, [1.0, 1.0], 0.1)
        with pytest.raises(ValueError, match="too many"):
            joint_density.expectation(len, waves, [1.0, 1.0])


class TestRejectionSampler:
    @pytest.mark.parametrize(
        ("ratio", "population"), [((1,), 3), ((1, Fraction(3, 2)), 4), ((1, 1, 2), 3)]
    )
    def test_pairs_and_triples_against_exact(self, ratio, population):
        """Pair counts in bins and a three-body cosine, whole snapshots as units."""
        rng = np.random.default_rng([14, len(ratio), population])
        sides = np.array(box(ratio))
        waves = enumeration.occupied_sets(population, ratio)[0]
        positions = joint_density.draw_by_rejection(waves, sides, 6000, rng)
        edges = np.array([0.0, 0.3, 0.38, 0.45]) * min(sides)  # at least 100 pairs in each bin
        pairs = population * (population - 1) // 2
        separations = joint_density.snapshot_features(positions, sides)[:, :pairs]
        counts = np.array([np.histogram(row, bins=edges)[0] for row in separations])
        vectors = np.column_stack([counts, _triple_cosine(positions, sides)])
        chances = pairs * joint_density.pair_bin_probabilities(waves, sides, edges)
        cosine = _exact_triple_cosine(waves)
        assert counts.sum(axis=0).min() >= 100
        assert hotelling_p_value(vectors, np.array([*chances, cosine])) > ALPHA
        # Controls: no exchange hole, or no correlation of three particles, is seen.
        ball = {1: 2.0, 2: np.pi, 3: 4 * np.pi / 3}[len(ratio)]
        flat = pairs * ball * np.diff(edges ** len(ratio)) / np.prod(sides)
        assert hotelling_p_value(vectors, np.array([*flat, cosine])) < ALPHA
        assert hotelling_p_value(vectors, np.array([*chances, 0.0])) < ALPHA

    def test_same_law_as_the_ring(self):
        rng = np.random.default_rng(15)
        (waves,) = enumeration.occupied_sets(5, [1])
        first = joint_density.draw_by_rejection(waves, [1.0], 200, rng)
        second = ring.ring_angles(5, 200, rng)[:, :, None] / (2 * np.pi)
        gapped = np.where(waves == 2, 3, waves)
        wrong = joint_density.draw_by_rejection(gapped, [1.0], 200, rng)
        a, b, c = (joint_density.snapshot_features(x, [1.0]) for x in (first, second, wrong))
        permutations = int(1 / ALPHA)  # the smallest p-value is below ALPHA
        assert ring.permutation_p_value(a, b, rng, permutations) > ALPHA
        assert ring.permutation_p_value(a, c, rng, permutations) < ALPHA


def _triple_cosine(positions: np.ndarray, sides: np.ndarray) -> np.ndarray:
    """Return Σ over distinct i, j, l of cos(G·(r_i + r_j − 2 r_l)), G = 2π/L of the last axis."""
    u = np.exp(2j * np.pi * positions[:, :, -1] / sides[-1])
    one, two = u.sum(axis=1), (u**2).sum(axis=1)
    # all i, j, l minus those with i = j, i = l, j = l, and twice those with i = j = l back
    total = one**2 * two.conj() - two * two.conj() - 2 * one * one.conj() + 2 * u.shape[1]
    return total.real


def _exact_triple_cosine(waves: np.ndarray) -> float:
    """Return its expectation from three-particle minors: Σ_k det of Kronecker symbols.

    ⟨Π e^{iq_a·r_a}⟩ over ordered triples is Σ over ordered filled triples and permutations π of
    sign(π) Π δ(k_π(a) − k_a, q_a) up to the sign of q, which the cosine does not see.
    """
    filled = [tuple(int(m) for m in wave) for wave in waves]
    transfers = (1, 1, -2)
    signs = {(0, 1, 2): 1, (1, 2, 0): 1, (2, 0, 1): 1, (0, 2, 1): -1, (1, 0, 2): -1, (2, 1, 0): -1}
    total = 0
    for a in filled:
        for b in filled:
            for c in filled:
                if len({a, b, c}) < 3:
                    continue
                for order, sign in signs.items():
                    moved = [(a, b, c)[i] for i in order]
                    total += sign * all(
                        (*new[:-1], new[-1] - old[-1]) == (*old[:-1], q)
                        for new, old, q in zip(moved, (a, b, c), transfers, strict=True)
                    )
    return float(total)


def test_exact_triple_cosine_is_the_integral_of_the_joint_density():
    for ratio, population in (((1,), 3), ((1, 2), 3)):
        sides = np.array(box(ratio))
        for waves in enumeration.occupied_sets(population, ratio):
            integral = joint_density.expectation(
                lambda x, sides=sides: _triple_cosine(x, sides), waves, sides, degree=2
            )
            assert integral == pytest.approx(_exact_triple_cosine(waves), abs=1e-10)


class TestRing:
    def test_spacing_variance_against_exact(self):
        # Bornemann, Markov Process. Relat. Fields 16, 803 (2010) gives the infinite value 0.17999;
        # at N = 21 it is 0.17954786 (recomputed independently).
        angles = ring.ring_angles(21, 3000, np.random.default_rng(21))
        second = (ring.spacings(angles) ** 2).mean(axis=1, keepdims=True)
        assert hotelling_p_value(second, np.array([1.17954786])) > ALPHA
        assert hotelling_p_value(second, np.array([2.0])) < ALPHA

    def test_pair_separations_against_the_exact_density(self):
        population, snapshots = 9, 3000
        edges = np.linspace(0.0, 4.5, 10)
        angles = ring.ring_angles(population, snapshots, np.random.default_rng(22))
        counts = ring.separation_histograms(angles, edges)
        assert np.all(counts.sum(axis=1) == 36)
        sets = enumeration.occupied_sets(population, [1])
        g = pair_density.bin_averages(sets, [9.0], edges)
        expected = 0.5 * population * 2 * np.diff(edges) * g
        assert expected.sum() == pytest.approx(36)
        # the bins sum to 36 in every snapshot, so one of them is left out
        assert hotelling_p_value(counts[:, :-1], expected[:-1]) > ALPHA
        assert hotelling_p_value(counts[:, :-1], np.full(8, 4.0)) < ALPHA

    @pytest.mark.parametrize("form", [ring.energy_form, ring.hotelling_form])
    def test_p_values_are_uniform_under_the_null(self, form):
        rng = np.random.default_rng(23)
        edges = np.linspace(0.0, 2.5, 4)
        values = []
        for _ in range(400):
            histograms = ring.separation_histograms(ring.ring_angles(5, 40, rng), edges)
            p = ring.permutation_p_value(histograms[:20], histograms[20:], rng, 99, form)
            values.append(p)
        # valid: P(p ≤ t) ≤ t up to chance; uniform once the lattice of 1/100 is spread out
        spread = np.array(values) - rng.random(400) / 100
        assert kstest(spread, "uniform").pvalue > ALPHA

    def test_pooled_pairs_would_be_toothless(self):
        """Control: a test that takes pairs for independent never alarms where it should at 5 %.

        The number of pairs in a bin varies far less from snapshot to snapshot than for
        independent pairs (the gas is rigid), so errors from pooled pairs are too wide.
        """
        angles = ring.ring_angles(9, 1000, np.random.default_rng(24))
        counts = ring.separation_histograms(angles, np.array([0.5, 2.5]))[:, 0]
        assert counts.var() < 0.5 * counts.mean()

    @pytest.mark.parametrize("form", [ring.energy_form, ring.hotelling_form])
    def test_independent_points_are_seen(self, form):
        rng = np.random.default_rng(25)
        edges = np.linspace(0.0, 2.0, 6)
        fermions = ring.separation_histograms(ring.ring_angles(11, 60, rng), edges)
        independent = ring.separation_histograms(ring.poisson_angles(11, 60, rng), edges)
        p = ring.permutation_p_value(fermions, independent, rng, 999, form)
        assert p == pytest.approx(1e-3)

    def test_another_number_of_particles_is_seen(self):
        """Rescaled to unit mean spacing and to counts per particle."""
        rng = np.random.default_rng(26)
        edges = np.linspace(0.0, 2.0, 9)
        a, b = (
            ring.separation_histograms(ring.ring_angles(n, 300, rng), edges) / n for n in (21, 9)
        )
        assert ring.permutation_p_value(a, b, rng, 999) == pytest.approx(1e-3)


class TestNeighbours:
    @pytest.mark.parametrize(
        ("ratio", "population", "expected"),
        [
            # Recomputed independently to the digits shown; the functions are those of Scardicchio,
            # Zachary & Torquato, PRE 79, 041108 (2009).
            ((1, 1), 49, 0.6491277),
            ((1, 1, 1), 57, 0.6530301),
        ],
    )
    def test_torus_mean_distance(self, ratio, population, expected):
        sides = [population ** (1 / len(ratio))] * len(ratio)
        sets = enumeration.occupied_sets(population, ratio)
        assert neighbours.torus_mean_distance(sets, sides) == pytest.approx(expected, abs=6e-8)

    @pytest.mark.parametrize(
        ("dimension", "expected"), [(1, 0.7252279404), (2, 0.6494116034), (3, 0.6542541703)]
    )
    def test_infinite_gas_mean_distance(self, dimension, expected):
        # Recomputed independently to the digits shown (Scardicchio, Zachary & Torquato, as above).
        assert neighbours.bulk_mean_distance(dimension) == pytest.approx(expected, abs=2e-10)

    def test_ring_mean_distance_tends_to_the_infinite_one(self):
        # The difference falls as N⁻⁴ (seen), a factor of 15 between the last two.
        values = [
            neighbours.torus_mean_distance(enumeration.occupied_sets(n, [1]), [float(n)], panels=8)
            for n in (21, 41, 81)
        ]
        assert abs(values[2] - 0.7252279404) < abs(values[1] - 0.7252279404) / 8
        assert values[2] == pytest.approx(0.7252279404, abs=1e-8)

    @pytest.mark.parametrize(("population", "expected"), [(21, 0.17954786), (51, 0.17991826)])
    def test_ring_spacing_variance(self, population, expected):
        # Recomputed independently to the digits shown.
        assert neighbours.ring_spacing_variance(population) == pytest.approx(expected, abs=6e-9)

    def test_infinite_spacing_variance(self):
        # 0.1799938776918: Bornemann, Markov Process. Relat. Fields 16, 803 (2010), tables 7–8.
        total = 0.0
        for lower in range(10):
            arcs, weights = shells.gauss_legendre(lower, lower + 1.0, 10)
            gaps = [neighbours.bulk_survival(1, 0.5 * arc, palm=False) for arc in arcs]
            total += float(weights @ np.array(gaps))
        assert 2 * total - 1 == pytest.approx(0.1799938776918, abs=1e-12)

    def test_gap_probabilities(self):
        # Infinite: E(0;1) and E(0;½), Bornemann, Math. Comp. 79, 871 (2010) and the article above;
        # ring of 21: recomputed independently to the digits shown.
        assert neighbours.bulk_survival(1, 0.5, palm=False) == pytest.approx(
            0.170217421379185, abs=1e-13
        )
        assert neighbours.bulk_survival(1, 0.25, palm=False) == pytest.approx(
            0.515073395072852, abs=1e-13
        )
        assert neighbours.ring_gap_probability(21, 1.0) == pytest.approx(0.1700466106, abs=6e-11)
        assert neighbours.ring_gap_probability(21, 0.5) == pytest.approx(0.5150453589, abs=6e-11)

    def test_survival_falls_as_the_pair_density_says(self):
        """Near contact at most one neighbour is there: 1 − survival → n ∫ g dV."""
        sets = enumeration.occupied_sets(9, THIRD)
        sides = box(THIRD)
        radius = 0.1 * min(sides)
        ball = 9 / np.prod(sides) * 4 * np.pi / 3 * radius**3
        near = ball + running_integral.hole_charge(sets, sides, [radius])[0]
        survival = neighbours.torus_survival(sets, sides, [radius])[0]
        assert 1 - survival == pytest.approx(near, rel=1e-3)

    def test_a_ball_round_any_point_is_another_question(self):
        """Control: leaving out the conditioning on a particle at the origin is seen."""
        assert (
            abs(neighbours.bulk_survival(2, 0.5) - neighbours.bulk_survival(2, 0.5, palm=False))
            > 0.1
        )

    def test_too_few_particles_are_refused(self):
        with pytest.raises(ValueError, match="matters"):
            neighbours.torus_mean_distance(enumeration.occupied_sets(5, [1, 1]), [2.0, 2.0])


def test_hadamard_bound_holds():
    """The rejection sampler's bound is reached where the points are the roots of unity."""
    (waves,) = enumeration.occupied_sets(5, [1])
    points = np.arange(5)[:, None] / 5
    squared = joint_density.joint_density(points, waves, [1.0]) * factorial(5)
    assert squared == pytest.approx(5.0**5)
