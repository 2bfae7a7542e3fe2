"""The oracles of spin rotation and singlets against each other, closed forms and plain integrals.

Statistical checks use fixed seeds. Together they raise a false alarm with probability below
FAMILY_ALPHA: each gets an equal share.
"""

from __future__ import annotations

from fractions import Fraction
from functools import partial
from itertools import combinations, product
from math import comb

import numpy as np
import pytest

from tests.oracles import enumeration, joint_density, spinors, thermal
from tests.oracles.significance import hotelling_p_value
from tests.oracles.spinors import DOWN, UP, TwoParticles, pair_correlation, pair_density

FAMILY_ALPHA = 1e-4
ALPHA = FAMILY_ALPHA / 2  # two checks

THETAS = (0.0, 0.7, np.pi / 2, 2.3)
PAIRS = list(product([UP, DOWN], repeat=2))
QUARTER = np.pi / 2
close = np.testing.assert_allclose


def waves(*vectors, axes=1):
    """Return waves as one array, also when there are none."""
    return np.array(vectors, dtype=np.int64).reshape(-1, axes)


sheet = partial(waves, axes=2)


SQUARE = [1, 1]
RING = [2.3]
SHEET = [2.3, 3.1]
NONE = waves()
# Up to four particles: waves shared or not, unequal populations, a full and an empty component.
TINY = {
    "one singlet": ((waves(1), waves(1)), RING),
    "nothing shared": ((waves(0, 1), waves(-1)), RING),
    "one of two shared": ((waves(0, 2), waves(0, -1)), RING),
    "three and one": ((waves(-1, 0, 1), waves(1)), RING),
    "polarised": ((waves(0, 1, 3), NONE), RING),
    "sheet": ((sheet((0, 0), (1, 0)), sheet((1, 0), (0, 1))), SHEET),
}


def ground(population, ratio):
    """Return the lowest closed shells of a periodic box."""
    (filled,) = enumeration.occupied_sets(population, ratio)
    return filled


def displacements(count, sides):
    """Return vectors all over the box."""
    return np.random.default_rng(5).random((count, len(sides))) * sides


def grid(counts, sides, particles):
    """Return all configurations (point, particle, axis) of a product grid over the box."""
    axes = [side * np.arange(n) / n for side, n in zip(sides, counts, strict=True)]
    one = np.array(list(product(*axes)))
    return one[np.indices((len(one),) * particles).reshape(particles, -1).T]


def integrals(sets, theta, sides):
    """Return Σ_labels ∫ |det|²/N! by number of ups; the trapezoid rule is exact."""
    filled = np.concatenate(sets)
    points = grid(np.ptp(filled, axis=0) + 1, sides, len(filled))
    totals = np.zeros(len(filled) + 1)
    for labels in product([UP, DOWN], repeat=len(filled)):
        seen = np.array(labels)
        density = spinors.joint_density(sets, theta, points, seen, sides)
        totals[labels.count(UP)] += density.mean() * np.prod(sides) ** len(filled)
    return totals


def pair_density_from_joint(sets, theta, r, sides, detected):
    """Return N(N−1) Σ ∫ |det|²/N! over all other particles and labels, averaged over the first."""
    filled = np.concatenate(sets)
    points = grid(2 * np.ptp(filled, axis=0) + 1, sides, len(filled) - 1)
    scale = len(filled) * (len(filled) - 1) * np.prod(sides) ** (len(filled) - 2)
    total = np.zeros(len(r))
    for others in product([UP, DOWN], repeat=len(filled) - 2):
        labels = np.array([*detected, *others])
        for i, displacement in enumerate(r):
            where = np.concatenate([points[:, :1], points[:, :1] + displacement, points[:, 1:]], 1)
            total[i] += scale * spinors.joint_density(sets, theta, where, labels, sides).mean()
    return total


def label_law_by_expansion(sets, theta):
    """Return P(n_up) from the amplitudes of the determinant on all fillings of (wave, spin)."""
    filled = [(tuple(k), s) for s in (UP, DOWN) for k in sets[s].tolist()]
    modes = list(product(sorted({k for k, _ in filled}), (UP, DOWN)))
    turn = spinors.rotation(theta)
    rows = np.array([[(k == m) * turn[s, t] for m, s in modes] for k, t in filled])
    law = np.zeros(len(filled) + 1)
    for chosen in combinations(range(len(modes)), len(filled)):
        law[sum(modes[i][1] == UP for i in chosen)] += np.linalg.det(rows[:, chosen]) ** 2
    return law


