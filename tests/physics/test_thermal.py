"""The infinite warm gas against plain integrals over wave numbers, closed forms and limits."""

from __future__ import annotations

from math import exp, pi, sqrt

import numpy as np
import pytest
from scipy.special import j1

from pairmc.physics import thermal
from pairmc.physics.gas import fermi_wavenumber
from tests.oracles import thermal as oracle

DENSITY = 0.83
TEMPERATURES = (1e-3, 0.01, 0.03, 0.1, 0.3, 1.0, 3.0, 10.0, 100.0)

everywhere = pytest.mark.parametrize("dimension", [1, 2, 3])
at_all_temperatures = pytest.mark.parametrize("reduced", TEMPERATURES)


def fermi_energy(dimension: int, density: float = DENSITY) -> float:
    """Return E_F, ħ = m = 1."""
    return 0.5 * oracle.fermi_wavenumber(dimension, density) ** 2


@everywhere
@at_all_temperatures
def test_against_plain_integrals(dimension, reduced):
    T = reduced * fermi_energy(dimension)
    gas = oracle.InfiniteGas(dimension, DENSITY, T)
    scale = fermi_energy(dimension) + T
    potential = thermal.chemical_potential(dimension, DENSITY, T)
    assert potential == pytest.approx(gas.chemical_potential, abs=1e-10 * scale)
    energy = thermal.energy_per_particle(dimension, DENSITY, T)
    assert energy == pytest.approx(gas.energy(), rel=1e-9)
    structure = thermal.long_wavelength_structure_factor(dimension, DENSITY, T)
    assert structure == pytest.approx(gas.long_wavelength_structure_factor(), rel=1e-8)


@everywhere
@at_all_temperatures
def test_amplitude_against_plain_integrals(dimension, reduced):
    T = reduced * fermi_energy(dimension)
    gas = oracle.InfiniteGas(dimension, DENSITY, T)
    r = np.array([0.0, 0.1, 0.7, 2.0, 5.0, 12.0]) / gas.fermi_wavenumber
    found = thermal.amplitude(dimension, DENSITY, T, r)
    assert found.shape == r.shape
    assert found == pytest.approx([gas.amplitude(float(x)) for x in r], abs=1e-10)


@everywhere
def test_amplitude_far_away(dimension):
    """At k_F r up to 400 a cold gas still has its tail; elsewhere nothing is left."""
    r = np.array([50.0, 150.0, 400.0]) / fermi_wavenumber(dimension, DENSITY)
    T = 1e-3 * fermi_energy(dimension)
    gas = oracle.InfiniteGas(dimension, DENSITY, T)
    expected = [gas.amplitude(float(x)) for x in r]
    assert thermal.amplitude(dimension, DENSITY, T, r) == pytest.approx(expected, abs=1e-10)
    warm = thermal.amplitude(dimension, DENSITY, 1e3 * T, r)
    assert warm == pytest.approx(0, abs=1e-12)


def test_amplitude_keeps_the_shape_of_its_argument():
    r = np.linspace(0.0, 3.0, 12).reshape(3, 4)
    found = thermal.amplitude(2, DENSITY, 1.0, r)
    assert found.shape == (3, 4)
    assert np.array_equal(found.ravel(), thermal.amplitude(2, DENSITY, 1.0, r.ravel()))


def test_many_separations_at_once_give_the_same_as_few():
    r = np.linspace(0.0, 3.0, 4321)
    found = thermal.amplitude(3, DENSITY, 1.0, r)
    few = thermal.amplitude(3, DENSITY, 1.0, r[[1999, 2000, 4320]])
    assert found[[1999, 2000, 4320]] == pytest.approx(few, abs=1e-14)


# T/T_F: μ/E_F, E/(N E_F), S(0), c of g = c (k_F r)²; 2D closed forms, recomputed independently.
@pytest.mark.parametrize(
    ("reduced", "potential", "energy", "structure", "curvature"),
    [
        (0.1, 0.99999546, 0.51644435, 0.09999546, 0.25822217),
        (0.5, 0.92729327, 0.80347364, 0.43233236, 0.40173682),
        (1.0, 0.54132485, 1.27750463, 0.63212056, 0.63875232),
    ],
)
@pytest.mark.parametrize("density", [0.02, 0.83, 40.0])
def test_table_of_two_dimensions(reduced, potential, energy, structure, curvature, density):
    scale = fermi_energy(2, density)
    T = reduced * scale
    assert thermal.chemical_potential(2, density, T) / scale == pytest.approx(potential, abs=6e-9)
    assert thermal.energy_per_particle(2, density, T) / scale == pytest.approx(energy, abs=6e-9)
    found = thermal.long_wavelength_structure_factor(2, density, T)
    assert found == pytest.approx(structure, abs=6e-9)
    # g/(k_F r)² is even in r: one step of extrapolation leaves an error of fourth order
    z = np.array([0.02, 0.04])
    g = 1 - thermal.amplitude(2, density, T, z / sqrt(4 * pi * density)) ** 2
    near, far = g / z**2
    assert (4 * near - far) / 3 == pytest.approx(curvature, abs=1e-6)


@at_all_temperatures
def test_closed_forms_of_two_dimensions(reduced):
    scale = fermi_energy(2)
    potential, structure = oracle.plane_closed_forms(reduced)
    found = thermal.chemical_potential(2, DENSITY, reduced * scale) / scale
    assert found == pytest.approx(potential, rel=1e-12, abs=1e-12)
    found = thermal.long_wavelength_structure_factor(2, DENSITY, reduced * scale)
    assert found == pytest.approx(structure, rel=1e-10)


