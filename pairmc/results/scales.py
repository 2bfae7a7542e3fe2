"""The derived scales of a run as variables of its result file."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pairmc.physics import thermal
from pairmc.physics.gas import Gas
from pairmc.physics.listed_states import state_of
from pairmc.physics.occupation.cutoff import TAIL
from pairmc.physics.theory.energy import bulk_per_particle
from pairmc.runfile.run import RunFile
from pairmc.units import HARTREE

Variables = dict[str, tuple[Any, ...]]


def component_labels(gas: Gas) -> NDArray[np.bytes_]:
    """Return the names of the components as fixed-width characters."""
    return np.array([name.encode() for name in gas.components])


def energy_unit(gas: Gas) -> str:
    """Return the unit string of energies for a CF file; udunits does not know hartree."""
    if gas.units.energy == "hartree":
        return f"{HARTREE:.13e} J"
    return gas.units.energy or "1"


def _energies_of(gas: Gas) -> tuple[float, dict[str, str]]:
    """Return what ħ²/(m · length²) is in the file's energies, and their attributes."""
    if gas.units.kinetic is None:
        comment = "times hbar^2 / mass is the energy"
        return 1.0, {"units": gas.units.udunits(-2), "comment": comment}
    return gas.units.kinetic, {"units": energy_unit(gas)}


def scale_variables(run: RunFile, energies: NDArray[np.float64]) -> Variables:
    """Return k_F, E_F, T_F, densities, populations, box sides and r_s, each with its unit.

    Parameters
    ----------
    run
        The run.
    energies : array (component,)
        Exact kinetic energy of each component, in ħ²/(m · length²).
    """
    gas, units = run.gas, run.gas.units
    spin = ("spin",)
    variables: Variables = {
        "population": (
            spin,
            np.array(gas.populations, dtype=np.int64),
            {"units": "1", "long_name": "particles of the spin component"},
        ),
        "density": (
            spin,
            np.array(gas.densities),
            {"units": units.udunits(-gas.dimension), "long_name": "density of the component"},
        ),
        "fermi_wavenumber": (
            spin,
            np.array(gas.fermi_wavenumbers),
            {"units": units.udunits(-1), "long_name": "Fermi wave number of the component"},
        ),
        "total_density": (
            (),
            gas.total_density,
            {"units": units.udunits(-gas.dimension), "long_name": "density of all particles"},
        ),
        "wigner_seitz_radius": (
            (),
            gas.wigner_seitz_radius,
            {
                "units": units.udunits(1),
                "long_name": "radius of a ball that holds one particle at the total density, r_s",
            },
        ),
        "side": (
            ("axis",),
            np.array(run.system().sides),
            {"units": units.udunits(1), "long_name": "side of the periodic box"},
        ),
    }
    if run.rotation:
        variables["rotation"] = (
            (),
            run.rotation,
            {"units": "degree", "long_name": "rotation of all spins before they are detected"},
        )
        variables["detected_population"] = (
            spin,
            np.array(run.system().detected_populations),
            {"units": "1", "long_name": "mean number of particles detected as the component"},
        )
        variables["detected_density"] = (
            spin,
            np.array(run.system().detected_densities),
            {
                "units": units.udunits(-gas.dimension),
                "long_name": "mean density of particles detected as the component",
            },
        )
    if run.twist != "averaged" and any(run.twist):
        variables["twist"] = (
            ("axis",),
            np.array(run.twist),
            {"units": "1", "long_name": "twist of the boundary conditions in units of 2 pi"},
        )
    fermi_energies, temperatures = gas.fermi_energies, gas.fermi_temperatures
    if fermi_energies is not None:
        about = {"units": energy_unit(gas), "long_name": "Fermi energy of the component"}
        if not units.energy:
            about["comment"] = "in units of hbar^2 / (mass * length unit^2)"
        variables["fermi_energy"] = (spin, np.array(fermi_energies), about)
    if temperatures is not None:
        about = {"units": "K", "long_name": "Fermi temperature of the component"}
        variables["fermi_temperature"] = (spin, np.array(temperatures), about)
    variables |= _energy_variables(run, energies) | _state_variables(run)
    if gas.polarisation is not None:
        variables["polarisation"] = (
            (),
            gas.polarisation,
            {"units": "1", "long_name": "spin polarisation, |N_1 - N_2| / (N_1 + N_2)"},
        )
    return variables