def amplitudes(sets, r, sides):
    """Return γ_s(r) = Σ_k e^{ik·r}/V of both components."""
    scaled = 2 * np.pi * r / sides
    return [np.exp(1j * (scaled @ one.T)).sum(axis=1) / np.prod(sides) for one in sets]


def closed_form(sets, theta, r, sides, detected):
    """Return n_s' n_t' − |G_st|² by hand; unlike: n_u' n_d' − ¼ sin²θ |γ_u − γ_d|²."""
    up, down = amplitudes(sets, r, sides)
    cosine, sine = np.cos(theta / 2) ** 2, np.sin(theta / 2) ** 2
    n = np.array([len(one) for one in sets]) / np.prod(sides)
    mean = [cosine * n[0] + sine * n[1], sine * n[0] + cosine * n[1]]
    if detected[0] != detected[1]:
        return mean[0] * mean[1] - 0.25 * np.sin(theta) ** 2 * np.abs(up - down) ** 2
    amplitude = (cosine * up + sine * down, sine * up + cosine * down)[detected[0]]
    return mean[detected[0]] ** 2 - np.abs(amplitude) ** 2


@pytest.mark.parametrize("theta", THETAS)
@pytest.mark.parametrize("name", TINY)
class TestTinySystems:
    def test_probability_is_one_and_the_label_law_has_three_routes(self, name, theta):
        sets, sides = TINY[name]
        law = spinors.label_law(sets, theta)
        assert law.sum() == pytest.approx(1, abs=1e-13)
        close(law, integrals(sets, theta, sides), atol=1e-12)
        close(law, label_law_by_expansion(sets, theta), atol=1e-13)
        mean = spinors.densities(sets, theta, sides) * np.prod(sides)
        close(mean, [law @ np.arange(len(law)), law[::-1] @ np.arange(len(law))], atol=1e-12)

    def test_pair_density_has_three_routes(self, name, theta):
        sets, sides = TINY[name]
        r = displacements(2, sides)
        for detected in PAIRS:
            found = pair_density(sets, theta, r, sides, detected)
            for route in (pair_density_from_joint, closed_form):
                close(found, route(sets, theta, r, sides, detected), atol=1e-12)


class TestJointDensity:
    def test_a_wrong_rotation_does_not_keep_the_probability(self, monkeypatch):
        # a spinor of down without its minus sign is not orthogonal to that of up
        sets, sides = TINY["one of two shared"]
        monkeypatch.setattr(spinors, "rotation", lambda _: np.sqrt(np.full((2, 2), 0.5)))
        assert abs(integrals(sets, QUARTER, sides).sum() - 1) > 0.1

    def test_labels_of_a_polarised_gas_are_independent_of_positions(self):
        sets, sides = TINY["polarised"]
        points = displacements(30, sides).reshape(10, 3, 1)
        found = spinors.joint_density(sets, 0.9, points, np.array([0, 1, 0]), sides)
        alone = joint_density.joint_density(points, sets[0], sides)
        close(found, alone * np.cos(0.45) ** 4 * np.sin(0.45) ** 2, rtol=1e-10)


class TestLargerSystems:
    def test_numbers_detected(self):
        shell, big = ground(5, SQUARE), ground(9, SQUARE)
        assert spinors.label_law((shell, shell), 1.1)[5] == 1.0
        # 4 waves filled once: 5 ups of the singlets, and a binomial number of the rest
        law = spinors.label_law((big, shell), QUARTER)
        close(law[5:10], [comb(4, n) / 16 for n in range(5)], atol=1e-15)
        close(spinors.label_law((big, shell), np.pi)[5], 1.0)

    @pytest.mark.parametrize(("population", "ratio"), [(21, SQUARE), (9, [2, 3]), (7, [1, 1, 1])])
    def test_equal_closed_shells_do_not_feel_a_rotation(self, population, ratio):
        pure = [(1.0, (ground(population, ratio), ground(population, ratio)))]
        r = displacements(30, ratio)
        for detected in PAIRS:
            both = [pair_correlation(pure, theta, r, ratio, detected) for theta in (0.0, 1.1)]
            close(*both, atol=1e-12)
        close(pair_correlation(pure, 1.1, r, ratio, (UP, DOWN)), 1.0, atol=1e-12)

    def test_a_polarised_gas_turned_by_90_degrees_has_one_hole_for_all_labels(self):
        r = displacements(30, SQUARE)
        pure = [(1.0, (ground(21, SQUARE), sheet()))]
        alone = 1 - np.abs(amplitudes(pure[0][1], r, SQUARE)[0] / 21) ** 2
        for detected in PAIRS:
            close(pair_correlation(pure, QUARTER, r, SQUARE, detected), alone, atol=1e-12)
        # half of the hole of the particles that are detected with either label
        points = grid(np.array([12, 12]), SQUARE, 1)[:, 0]
        hole = pair_correlation(pure, QUARTER, points, SQUARE, (UP, DOWN)) - 1
        assert 10.5 * hole.mean() == pytest.approx(-0.5, abs=1e-12)

    def test_flipped_labels_are_told_apart_from_a_rotation_only_where_both_components_are(self):
        r = displacements(30, SQUARE)
        for down, differs in ((sheet(), False), (ground(9, SQUARE), True)):
            sets = (ground(21, SQUARE), down)
            gap = spinors.incoherent_pair_density(sets, 1.1, r, SQUARE, (UP, DOWN))
            gap -= pair_density(sets, 1.1, r, SQUARE, (UP, DOWN))
            up, other = amplitudes(sets, r, SQUARE)
            close(gap, -0.5 * np.sin(1.1) ** 2 * (up * other.conj()).real, atol=1e-10)
            assert (np.abs(gap).max() > 1.0) == differs


