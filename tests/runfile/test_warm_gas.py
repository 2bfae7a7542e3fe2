"""Temperature and ensemble in a run file: kelvin, T_F and energies mean the same gas."""

from __future__ import annotations

import pytest
from scipy import constants

from pairmc.errors import InputError
from pairmc.runfile.digest import digest
from pairmc.runfile.read import read_run_text

ATOMS = """
[gas]
dimension = 2
particles = {{ up = {up}, down = 13 }}
total_density = "1.1 / um^2"
mass = "6.015 u"
temperature = "{temperature}"
ensemble = "{ensemble}"
"""


def atoms(temperature: str, ensemble: str = "canonical", up: int = 21):
    return read_run_text(ATOMS.format(temperature=temperature, ensemble=ensemble, up=up))


def test_kelvin_joule_and_multiples_of_the_fermi_temperature_agree() -> None:
    run = atoms("0.4 T_F")
    # T_F = ħ² 4π n_up/(2 m k_B), CODATA constants
    density = 1.1e12 * 21 / 34
    mass = 6.015 * constants.atomic_mass
    fermi = constants.hbar**2 * 4 * constants.pi * density / (2 * mass * constants.k)
    assert run.gas.temperature == pytest.approx(0.4 * fermi, rel=1e-9)
    kelvin = atoms(f"{0.4e9 * fermi:.14g} nK")
    assert kelvin.gas.thermal_energy == pytest.approx(run.gas.thermal_energy, rel=1e-9)
    joule = atoms(f"{0.4 * fermi * constants.k:.14g} J")
    assert joule.gas.thermal_energy == pytest.approx(run.gas.thermal_energy, rel=1e-9)
    wavelength = constants.h / (2 * constants.pi * mass * constants.k * 0.4 * fermi) ** 0.5
    assert run.gas.thermal_wavelength == pytest.approx(1e6 * wavelength, rel=1e-9)


def test_hartree_is_the_electron_gas_energy() -> None:
    text = "[gas]\ndimension = 3\nparticles = { up = 7 }\nr_s = 2\n"
    run = read_run_text(text + 'temperature = "0.05 hartree"')
    assert run.gas.thermal_energy == pytest.approx(0.05)
    assert run.gas.temperature == pytest.approx(
        0.05 * constants.value("Hartree energy") / constants.k, rel=1e-9
    )


def test_temperature_and_ensemble_are_in_the_digest() -> None:
    digests = {
        digest(atoms(temperature, ensemble, 13))
        for temperature in ("0 T_F", "0.4 T_F", "0.5 T_F")
        for ensemble in ("canonical", "grand-canonical")
    }
    assert len(digests) == 6
    assert digest(atoms("0.5 T_F")) == digest(atoms("5e-1 T_F"))


def test_an_open_shell_with_fluctuating_numbers_at_zero_temperature_is_refused() -> None:
    with pytest.raises(InputError, match=r"particles\.up: got an open shell of 20 .* 13 or 21"):
        atoms("0 nK", "grand-canonical", up=20)
    assert atoms("0 nK", "grand-canonical").system().occupations[0].closed


def test_too_many_orbitals_are_refused_with_the_estimate() -> None:
    text = ATOMS.replace("dimension = 2", "dimension = 3").replace("um^2", "um^3")
    with pytest.raises(InputError, match=r"1000 particles that need about 1\.4e\+08 orbitals"):
        read_run_text(text.format(up=1000, temperature="60 T_F", ensemble="canonical"))
