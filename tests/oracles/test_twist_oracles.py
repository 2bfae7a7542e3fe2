"""The oracle of twisted boundaries against exact fractions, listed sets and its own other route.

Nothing here is random.
"""

from __future__ import annotations

from fractions import Fraction
from math import comb, pi

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats.qmc import Halton

from tests.oracles import enumeration, pair_density, thermal, twists

# Ratio of the sides, twist, population: nothing symmetric.
BOXES = [
    ((Fraction(1),), (0.3,), 4),
    ((Fraction(1), Fraction(3, 2)), (0.25, -0.1), 7),
    ((Fraction(1), Fraction(3, 2)), (-0.5, 0.17), 6),
    ((Fraction(1), Fraction(3, 2), Fraction(7, 4)), (0.4, -0.33, 0.05), 9),
]


def lengths(ratio) -> tuple[float, ...]:
    return tuple(float(side) for side in ratio)


class TestWaves:
    @pytest.mark.parametrize(("ratio", "twist", "population"), BOXES)
    def test_lowest_against_exact_fractions(self, ratio, twist, population):
        exact = [Fraction(shift) for shift in twist]
        (filled,) = enumeration.occupied_sets(population, ratio, exact)
        found = twists.ground(lengths(ratio), twist, population)
        assert {tuple(wave) for wave in found.waves} == {tuple(m + np.array(twist)) for m in filled}
        square = enumeration.mean_square_wavenumber(filled, lengths(ratio), twist)
        assert found.energy == pytest.approx(0.5 * population * square, rel=1e-13)

    @pytest.mark.parametrize(("ratio", "twist", "population"), BOXES)
    def test_all_below_an_energy(self, ratio, twist, population):
        """No wave of a far larger box of numbers is missed."""
        sides = np.array(lengths(ratio))
        whole = np.array(list(np.ndindex((31,) * len(sides)))) - 15
        energies = 0.5 * (((2 * pi * (whole + np.array(twist))) / sides) ** 2).sum(axis=1)
        for energy in (30.0, 160.0, 900.0):
            found = twists.waves_below(lengths(ratio), twist, energy)
            assert len(found) == (energies <= energy).sum()
            again = thermal.wave_energies(found, lengths(ratio))
            assert np.all(np.diff(again) >= 0)
            assert again == pytest.approx(np.sort(energies)[: len(found)], rel=1e-12)

    @pytest.mark.parametrize(("twist", "population"), [((0.0, 0.0), 4), ((0.5, 0.5), 5)])
    def test_open_shells_are_refused(self, twist, population):
        with pytest.raises(ValueError, match="more than one set"):
            twists.ground((1.0, 1.0), twist, population)

    def test_a_whole_twist_is_none_and_a_mirrored_one_has_the_same_energy(self):
        sides = (1.0, 1.5)
        one = twists.ground(sides, (0.2, -0.4), 8)
        for other in ((1.2, -0.4), (0.2, 0.6), (-0.2, -0.4), (-0.2, 0.4)):
            assert twists.ground(sides, other, 8).energy == pytest.approx(one.energy, rel=1e-13)
        assert twists.ground(sides, (0.3, -0.4), 8).energy != pytest.approx(one.energy, rel=1e-3)


