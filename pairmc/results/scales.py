"""The derived scales of a run as variables of its result file."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.gas import Gas
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


def scale_variables(run: RunFile) -> Variables:
    """Return k_F, E_F, T_F, densities, populations, box sides and r_s, each with its unit."""
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
    energies, temperatures = gas.fermi_energies, gas.fermi_temperatures
    if energies is not None:
        about = {"units": energy_unit(gas), "long_name": "Fermi energy of the component"}
        if not units.energy:
            about["comment"] = "in units of hbar^2 / (mass * length unit^2)"
        variables["fermi_energy"] = (spin, np.array(energies), about)
    if temperatures is not None:
        about = {"units": "K", "long_name": "Fermi temperature of the component"}
        variables["fermi_temperature"] = (spin, np.array(temperatures), about)
    if gas.polarisation is not None:
        variables["polarisation"] = (
            (),
            gas.polarisation,
            {"units": "1", "long_name": "spin polarisation, |N_1 - N_2| / (N_1 + N_2)"},
        )
    return variables
