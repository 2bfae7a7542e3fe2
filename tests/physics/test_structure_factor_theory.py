"""The exact structure factor of a box and of the infinite gas, against numbers from outside."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.integrate import quad

from pairmc.physics.gas import Gas
from pairmc.physics.system import System, build_system
from pairmc.physics.theory import structure_factor
from pairmc.physics.thermal import long_wavelength_structure_factor


def gas_of(dimension: int, population: int, reduced: float = 0.0, ensemble: str = "canonical"):
    gas = Gas(dimension, ("up",), (population,), 0.83, ensemble=ensemble)
    return replace(gas, thermal_energy=reduced * 0.5 * gas.fermi_wavenumbers[0] ** 2)


def step_of(system: System, steps: int) -> tuple[int, ...]:
    return (steps,) + (0,) * (system.gas.dimension - 1)


@pytest.mark.parametrize(
    ("dimension", "population", "steps", "value"),
    [
        (2, 49, 1, 9 / 49),
        (2, 49, 2, 16 / 49),
        (3, 57, 1, 21 / 57),
        (3, 57, 2, 34 / 57),
        # ring: min(m, N)/N, Diaconis & Evans, Trans. AMS 353, 2615 (2001)
        (1, 21, 5, 5 / 21),
        (1, 21, 40, 1.0),
    ],
)
def test_closed_shells_have_whole_numbers(dimension, population, steps, value):
    # the 2D and 3D values count orbitals k that are filled while k + q is empty
    system = build_system(gas_of(dimension, population), (1.0,) * dimension)
    found = structure_factor.expected(system, 0, step_of(system, steps))
    assert found == pytest.approx(value, abs=1e-12)


@pytest.mark.parametrize("x", [0.05, 0.4, 0.9, 1.3])
def test_cold_bulk_is_the_textbook_form(x):
    # Giuliani & Vignale, Quantum Theory of the Electron Liquid (2005), ch. 1, from memory
    forms = {
        1: x,
        2: 2 / np.pi * (np.arcsin(min(x, 1)) + x * np.sqrt(max(0, 1 - x * x))),
        3: 1.5 * x - 0.5 * x**3,
    }
    for dimension, form in forms.items():
        gas = gas_of(dimension, 21)
        q = 2 * x * gas.fermi_wavenumbers[0]
        wanted = min(form, 1.0) if x < 1 else 1.0
        assert structure_factor.bulk(gas, 0, q) == pytest.approx(wanted, abs=1e-12)


@pytest.mark.parametrize("reduced", [0.02, 0.1, 0.5, 1.0])
def test_warm_bulk_tends_to_the_long_wavelength_limit(reduced):
    for dimension in (1, 2, 3):
        gas = gas_of(dimension, 21, reduced)
        limit = long_wavelength_structure_factor(dimension, 0.83, gas.thermal_energy)
        assert structure_factor.bulk(gas, 0, 1e-3) == pytest.approx(limit, abs=1e-5)


def test_the_limit_in_two_dimensions_is_the_closed_form():
    # S(0) = (T/T_F)(1 − e^{−T_F/T}): 0.09999546, 0.43233236, 0.63212056 (recomputed)
    for reduced, value in ((0.1, 0.09999546), (0.5, 0.43233236), (1.0, 0.63212056)):
        gas = gas_of(2, 21, reduced)
        assert structure_factor.bulk(gas, 0, 1e-4) == pytest.approx(value, abs=2e-8)


def test_warm_bulk_in_one_dimension_is_a_plain_integral():
    gas = gas_of(1, 21, 0.3)
    T, k_F = gas.thermal_energy, gas.fermi_wavenumbers[0]
    # μ by bisection of the density, by quadrature
    low, high = -5.0 * k_F**2, 5.0 * k_F**2

    def filled(k: float, potential: float) -> float:
        return float(1.0 / (np.exp(min((0.5 * k * k - potential) / T, 600.0)) + 1.0))

    for _ in range(80):
        middle = 0.5 * (low + high)
        density = quad(filled, 0, 12 * k_F, args=(middle,), epsabs=1e-13)[0] / np.pi
        low, high = (middle, high) if density < 0.83 else (low, middle)
    for q in (0.3 * k_F, 1.7 * k_F):
        both = quad(
            lambda k, q=q: filled(k, middle) * filled(k + q, middle),
            -14 * k_F,
            14 * k_F,
            epsabs=1e-12,
            limit=400,
        )[0]
        wanted = 1 - both / (2 * np.pi * 0.83)
        assert structure_factor.bulk(gas, 0, q) == pytest.approx(wanted, abs=1e-9)


@pytest.mark.parametrize("ensemble", ["canonical", "grand-canonical"])
def test_a_large_warm_box_is_the_infinite_system(ensemble):
    gas = gas_of(2, 401, 0.5, ensemble)
    system = build_system(gas, (1.0, 1.0))
    q = system.axes[0].steps(np.array(3)).item()
    found = structure_factor.expected(system, 0, (3, 0))
    # the canonical gas differs by a term of order 1/N
    assert found == pytest.approx(structure_factor.bulk(gas, 0, q), abs=3e-3)


def test_each_twist_is_the_system_at_that_twist():
    twists = np.array([[0.1, -0.3], [0.45, 0.2], [-0.5, 0.0]])
    for reduced, ensemble in ((0.0, "canonical"), (0.0, "grand-canonical"), (0.3, "canonical")):
        system = build_system(gas_of(2, 13, reduced, ensemble), (1.0, 1.5), "averaged")
        found = structure_factor.at_twists(system, 0, (1, 0), twists)
        for twist, value in zip(twists, found, strict=True):
            alone = structure_factor.expected(system.at(twist), 0, (1, 0))
            assert value == pytest.approx(alone, abs=1e-12)


def test_populations_that_follow_the_twist_give_the_bulk_on_average():
    # shifted wave vectors cover all of space evenly, so the overlap of two Fermi balls is exact
    system = build_system(gas_of(2, 21, 0.0, "grand-canonical"), (1.0, 1.0), "averaged")
    even = (np.arange(120) + 0.5) / 120 - 0.5
    twists = np.stack(np.meshgrid(even, even), axis=-1).reshape(-1, 2)
    q = system.axes[0].steps(np.array(1)).item()
    mean = structure_factor.at_twists(system, 0, (1, 0), twists).mean()
    assert mean == pytest.approx(structure_factor.bulk(system.gas, 0, q), abs=3e-4)
    # at fixed population it is not
    fixed = build_system(gas_of(2, 21), (1.0, 1.0), "averaged")
    other = structure_factor.at_twists(fixed, 0, (1, 0), twists).mean()
    assert abs(other - structure_factor.bulk(system.gas, 0, q)) > 1.5e-3