class TestFillings:
    @pytest.mark.parametrize(("ratio", "twist", "population"), BOXES)
    def test_pair_correlation_of_one_determinant(self, ratio, twist, population):
        filling = twists.ground(lengths(ratio), twist, population)
        edges = np.linspace(0.0, 0.5, 4)
        exact = pair_density.bin_averages(
            enumeration.occupied_sets(population, ratio, [Fraction(shift) for shift in twist]),
            lengths(ratio),
            edges,
        )
        assert filling.pair_correlation(edges, population) == pytest.approx(exact, abs=1e-11)
        doubled = filling.pair_correlation(edges, 2 * population)
        assert doubled == pytest.approx(exact / 4, abs=1e-11)

    def test_structure_factor(self):
        sides, twist = (1.0, 1.5), (0.25, -0.1)
        filling = twists.ground(sides, twist, 8)
        (filled,) = enumeration.occupied_sets(
            8, (Fraction(1), Fraction(3, 2)), [Fraction(shift) for shift in twist]
        )
        for transfer in ((1, 0), (0, 1), (1, 1), (1, -1), (2, -3)):
            exact = enumeration.structure_factor(filled, transfer)
            assert filling.structure_factor(transfer) == pytest.approx(float(exact), abs=1e-14)
        # a mirrored twist is told apart by these two alone
        assert filling.structure_factor((1, 1)) != filling.structure_factor((1, -1))

    @pytest.mark.parametrize("population", [2, 4, 10])
    def test_even_ring_at_half_a_twist(self, population):
        """min(m, N)/N: Diaconis & Evans, Trans. AMS 353, 2615 (2001)."""
        filling = twists.ground((1.0,), (-0.5,), population)
        found = [filling.structure_factor((m,)) for m in range(1, 12)]
        assert found == pytest.approx([min(m, population) / population for m in range(1, 12)])

    @pytest.mark.parametrize("temperature", [3.0, 12.0])
    def test_fixed_population_by_listing_sets(self, temperature):
        sides, twist = (1.0, 1.5), (0.25, -0.1)
        filling = twists.canonical(sides, twist, 3, temperature)
        energies = thermal.wave_energies(filling.waves, sides)
        few = energies[energies < energies[0] + 16 * temperature]
        sets, probabilities = thermal.canonical_sets(few, 3, temperature)
        assert len(sets) == comb(len(few), 3)
        mean, pairs = thermal.averages(sets, probabilities, len(few))
        assert filling.population == pytest.approx(3, rel=1e-12)
        assert filling.mean[: len(few)] == pytest.approx(mean, abs=2e-6)
        assert filling.pairs[: len(few), : len(few)] == pytest.approx(pairs, abs=2e-6)

    def test_cold_limit(self):
        sides, twist = (1.0, 1.5), (0.25, -0.1)
        cold = twists.ground(sides, twist, 5)
        for filling in (
            twists.canonical(sides, twist, 5, 0.05),
            twists.grand_canonical(sides, twist, 5.0, 0.05),
        ):
            assert filling.energy == pytest.approx(cold.energy, rel=1e-10)
            assert filling.population == pytest.approx(5, rel=1e-12)

    def test_a_potential_gives_back_its_population(self):
        sides, twist, temperature = (1.0, 1.5), (0.25, -0.1), 20.0
        filling = twists.at_potential(sides, twist, 35.0, temperature)
        other = twists.grand_canonical(sides, twist, filling.population, temperature)
        shared = min(len(filling.waves), len(other.waves))
        assert other.mean[:shared] == pytest.approx(filling.mean[:shared], rel=1e-10)
        assert other.energy == pytest.approx(filling.energy, rel=1e-10)


