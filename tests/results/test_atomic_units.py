"""Results in bohr and hartree: units that udunits reads, and beside them their names."""

from __future__ import annotations

import pairmc
from pairmc.runfile.read import read_run_text

TEXT = """
[gas]
dimension = 3
particles = { up = 7, down = 7 }
r_s = 2
temperature = "0.3 T_F"
ensemble = "grand-canonical"
[sampling]
snapshots = 80
batches = 8
[observables.pair_correlation]
bins = 10
"""


def test_every_length_and_energy_names_its_atomic_unit():
    result = pairmc.sample(read_run_text(TEXT))
    named = {
        "separation": "bohr",
        "separation_bounds": "bohr",
        "side": "bohr",
        "exchange_hole": "bohr^-3",
        "hole_depth": "bohr^-3",
        "fermi_wavenumber": "bohr^-1",
        "fermi_energy": "hartree",
        "energy_per_particle": "hartree",
        "chemical_potential_bulk": "hartree",
    }
    for name, unit in named.items():
        assert result[name].attrs["atomic_unit"] == unit
        assert "e-" in result[name].attrs["units"]  # metres or joules written out
    assert "atomic_unit" not in result["pair_correlation"].attrs
    assert "atomic_unit" not in result["temperature"].attrs
