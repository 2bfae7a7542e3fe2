"""The warm oracles against each other, closed forms, and the numbers of the physics notes.

Nothing here is random.
"""

from __future__ import annotations

from math import comb, exp, pi, sqrt

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import j1

from tests.oracles import enumeration, pair_density, thermal

# Energies of a few orbitals: distinct; with levels; two levels a relative 1e-9 apart.
DISTINCT = [0.0, 0.37, 0.9, 1.1, 1.75, 2.2, 3.1]
LEVELS = [0.0, 1.0, 1.0, 1.0, 1.0, 2.0, 2.0, 2.0, 2.0]
CLOSE = [0.1, 1.0, 1.0 + 1e-9, 1.0 + 2e-9, 2.0, 2.0, 2.0 + 2e-9, 3.0]
SPECTRA = [DISTINCT, LEVELS, CLOSE]


def square_gas(population: int, reduced_temperature: float, largest: int):
    """Return waves, energies and k_B T of a unit square."""
    waves = thermal.box_waves((1.0, 1.0), largest)
    fermi_energy = 0.5 * 4 * pi * population
    energies = thermal.wave_energies(waves, (1.0, 1.0))
    return waves, energies, reduced_temperature * fermi_energy


class TestFixedPopulation:
    @pytest.mark.parametrize("energies", SPECTRA)
    @pytest.mark.parametrize("population", [1, 2, 4, 5])
    @pytest.mark.parametrize("temperature", [0.05, 0.6, 50.0])
    def test_exact_integers_against_all_sets(self, energies, population, temperature):
        sets, probabilities = thermal.canonical_sets(energies, population, temperature)
        assert len(sets) == comb(len(energies), population)
        mean, pairs = thermal.averages(sets, probabilities, len(energies))
        exact_mean, exact_pairs = thermal.exact_canonical(energies, population, temperature)
        assert exact_mean == pytest.approx(mean, rel=1e-12, abs=1e-15)
        assert exact_pairs == pytest.approx(pairs, rel=1e-12, abs=1e-15)

    def test_two_orbitals_by_hand(self):
        mean, pairs = thermal.exact_canonical([0.0, 0.7], 1, 0.5)
        filled = 1 / (1 + exp(-1.4))
        assert mean == pytest.approx([filled, 1 - filled], rel=1e-14)
        assert pairs[0, 1] == 0.0

    @pytest.mark.parametrize("energies", SPECTRA)
    def test_identities_of_pairs(self, energies):
        """⟨n_i n_j⟩ = (x_j⟨n_i⟩ − x_i⟨n_j⟩)/(x_j − x_i), and Σ_{j≠i} ⟨n_i n_j⟩ = (N − 1)⟨n_i⟩."""
        mean, pairs = thermal.exact_canonical(energies, 4, 0.7)
        x = np.exp(-np.array(energies) / 0.7)
        far = np.abs(np.subtract.outer(x, x)) > 1e-3
        crossed = np.outer(mean, x) - np.outer(x, mean)
        assert pairs[far] * (x[None, :] - x[:, None])[far] == pytest.approx(crossed[far], abs=1e-14)
        assert pairs.sum(axis=1) - mean == pytest.approx(3 * mean, rel=1e-13)

    def test_alternating_signs_agree_when_hot_and_fail_when_cold(self):
        """Borrmann & Franke (1993): good at T_F, no digit left at a tenth of it."""
        _, energies, hot = square_gas(21, 1.0, 12)
        mean, _ = thermal.exact_canonical(energies, 5, hot)
        assert thermal.alternating_canonical(energies, 5, hot) == pytest.approx(mean, abs=1e-12)
        _, energies, cold = square_gas(21, 0.1, 6)
        mean, _ = thermal.exact_canonical(energies, 21, cold)
        assert mean.sum() == pytest.approx(21, abs=1e-12)
        wrong = thermal.alternating_canonical(energies, 21, cold)
        assert np.abs(wrong - mean).max() > 0.5

    def test_cold_gas_is_the_equal_mixture_of_the_open_shell(self):
        mean, pairs = thermal.exact_canonical(LEVELS, 3, 1e-3)
        assert mean[:6] == pytest.approx([1, 0.5, 0.5, 0.5, 0.5, 0], abs=1e-15)
        assert pairs[1, 2] == pytest.approx(1 / 6, rel=1e-14)