@everywhere
@at_all_temperatures
def test_curvature_is_the_kinetic_energy(dimension, reduced):
    """g ≈ (⟨k²⟩/d) r² = (2E/(N d)) r²."""
    T = reduced * fermi_energy(dimension)
    energy = thermal.energy_per_particle(dimension, DENSITY, T)
    r = np.array([0.01, 0.02]) / sqrt(2 * energy)
    near, far = (1 - thermal.amplitude(dimension, DENSITY, T, r) ** 2) / r**2
    assert (4 * near - far) / 3 == pytest.approx(2 * energy / dimension, rel=1e-6)


@everywhere
def test_cold_gas(dimension):
    """E/N → d/(d + 2) E_F, μ → E_F, S(0) → (d/2) T/T_F; corrections of order (T/T_F)²."""
    scale = fermi_energy(dimension)
    T = 1e-3 * scale
    assert thermal.chemical_potential(dimension, DENSITY, T) == pytest.approx(scale, rel=1e-5)
    found = thermal.energy_per_particle(dimension, DENSITY, T)
    assert found == pytest.approx(dimension / (dimension + 2) * scale, rel=1e-5)
    found = thermal.long_wavelength_structure_factor(dimension, DENSITY, T)
    assert found == pytest.approx(0.5e-3 * dimension, rel=1e-5)
    # the filled Fermi ball (Giuliani & Vignale, Quantum Theory of the Electron Liquid, 2005, ch. 1)
    z = np.array([0.5, 2.0])
    r = z / fermi_wavenumber(dimension, DENSITY)
    cold = {
        1: np.sin(z) / z,
        2: 2 * j1(z) / z,
        3: 3 * (np.sin(z) - z * np.cos(z)) / z**3,
    }[dimension]
    assert thermal.ground_amplitude(dimension, z) == pytest.approx(cold, rel=1e-12)
    assert thermal.amplitude(dimension, DENSITY, T, r) == pytest.approx(cold, abs=1e-5)


@everywhere
def test_hot_gas_is_classical(dimension):
    """E/N → (d/2) k_B T, S(0) → 1, f² → e^{−2πr²/λ²}, λ² = 2π/k_B T."""
    T = 100 * fermi_energy(dimension)
    quantum = DENSITY * (2 * pi / T) ** (dimension / 2)  # n λᵈ, the size of all corrections
    found = thermal.energy_per_particle(dimension, DENSITY, T)
    assert found == pytest.approx(0.5 * dimension * T, rel=quantum)
    found = thermal.long_wavelength_structure_factor(dimension, DENSITY, T)
    assert found == pytest.approx(1, abs=quantum)
    r = np.array([0.0, 0.2, 0.5, 0.9]) * sqrt(2 * pi / T)
    squared = thermal.amplitude(dimension, DENSITY, T, r) ** 2
    classical = [exp(-2 * pi * x * x * T / (2 * pi)) for x in r]
    assert squared == pytest.approx(classical, abs=quantum)
    if dimension > 1:
        assert quantum < 0.05
    for x in r:
        series = oracle.fugacity_amplitude(dimension, DENSITY, T, float(x))
        found = thermal.amplitude(dimension, DENSITY, T, np.array([x]))[0]
        assert found == pytest.approx(series, abs=1e-12)


@everywhere
@at_all_temperatures
def test_only_the_reduced_temperature_matters(dimension, reduced):
    """Two densities at the same T/T_F are the same numbers on another ruler."""
    values = []
    for density in (1e-4, 1e6):
        scale, k = fermi_energy(dimension, density), fermi_wavenumber(dimension, density)
        T = reduced * scale
        values.append(
            [
                thermal.chemical_potential(dimension, density, T) / scale,
                thermal.energy_per_particle(dimension, density, T) / scale,
                thermal.long_wavelength_structure_factor(dimension, density, T),
                *thermal.amplitude(dimension, density, T, np.array([0.0, 0.4, 3.0]) / k),
            ]
        )
    assert values[0] == pytest.approx(values[1], rel=1e-9, abs=1e-12)
    assert values[0][3] == pytest.approx(1, abs=1e-12)


@everywhere
def test_structure_factor_is_one_less_the_hole(dimension):
    """S(0) = 1 − n ∫ f² dV, the trapezoid rule over separations."""
    T = 0.8 * fermi_energy(dimension)
    r = np.linspace(0.0, 15.0 / fermi_wavenumber(dimension, DENSITY), 1501)
    f = thermal.amplitude(dimension, DENSITY, T, r)
    surface = {1: 2.0, 2: 2 * pi, 3: 4 * pi}[dimension]
    hole = DENSITY * np.trapezoid(surface * r ** (dimension - 1) * f**2, r)
    found = thermal.long_wavelength_structure_factor(dimension, DENSITY, T)
    assert found == pytest.approx(1 - hole, abs=2e-5)


@pytest.mark.parametrize("reduced", [0.1, 1.0])
def test_other_statistics_would_be_seen(reduced):
    """Control: the classical amplitude in place of the Fermi gas's."""
    T = reduced * fermi_energy(2)
    r = np.array([0.5, 1.0])
    classical = np.exp(-0.5 * T * r**2)
    assert np.abs(thermal.amplitude(2, DENSITY, T, r) - classical).max() > 1e-3
