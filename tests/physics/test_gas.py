"""Scales of the gas against textbook numbers and a brute-force volume."""

from __future__ import annotations

from dataclasses import replace
from itertools import product
from math import pi, sqrt

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import constants
from scipy.stats import ttest_1samp

from pairmc.physics.gas import (
    Gas,
    ball_volume,
    density_of_fermi_wavenumber,
    density_of_wigner_seitz_radius,
    fermi_wavenumber,
)
from pairmc.physics.system import System, build_system, pair_labels
from pairmc.units import Units
from tests.oracles import shells

FAMILY_ALPHA = 1e-4
STATISTICAL_CHECKS = 3
ALPHA = FAMILY_ALPHA / STATISTICAL_CHECKS

HARTREE_UNITS = Units(length="bohr", metres=5.29177210544e-11, energy="hartree", kinetic=1.0)
GASES = [
    Gas(1, ("up",), (7,), 0.4),
    Gas(2, ("up", "down"), (49, 37), 1.1),
    Gas(3, ("a", "b", "c"), (7, 19, 19), 2.5),
]


def electron_gas(dimension: int, radius: float, populations: tuple[int, ...]) -> Gas:
    """Return electrons of this r_s in bohr."""
    names = ("up", "down")[: len(populations)]
    density = density_of_wigner_seitz_radius(dimension, radius)
    return Gas(dimension, names, populations, density, HARTREE_UNITS)


def kinetic_energy(gas: Gas) -> float:
    """Return the infinite gas's energy per particle, Σ_s N_s E_F,s d/(d + 2)/N."""
    energies = np.array(gas.fermi_energies)
    return (
        float(energies @ np.array(gas.populations))
        * gas.dimension
        / (gas.dimension + 2)
        / gas.particles
    )


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_ball_volume_against_quadrature(dimension):
    _, weights = shells.shell_rule(dimension, 0.0, 1.7, 1.0)
    assert ball_volume(dimension, 1.7) == pytest.approx(weights.sum(), rel=1e-13)


@pytest.mark.parametrize(
    ("dimension", "populations", "energy"),
    [
        # Kinetic energy times r_s² in hartree: Giuliani & Vignale, Quantum Theory of the Electron
        # Liquid (2005), ch. 1; Mahan, Many-Particle Physics, ch. 5 (from memory).
        (3, (57, 57), 1.104951),
        (3, (57,), 1.754000),
        (2, (49, 49), 0.5),
        (2, (49,), 1.0),
    ],
)
def test_kinetic_energy_of_the_electron_gas(dimension, populations, energy):
    gas = electron_gas(dimension, 2.0, populations)
    assert kinetic_energy(gas) * 2.0**2 == pytest.approx(energy, abs=6e-7)


def test_forgetting_spin_is_seen():
    """Control: k_F of the total density gives the energy of the polarised gas."""
    gas = electron_gas(3, 2.0, (57, 57))
    wrong = 0.3 * fermi_wavenumber(3, gas.total_density) ** 2
    assert abs(wrong * 4 - 1.104951) > 0.6


@pytest.mark.parametrize(
    ("dimension", "product"),
    [
        # k_F r_s of the unpolarised gas: π/4, √2 and (9π/4)^(1/3) = 1.91916 (same textbooks).
        (1, pi / 4),
        (2, sqrt(2)),
        (3, 1.9191582926775128),
    ],
)
def test_fermi_wavenumber_times_wigner_seitz_radius(dimension, product):
    gas = electron_gas(dimension, 3.7, (9, 9))
    assert gas.wigner_seitz_radius == pytest.approx(3.7, rel=1e-14)
    assert gas.fermi_wavenumbers[0] * 3.7 == pytest.approx(product, rel=1e-14)


@pytest.mark.parametrize("gas", GASES)
def test_fermi_wavenumber_by_counting_plane_waves(gas):
    """The number of plane waves below k_F, averaged over the twist, is exactly N.

    Random twists, one seed; a t-test of the mean at ALPHA. Controls: k_F 2 % too large or small.
    """
    ratio = (1.0, 1.5, 1.75)[: gas.dimension]
    wavenumber = gas.fermi_wavenumbers[gas.majority]
    population = gas.populations[gas.majority]
    rng = np.random.default_rng([41, gas.dimension])
    exact, small, large = (
        _waves_below(factor * wavenumber, gas.box(ratio), rng) for factor in (1.0, 0.98, 1.02)
    )
    assert _mean_p_value(exact, population) > ALPHA
    assert _mean_p_value(small, population) < ALPHA
    assert _mean_p_value(large, population) < ALPHA