class TestFluctuatingPopulation:
    @pytest.mark.parametrize("energies", SPECTRA)
    def test_orbitals_are_independent(self, energies):
        sets, probabilities = thermal.grand_canonical_sets(energies, 2.6, 0.5)
        mean, pairs = thermal.averages(sets, probabilities, len(energies))
        assert probabilities.sum() == pytest.approx(1, abs=1e-14)
        assert mean == pytest.approx(thermal.fermi_occupations(energies, 2.6, 0.5), rel=1e-13)
        assert mean.sum() == pytest.approx(2.6, rel=1e-13)
        assert pairs == pytest.approx(thermal.independent_pairs(mean), abs=1e-14)

    @pytest.mark.parametrize("energies", SPECTRA)
    @pytest.mark.parametrize("population", [2, 5])
    def test_sets_of_one_population_are_canonical(self, energies, population):
        """Whatever the mean population they are taken from."""
        sets, probabilities = thermal.canonical_sets(energies, population, 0.5)
        for mean_population in (2.2, population):
            every = thermal.grand_canonical_sets(energies, mean_population, 0.5)
            kept, weights = thermal.restricted(*every, population)
            order = np.lexsort(kept.T[::-1])
            assert np.array_equal(kept[order], sets)
            assert weights[order] == pytest.approx(probabilities, rel=1e-11)


class TestTorus:
    def test_number_in_half_a_square(self):
        """2D, N = 21, T/T_F = 0.5, slab x < L/2: 2.8958 (fixed N), 5.1512 (grand canonical).

        In the square of half the side, a quarter of the area, 2.293 and 2.850. Recomputed
        independently from the definition to the digits shown.
        """
        waves, energies, temperature = square_gas(21, 0.5, 11)
        mean, pairs = thermal.exact_canonical(energies, 21, temperature)
        free = thermal.independent_pairs(thermal.fermi_occupations(energies, 21, temperature))
        assert mean.sum() == pytest.approx(21, rel=1e-12)
        slab, square = (0.5, 1.0), (0.5, 0.5)
        found = [
            thermal.box_window_variance(waves, together, window)
            for window in (slab, square)
            for together in (pairs, free)
        ]
        assert [f"{value:.4f}" for value in found[:2]] == ["2.8958", "5.1512"]
        assert [f"{value:.3f}" for value in found[2:]] == ["2.293", "2.850"]

    def test_whole_box_holds_all(self):
        waves, energies, temperature = square_gas(5, 0.5, 5)
        _, pairs = thermal.exact_canonical(energies, 5, temperature)
        assert thermal.box_window_variance(waves, pairs, (1.0, 1.0)) == pytest.approx(0, abs=1e-11)
        mean = thermal.fermi_occupations(energies, 5, temperature)
        free = thermal.box_window_variance(waves, thermal.independent_pairs(mean), (1.0, 1.0))
        assert free == pytest.approx((mean * (1 - mean)).sum(), rel=1e-12)

    def test_window_variance_of_one_determinant(self):
        """1D, N = 21, half the ring: 0.53858685 (recomputed independently)."""
        waves = np.arange(-10, 11)[:, None]
        found = thermal.box_window_variance(waves, np.ones((21, 21)), (0.5,))
        assert f"{found:.8f}" == "0.53858685"

    def test_pair_correlation_against_weighted_sets(self):
        """Averaging g over the sets that a warm gas occupies, by probability."""
        sides = (1.0, 1.5)
        waves = thermal.box_waves(sides, 2)
        energies = thermal.wave_energies(waves, sides)
        sets, probabilities = thermal.canonical_sets(energies, 3, 30.0)
        mean, pairs = thermal.averages(sets, probabilities, len(waves))
        assert mean.max() < 0.9
        displacements = np.random.default_rng(71).random((7, 2))
        found = thermal.pair_correlation(displacements, waves, pairs, sides)
        listed = [waves[members] for members in sets]
        expected = pair_density.pair_correlation(displacements, listed, sides, probabilities)
        assert found == pytest.approx(expected, abs=1e-12)

    def test_bins_of_a_filled_shell(self):
        (waves,) = enumeration.occupied_sets(5, (1, 1))
        edges = [0.0, 0.2, 0.35, 0.5]
        found = thermal.pair_correlation_bins(waves, np.ones((5, 5)), (1.0, 1.0), edges)
        expected = pair_density.bin_averages([waves], (1.0, 1.0), edges)
        assert found == pytest.approx(expected, abs=1e-12)

    def test_hole_of_a_large_torus_is_that_of_the_infinite_gas(self):
        """Grand canonical, warm: what the box adds falls exponentially with its side."""
        waves, energies, temperature = square_gas(60, 1.0, 24)
        mean = thermal.fermi_occupations(energies, 60, temperature)
        r = np.array([0.03, 0.06, 0.1])
        displacements = np.stack([r, 0 * r], axis=1)
        phases = 2 * pi * displacements @ waves.T
        amplitude = (np.cos(phases) @ mean) / 60
        gas = thermal.InfiniteGas(2, 60.0, temperature)
        assert amplitude == pytest.approx([gas.amplitude(x) for x in r], abs=1e-9)