class TestMixtures:
    ORBITALS = np.arange(-2, 3).reshape(-1, 1)

    def test_weights_are_those_of_each_component_on_its_own(self):
        energies = spinors.wave_energies(self.ORBITALS, RING)
        fixed = spinors.canonical_mixture(self.ORBITALS, RING, (3, 2), 4.0)
        free = spinors.grand_canonical_mixture(self.ORBITALS, RING, (5.0, -2.0), 4.0)
        for component, (population, potential) in enumerate(((3, 5.0), (2, -2.0))):
            mean, _ = thermal.exact_canonical(energies, population, 4.0)
            fermi = 1 / (np.exp((energies - potential) / 4.0) + 1)
            for mixture, expected in ((fixed, mean), (free, fermi)):
                filled = sum(w * np.isin(self.ORBITALS, sets[component]) for w, sets in mixture)
                close(filled[:, 0], expected, rtol=1e-12)

    def test_rotation_is_felt_unless_numbers_fluctuate_with_one_chemical_potential(self):
        r = displacements(9, RING)
        same = spinors.grand_canonical_mixture(self.ORBITALS[:4], RING, (6.0, 6.0), 5.0)
        unequal = spinors.grand_canonical_mixture(self.ORBITALS[:4], RING, (6.0, 1.0), 5.0)
        fixed = spinors.canonical_mixture(self.ORBITALS, RING, (3, 3), 5.0)
        for detected in PAIRS:
            close(*(pair_correlation(same, t, r, RING, detected) for t in (0.0, 1.1)), atol=1e-12)
        close(*(spinors.mixture_label_law(same, theta) for theta in (0.0, 1.1)), atol=1e-14)
        for mixture in (unequal, fixed):
            turned = pair_correlation(mixture, QUARTER, r, RING, (UP, DOWN))
            assert turned.max() < 1.0
            assert turned.min() < 0.97


class TestSingletFraction:
    @pytest.mark.parametrize(("up", "down"), [(21, 21), (21, 9), (9, 1)])
    def test_closed_form_contact_and_invariance(self, up, down):
        sets = (ground(up, SQUARE), ground(down, SQUARE))
        r = np.vstack([[0.0, 0.0], displacements(20, SQUARE)])
        found = spinors.singlet_fraction(sets, r, SQUARE)
        first, second = amplitudes(sets, r, SQUARE)
        pairs = sum(closed_form(sets, 0.0, r, SQUARE, detected) for detected in PAIRS)
        close(found, (up * down + (first * second.conj()).real) / pairs, rtol=1e-10)
        assert found[0] == pytest.approx(1, abs=1e-12)
        close(spinors.singlet_fraction(sets, r, SQUARE, 1.1), found, rtol=1e-10)

    @pytest.mark.parametrize("down", [101, 21, 0])
    def test_far_away_spins_are_independent(self, down):
        sets = (ground(101, SQUARE), ground(down, SQUARE) if down else sheet())
        far = np.array([[0.5, 0.41], [0.37, 0.5]])
        up, other = (np.abs(one).max() for one in amplitudes(sets, far, SQUARE))
        small = max(up / 101, other / max(down, 1))
        assert small < 0.1
        # numerator and denominator change by a fraction c² at most where |γ| ≤ c n
        limit = 101 * down / (101 + down) ** 2  # a quarter without polarisation
        close(spinors.singlet_fraction(sets, far, SQUARE), limit, atol=small**2)

    def test_a_mixture_averages_both_densities_and_no_pairs_give_nan(self):
        r = np.array([[0.0], [0.4]])
        mixture = [(0.25, (waves(0), waves(1))), (0.75, (waves(0, 1), NONE))]
        # singlets: ¼(1 + cos kr); pairs ¼·2 + ¾·2(1 − cos kr)
        cosine = np.cos(2 * np.pi * r[:, 0] / 2.3)
        close(spinors.singlet_fraction(mixture, r, RING), (1 + cosine) / (8 - 6 * cosine))
        close(spinors.singlet_fraction(mixture[1][1], r, RING), [np.nan, 0], atol=1e-15)