def _mean_p_value(counts: list[int], expected: int) -> float:
    """Return the p-value of "the mean is the expected number"; on a ring nothing varies."""
    if len(set(counts)) == 1:
        return float(counts[0] == expected)
    return float(ttest_1samp(counts, expected).pvalue)


def _waves_below(
    wavenumber: float, sides: tuple[float, ...], rng: np.random.Generator
) -> list[int]:
    """Return how many plane waves lie below a wave number, for each of 4000 random twists."""
    reach = int(wavenumber * max(sides) / (2 * pi)) + 2
    numbers = np.array(list(product(range(-reach, reach + 1), repeat=len(sides))))
    counts = []
    for twist in rng.random((4000, len(sides))) - 0.5:
        squares = ((2 * pi * (numbers + twist) / np.array(sides)) ** 2).sum(axis=1)
        counts.append(int(np.count_nonzero(squares < wavenumber**2)))
    return counts


@settings(max_examples=50, deadline=None, derandomize=True)
@given(st.integers(1, 3), st.floats(1e-6, 1e6), st.floats(1e-3, 1e3))
def test_wavenumber_density_and_scale(dimension, density, factor):
    wavenumber = fermi_wavenumber(dimension, density)
    assert density_of_fermi_wavenumber(dimension, wavenumber) == pytest.approx(density, rel=1e-12)
    scaled = fermi_wavenumber(dimension, density * factor**dimension)
    assert scaled == pytest.approx(factor * wavenumber, rel=1e-12)


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_textbook_wavenumbers(dimension):
    """π n, √(4π n), (6π² n)^(1/3) of one component (textbook, from memory)."""
    formula = {1: pi * 0.7, 2: sqrt(4 * pi * 0.7), 3: (6 * pi**2 * 0.7) ** (1 / 3)}[dimension]
    assert fermi_wavenumber(dimension, 0.7) == pytest.approx(formula, rel=1e-14)


@pytest.mark.parametrize("gas", GASES)
def test_box_has_the_density_and_the_ratio(gas):
    ratio = (1.0, 1.5, 1.75)[: gas.dimension]
    sides = gas.box(ratio)
    assert gas.particles / np.prod(sides) == pytest.approx(gas.total_density, rel=1e-14)
    assert np.array(sides) / sides[0] == pytest.approx(ratio, rel=1e-14)
    assert sum(gas.densities) == pytest.approx(gas.total_density, rel=1e-14)
    assert gas.densities == pytest.approx([n / np.prod(sides) for n in gas.populations])
    assert build_system(gas, ratio).sides == sides


def test_majority_and_polarisation():
    assert [gas.majority for gas in GASES] == [0, 0, 1]
    assert GASES[0].polarisation == 1.0
    assert GASES[1].polarisation == pytest.approx(12 / 86)
    assert GASES[2].polarisation is None
    assert Gas(2, ("up", "down"), (21, 49), 1.0).polarisation == pytest.approx(0.4)


def test_fermi_temperature_of_lithium():
    """ħ²k_F²/(2 m k_B) in a sheet of one atom per square micrometre of each state, by hand."""
    mass = 6.015 * constants.atomic_mass
    kinetic = constants.hbar**2 / mass / 1e-12
    units = Units(length="um", metres=1e-6, energy="J", joules=1.0, kinetic=kinetic)
    gas = Gas(2, ("up", "down"), (49, 49), 2.0, units)
    wavenumber = sqrt(4 * pi * 1e12)
    temperature = (constants.hbar * wavenumber) ** 2 / (2 * mass * constants.k)
    assert 1e-8 < temperature < 1e-6
    assert gas.fermi_temperatures == pytest.approx([temperature, temperature], rel=1e-8)
    assert gas.fermi_energies == pytest.approx([temperature * constants.k] * 2, rel=1e-8)


def test_no_energy_without_a_mass_and_no_kelvin_without_joules():
    massless = replace(GASES[1], units=Units(length="um", metres=1e-6, kinetic=None))
    assert massless.fermi_energies is None
    assert massless.fermi_temperatures is None
    scaled = GASES[1]
    assert scaled.fermi_temperatures is None
    assert scaled.fermi_energies == pytest.approx([0.5 * k * k for k in scaled.fermi_wavenumbers])


def test_pair_labels():
    def gas_of(names: tuple[str, ...]) -> System:
        return build_system(Gas(1, names, (1,) * len(names), 1.0), (1.0,))

    assert pair_labels(gas_of(("up", "down"))) == (
        ("up-up", 0, 0),
        ("up-down", 0, 1),
        ("down-down", 1, 1),
    )
    assert [label for label, *_ in pair_labels(gas_of(("a", "b", "c")))] == [
        "a-a",
        "a-b",
        "a-c",
        "b-b",
        "b-c",
        "c-c",
    ]