class TestInfiniteGas:
    # T/T_F: μ/E_F, E/(N E_F), S(0), c; 2D closed forms, recomputed independently.
    PLANE = (
        (0.1, 0.99999546, 0.51644435, 0.09999546, 0.25822217),
        (0.5, 0.92729327, 0.80347364, 0.43233236, 0.40173682),
        (1.0, 0.54132485, 1.27750463, 0.63212056, 0.63875232),
    )

    @pytest.mark.parametrize("row", PLANE)
    def test_table_of_two_dimensions(self, row):
        reduced, potential, energy, structure, curvature = row
        gas = thermal.InfiniteGas(2, 0.7, reduced * 2 * pi * 0.7)
        assert gas.chemical_potential / gas.fermi_energy == pytest.approx(potential, abs=6e-9)
        assert gas.energy() / gas.fermi_energy == pytest.approx(energy, abs=6e-9)
        assert gas.long_wavelength_structure_factor() == pytest.approx(structure, abs=6e-9)
        assert thermal.plane_closed_forms(reduced) == pytest.approx(
            (potential, structure), abs=6e-9
        )
        r = 0.01 / gas.fermi_wavenumber
        # the next term is of relative order (k_F r)²
        assert gas.pair_correlation(r) / 0.01**2 == pytest.approx(curvature, rel=3e-4)

    @pytest.mark.parametrize("dimension", [1, 2, 3])
    def test_low_temperature(self, dimension):
        """S(0) → (d/2) T/T_F (from memory); E/N → d/(d + 2) E_F."""
        density = 0.9
        fermi_energy = 0.5 * thermal.fermi_wavenumber(dimension, density) ** 2
        gas = thermal.InfiniteGas(dimension, density, 1e-3 * fermi_energy)
        assert gas.long_wavelength_structure_factor() == pytest.approx(0.5e-3 * dimension, rel=1e-5)
        assert gas.energy() / fermi_energy == pytest.approx(dimension / (dimension + 2), rel=1e-4)
        z = gas.fermi_wavenumber * 1.3
        cold = {
            1: np.sin(z) / z,
            2: 2 * float(j1(z)) / z,
            3: 3 * (np.sin(z) - z * np.cos(z)) / z**3,
        }
        assert gas.amplitude(1.3) == pytest.approx(cold[dimension], abs=1e-5)

    @pytest.mark.parametrize("dimension", [1, 2, 3])
    @pytest.mark.parametrize("reduced", [8.0, 100.0])
    def test_against_the_expansion_in_the_fugacity(self, dimension, reduced):
        density = 1.1
        fermi_energy = 0.5 * thermal.fermi_wavenumber(dimension, density) ** 2
        temperature = reduced * fermi_energy
        gas = thermal.InfiniteGas(dimension, density, temperature)
        length = sqrt(2 * pi / temperature)
        for r in np.array([0.0, 0.2, 0.5, 1.0, 1.5]) * length:
            series = thermal.fugacity_amplitude(dimension, density, temperature, float(r))
            assert gas.amplitude(float(r)) == pytest.approx(series, abs=1e-10)

    @pytest.mark.parametrize("dimension", [1, 2, 3])
    def test_hole_holds_one_less_structure_factor(self, dimension):
        """n ∫ (g − 1) dV = −(1 − S(0)), by integrating over separations."""
        density = 0.8
        temperature = 0.8 * 0.5 * thermal.fermi_wavenumber(dimension, density) ** 2
        gas = thermal.InfiniteGas(dimension, density, temperature)
        surface = {1: 2.0, 2: 2 * pi, 3: 4 * pi}[dimension]
        hole, _ = quad(
            lambda r: surface * r ** (dimension - 1) * gas.amplitude(r) ** 2,
            0.0,
            6.0,
            epsabs=1e-6,
            epsrel=1e-6,
        )
        assert 1 - density * hole == pytest.approx(gas.long_wavelength_structure_factor(), abs=1e-5)