class TestTwoParticles:
    A_AND_B = sheet((1, 0), (-1, 2))

    def test_density_is_normalised_and_symmetric(self):
        points = grid(np.array([3, 3]), SHEET, 2)
        for kind, theta in product(spinors.TWO_SPINS, (0.0, 1.1)):
            pair = TwoParticles(kind, self.A_AND_B, theta)
            total = 0.0
            for labels in PAIRS:
                seen = np.array(labels)
                density = spinors.two_particle_density(pair, points, seen, SHEET)
                swapped = spinors.two_particle_density(pair, points[:, ::-1], seen[::-1], SHEET)
                close(density, swapped, atol=1e-14)
                total += density.mean() * np.prod(SHEET) ** 2
            assert total == pytest.approx(1, abs=1e-12)

    def test_correlations_by_hand(self):
        r = displacements(9, SHEET)
        cosine = np.cos(2 * np.pi * (r / SHEET) @ (self.A_AND_B[0] - self.A_AND_B[1]))
        zero = np.zeros(9)
        hand = [("singlet", 0.0, (0, 0), zero), ("singlet", 0.0, (0, 1), 1 + cosine)]
        hand += [("singlet", 0.8, (0, 0), zero), ("singlet", 0.8, (0, 1), 1 + cosine)]
        hand += [("triplet 0", 0.0, (1, 1), zero), ("triplet 0", 0.0, (1, 0), 1 - cosine)]
        hand += [("triplet 0", QUARTER, (1, 1), 1 - cosine), ("triplet 0", QUARTER, (0, 1), zero)]
        hand += [("triplet +1", 0.0, (0, 0), (1 - cosine) / 2)]
        hand += [("triplet -1", 0.0, (1, 1), (1 - cosine) / 2)]
        correlation = spinors.two_particle_correlation
        for kind, theta, detected, expected in hand:
            pair = TwoParticles(kind, self.A_AND_B, theta)
            close(correlation(pair, r, SHEET, detected), expected, atol=1e-12)
        full = self.A_AND_B[[0, 0]]
        close(correlation(TwoParticles("singlet", full, 0.8), r, SHEET, (0, 1)), 1.0, atol=1e-12)
        with pytest.raises(ValueError, match="never detected"):
            correlation(TwoParticles("triplet +1", self.A_AND_B), r, SHEET, (UP, DOWN))
        with pytest.raises(ValueError, match="one wave"):
            correlation(TwoParticles("triplet 0", full), r, SHEET, (UP, DOWN))

    def test_against_determinants(self):
        # a up and b down is half singlet, half triplet; the cross term goes with its mirror image
        r = displacements(9, SHEET)
        a, b = self.A_AND_B[:1], self.A_AND_B[1:]
        for theta, detected in product(THETAS, PAIRS):
            singlet, triplet, polarised = (
                spinors.two_particle_pair_density(pair, r, SHEET, detected)
                for kind in ("singlet", "triplet 0", "triplet +1")
                for pair in [TwoParticles(kind, self.A_AND_B, theta)]
            )
            mixed = sum(pair_density(sets, theta, r, SHEET, detected) for sets in ((a, b), (b, a)))
            close(mixed, singlet + triplet, atol=1e-13)
            alone = pair_density((self.A_AND_B, sheet()), theta, r, SHEET, detected)
            close(alone, polarised, atol=1e-13)


