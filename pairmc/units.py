"""What a run's numbers are measured in."""

from __future__ import annotations

from dataclasses import dataclass

# CODATA 2022 recommended values (Mohr, Newell, Taylor & Tiesinga, 2024), SI units.
HBAR = 1.054571817e-34  # J s (exact to the digits of h / 2π)
BOLTZMANN = 1.380649e-23  # J / K (exact)
BOHR = 5.29177210544e-11  # m
HARTREE = 4.3597447222060e-18  # J
ELECTRON_MASS = 9.1093837139e-31  # kg
ATOMIC_MASS = 1.66053906892e-27  # kg


@dataclass(frozen=True)
class Units:
    """The units of one run: a length, an energy and what ties them together.

    Parameters
    ----------
    length
        Name of the length unit as a reader writes it: ``"um"``, ``"bohr"``, or ``""`` where the run
        gives none.
    metres
        One length unit in metres; None where the run gives none.
    energy
        Name of the energy unit: ``"J"``, ``"hartree"``, or ``""`` where energies are counted in
        ħ²/(m · length²).
    joules
        One energy unit in joules; None where the run gives none.
    kinetic
        ħ²/m in energy unit × length unit²; None where the run gives a length but no mass, so that
        no energy is known.
    """

    length: str = ""
    metres: float | None = None
    energy: str = ""
    joules: float | None = None
    kinetic: float | None = 1.0

    def udunits(self, length_power: int) -> str:
        """Return the unit string of length**length_power for a CF file.

        udunits does not know bohr, so the metres are written out.
        """
        if self.metres is None or length_power == 0:
            return "1"
        base = f"{self.metres:.11e} m" if self.length == "bohr" else self.length
        if length_power == 1:
            return base
        return f"({base})^{length_power}" if " " in base else f"{base}^{length_power}"