def _energy_variables(run: RunFile, energies: NDArray[np.float64]) -> Variables:
    """Return temperature, chemical potential and energies: of this system and of the infinite one.

    Chemical potentials of fixed populations are those of the infinite system.
    """
    gas, T = run.gas, run.gas.thermal_energy
    scale, about = _energies_of(gas)
    spin = ("spin",)
    variables: Variables = {
        "reduced_temperature": (
            (),
            gas.reduced_temperature,
            {"units": "1", "long_name": "temperature in T_F of the majority component"},
        ),
        "energy_per_particle": (
            spin,
            scale * _per_particle(energies, gas),
            about | {"long_name": "kinetic energy per particle, exact for this finite system"},
        ),
        "energy_per_particle_bulk": (
            spin,
            scale * bulk_per_particle(gas),
            about | {"long_name": "kinetic energy per particle of the infinite system"},
        ),
    }
    if T == 0:
        return variables
    variables["orbital_count"] = (
        spin,
        np.array([len(part.orbitals) for part in run.system().components]),
        {
            "units": "1",
            "long_name": "orbitals that are ever filled",
            "comment": f"all others together hold less than {TAIL:g} of a particle",
            "particles_left_out": TAIL,
        },
    )
    potentials = _where_filled(gas, thermal.chemical_potential)
    limits = _where_filled(gas, thermal.long_wavelength_structure_factor)
    variables["chemical_potential_bulk"] = (
        spin,
        scale * potentials,
        about | {"long_name": "chemical potential of the infinite system"},
    )
    variables["structure_factor_limit_bulk"] = (
        spin,
        limits,
        {"units": "1", "long_name": "S(q -> 0) of the component in the infinite system"},
    )
    if gas.temperature is not None:
        about = {"units": "K", "long_name": "temperature"}
        variables["temperature"] = ((), gas.temperature, about)
    return variables


def _state_variables(run: RunFile) -> Variables:
    """Return energy, wave vector and degeneracy where one set of orbitals is filled; else none."""
    gas, system = run.gas, run.system()
    summary = state_of(system)
    if summary is None:
        return {}
    scale, about = _energies_of(gas)
    variables: Variables = {
        "total_energy": (
            (),
            scale * summary.energy,
            about | {"long_name": "kinetic energy of all particles, exact"},
        ),
        "excitation_energy": (
            (),
            scale * summary.excitation_energy,
            about | {"long_name": "total energy above the ground state of the same populations"},
        ),
        "total_wave_vector": (
            ("axis",),
            summary.wave_vector,
            {"units": gas.units.udunits(-1), "long_name": "sum of all filled wave vectors"},
        ),
    }
    if summary.degeneracy is not None:
        # of huge numbers the leading 15 digits
        variables["degeneracy"] = (
            (),
            float(summary.degeneracy),
            {
                "units": "1",
                "long_name": "choices of orbitals of the same populations and total energy",
            },
        )
    return variables


def _per_particle(totals: NDArray[np.float64], gas: Gas) -> NDArray[np.float64]:
    """Divide by the populations; NaN where a component has no particles."""
    populations = np.array(gas.populations, dtype=np.float64)
    populations[populations == 0] = np.nan
    return np.asarray(totals / populations)


def _where_filled(gas: Gas, function: Callable[[int, float, float], float]) -> NDArray[np.float64]:
    """Return a function of the infinite gas for each component; NaN where it has no particles."""
    return np.array(
        [
            function(gas.dimension, density, gas.thermal_energy) if density > 0 else np.nan
            for density in gas.densities
        ]
    )