class TestListedStates:
    def test_degeneracies_by_hand(self):
        # {−3, 1, 2} and {3, −1, −2} share Σm = 0 and Σm² = 14 with six more signs of {1, 2, 3}.
        state = spinors.listed_state((waves(-3, 1, 2), NONE), [2 * np.pi])
        close([state.energy, *state.wave_vector], [7.0, 0.0], atol=1e-14)
        assert state[2:] == (8, 2)
        # one up and one down, energies 0 and ½: which moves, and in which direction
        assert spinors.listed_state((waves(0), waves(1)), RING)[2:] == (4, 2)
        # 25 = 5² + 0² = 3² + 4²; sides in the ratio 1 : 2 have (5, 0), (4, 6), (3, 8), (0, 10)
        single = (sheet((5, 0)), sheet())
        assert spinors.listed_state(single, [0.7, 0.7])[2:] == (12, 1)
        assert spinors.listed_state(single, [0.7, 1.4])[2:] == (12, 1)
        assert spinors.listed_state((waves(0), NONE), RING)[2:] == (1, 1)

    @pytest.mark.parametrize(
        ("population", "ratio"), [(7, SQUARE), (6, [1, Fraction(3, 2)]), (9, [1, 1, 1]), (4, [1])]
    )
    def test_ground_states_are_as_many_as_exact_fractions_say(self, population, ratio):
        sides = [0.9 * float(side) for side in ratio]
        sets = enumeration.occupied_sets(population, ratio)
        state = spinors.listed_state((waves(axes=len(ratio)), sets[0]), sides)
        alike = [one for one in sets if (one.sum(axis=0) == sets[0].sum(axis=0)).all()]
        assert state[2:] == (len(sets), len(alike))
        mean = enumeration.mean_square_wavenumber(sets[0], sides)
        assert state.energy == pytest.approx(population * mean / 2)
        assert spinors.listed_state((sets[-1], sets[0]), sides).same_energy == len(sets) ** 2

    def test_excited_sets_by_plain_enumeration(self):
        squares = {m: sum(x * x for x in m) for m in product(range(-4, 5), repeat=2)}
        near = [m for m, square in squares.items() if square <= 6]
        chosen = ((0, 0), (1, 1), (-2, 0))
        alike = [c for c in combinations(near, 3) if sum(squares[m] for m in c) == 6]
        moved = [c for c in alike if tuple(map(sum, zip(*c, strict=True))) == (-1, 1)]
        state = spinors.listed_state((sheet(*chosen), sheet()), SQUARE)
        assert state[2:] == (len(alike), len(moved))


class TestDraws:
    """Numbers of ups, waves of all label pairs and a three-body moment, against plain integrals."""

    SETS = (waves(0, 1), waves(0))
    THETA = 1.1

    def features(self, positions, labels):
        phases = 2 * np.pi * positions[..., 0] / RING[0]
        waved = {
            (q, s): (np.exp(1j * q * phases) * (labels == s)).sum(axis=1)
            for q, s in product((1, 2), (UP, DOWN))
        }
        found = [(labels == UP).sum(axis=1)]
        for q, (s, t) in product((1, 2), ((0, 0), (0, 1), (1, 1))):
            alone = (s == t) * (labels == s).sum(axis=1)
            found.append((waved[q, s] * waved[q, t].conj()).real - alone)
        found.append((waved[1, UP] ** 2 * waved[2, DOWN].conj()).real)
        return np.array(found, dtype=float).T

    def expected(self, theta, flips):
        """Return Σ_labels ∫ of features and joint density after a rotation and then flips."""
        points = grid(np.array([5]), RING, 3)  # harmonics: 1 of the density, 2 of the features
        labels = list(product([UP, DOWN], repeat=3))
        total = 0.0
        for before, after in product(labels, labels):
            seen = np.broadcast_to(after, points.shape[:2])
            density = spinors.joint_density(self.SETS, theta, points, np.array(before), RING)
            density *= flips[after, before].prod() * RING[0] ** 3
            total = total + (self.features(points, seen) * density[:, None]).mean(axis=0)
        return total

    def test_rotated_draws_and_flipped_draws_follow_their_own_law_only(self):
        chances = spinors.rotation(self.THETA) ** 2
        laws = (self.expected(self.THETA, np.eye(2)), self.expected(0.0, chances))
        for seed, routine in enumerate((spinors.draw, spinors.draw_incoherent)):
            rng = np.random.default_rng(4100 + seed)
            found = self.features(*routine(self.SETS, self.THETA, RING, 40_000, rng))
            assert hotelling_p_value(found, laws[seed]) > ALPHA
            assert hotelling_p_value(found, laws[1 - seed]) < 1e-12

    def test_shape_range_and_numbers(self):
        sets, sides = TINY["sheet"]
        for theta, numbers in ((QUARTER, {1, 2, 3}), (0.0, {2})):
            positions, labels = spinors.draw(sets, theta, sides, 500, np.random.default_rng(7))
            assert positions.shape == (500, 4, 2)
            assert ((positions >= 0) & (positions < sides)).all()
            assert set((labels == UP).sum(axis=1)) == numbers