class TestAveragesAtFixedPopulation:
    @pytest.mark.parametrize(
        ("dimension", "population", "points", "percent"),
        # averaged over twists at fixed N: recomputed independently to the digits shown
        [(2, 49, 80, "+0.08"), (3, 33, 24, "+0.24"), (3, 57, 24, "+0.08")],
    )
    def test_kinetic_energy_against_the_infinite_system(
        self, dimension, population, points, percent
    ):
        fine, coarse = (
            100 * twists.energy_excess(dimension, population, count)
            for count in (points, points // 2)
        )
        assert abs(fine - coarse) < 2e-3
        assert f"{fine:+.2f}" == percent

    def test_grid_of_a_part_is_the_grid_of_all(self):
        """Midpoints of [0, ½)² against waves listed at each of twice as many twists an axis."""
        found = twists.energy_excess(2, 5, 3)
        aside = twists.twist_grid(6, 2) + np.array(
            [1e-7, 3e-7]
        )  # away from the degeneracies of a square
        energies = [twists.ground((1.0, 1.0), twist, 5).energy for twist in aside]
        infinite = 5 * 0.25 * thermal.fermi_wavenumber(2, 5) ** 2
        assert np.mean(energies) / infinite - 1 == pytest.approx(found, abs=1e-6)


class TestAveragesAtFixedPotential:
    def test_numbers_of_two_equal_components(self):
        """2D, ⟨N⟩ = 49: ⟨N²⟩/⟨N⟩² − 1 ≈ 9e-4, recomputed independently to the digit shown."""
        cold = twists.cold_amplitude(2, 49.0)
        found = twists.number_correlation((1.0, 1.0), (cold, cold), 60.0) - 1
        assert f"{found:.0e}" == "9e-04"
        # f² averages to 4/(π z³) far away: what lies beyond is 2π ∫ 4 dR/(π (k_F R)³) R
        beyond = 8 / thermal.fermi_wavenumber(2, 49.0) ** 3 / 60.0
        some = Halton(2, scramble=False).random(6000) - 0.5
        wavenumber = thermal.fermi_wavenumber(2, 49.0)
        numbers = np.array([len(twists.ball((1, 1), twist, wavenumber).waves) for twist in some])
        assert np.mean((numbers / 49) ** 2) - 1 == pytest.approx(found + beyond, rel=0.05)
        assert numbers.mean() == pytest.approx(49, rel=1e-3)

    def test_numbers_on_a_ring(self):
        """N(τ) is one of two whole numbers: a mean of 4.3 gives a variance of 0.3 · 0.7."""
        cold = twists.cold_amplitude(1, 4.3)
        found = twists.number_correlation((1.0,), (cold, cold), 3000.0)
        assert 4.3**2 * (found - 1) == pytest.approx(0.21, abs=1e-4)
        both = (cold, twists.cold_amplitude(1, 2.0))  # a whole mean does not vary
        assert twists.number_correlation((1.0,), both, 3000.0) == pytest.approx(1, abs=1e-12)

    @pytest.mark.parametrize(
        ("sides", "density", "reach", "points", "close"),
        [((1.0,), 4.3, 300.0, 400, 1e-3), ((1.0, 1.5), 5.0, 20.0, 1000, 2e-3)],
    )
    def test_cold_images_against_many_twists(self, sides, density, reach, points, close):
        wavenumber = thermal.fermi_wavenumber(len(sides), density)
        edges = [0.0, 0.2, 0.35, 0.5]
        some = Halton(len(sides), scramble=False).random(points) - 0.5
        population = density * np.prod(sides)
        mean = np.mean(
            [
                twists.ball(sides, twist, wavenumber).pair_correlation(edges, population)
                for twist in some
            ],
            axis=0,
        )
        cold = twists.cold_amplitude(len(sides), density)
        found = twists.image_pair_correlation(sides, cold, edges, reach, 2 * wavenumber)
        assert found == pytest.approx(mean, abs=close)

    @pytest.mark.parametrize(("sides", "reduced"), [((1.0,), 0.1), ((1.0, 1.5), 0.3)])
    def test_warm_images_against_a_grid_of_twists(self, sides, reduced):
        """Both fall off exponentially, in the images and in the points of the grid."""
        dimension, density = len(sides), 4.3
        wavenumber = thermal.fermi_wavenumber(dimension, density)
        temperature = reduced * 0.5 * wavenumber**2
        gas = thermal.InfiniteGas(dimension, density, temperature)
        edges = [0.0, 0.2, 0.35, 0.5]
        population = density * np.prod(sides)
        fillings = [
            twists.at_potential(sides, twist, gas.chemical_potential, temperature)
            for twist in twists.twist_grid(10, dimension, 0.37)
        ]
        numbers = np.array([filling.population for filling in fillings])
        energy = np.mean([filling.energy for filling in fillings])
        # exact: density and energy of the infinite system
        assert numbers.mean() == pytest.approx(population, rel=1e-8)
        assert energy == pytest.approx(population * gas.energy(), rel=1e-8)
        warm = twists.warm_amplitude(dimension, density, temperature)
        correlation = twists.number_correlation(sides, (warm, warm), 4.0)
        assert np.mean(numbers**2) / population**2 == pytest.approx(correlation, rel=1e-8)
        assert correlation - 1 > 1e-4
        mean = np.mean([f.pair_correlation(edges, population) for f in fillings], axis=0)
        found = twists.image_pair_correlation(sides, warm, edges, 4.0, 4 * wavenumber)
        assert found == pytest.approx(mean, abs=1e-8)

    def test_amplitudes(self):
        radii = np.array([0.0, 0.1, 0.7, 2.3])
        for dimension in (1, 2, 3):
            energy = 0.5 * thermal.fermi_wavenumber(dimension, 0.9) ** 2
            gas = thermal.InfiniteGas(dimension, 0.9, 0.5 * energy)
            warm = twists.warm_amplitude(dimension, 0.9, 0.5 * energy)
            exact = [gas.amplitude(float(r)) for r in radii]
            assert warm(radii) == pytest.approx(exact, abs=1e-9)
            cold = twists.cold_amplitude(dimension, 0.9)
            colder = thermal.InfiniteGas(dimension, 0.9, 1e-3 * energy)
            exact = [colder.amplitude(float(r)) for r in radii]
            assert cold(radii) == pytest.approx(exact, abs=1e-5)

    def test_cold_energy_of_a_ring(self):
        """Averaged over twists, all |k| ≤ k_F have the energy of the infinite system."""
        wavenumber = thermal.fermi_wavenumber(1, 4.3)
        mean, _ = quad(
            lambda shift: twists.ball((1.0,), (shift,), wavenumber).energy,
            -0.5,
            0.5,
            points=[-0.15, 0.15],
            limit=200,
        )
        assert mean == pytest.approx(4.3 * wavenumber**2 / 6, rel=1e-6)
