"""What the gas is, and the scales that follow: k_F, E_F, T_F, r_s, box sides.

Conventions: one spin component of density n_s has the Fermi wave number
1D π n_s · 2D √(4π n_s) · 3D (6π² n_s)^(1/3); E_F = ħ²k_F²/2m. The majority component is the most
populated one (Giuliani & Vignale, Quantum Theory of the Electron Liquid, 2005, ch. 1).
"""

from __future__ import annotations

from dataclasses import dataclass, field
from math import gamma, pi, prod

from pairmc.units import BOLTZMANN, Units


def ball_volume(dimension: int, radius: float) -> float:
    """Return the volume of a ball: 2R (1D), πR² (2D), 4πR³/3 (3D)."""
    return float(pi ** (dimension / 2) / gamma(dimension / 2 + 1) * radius**dimension)


def fermi_wavenumber(dimension: int, density: float) -> float:
    """Return k_F of one component: n = V_d(k_F)/(2π)^d solved for k_F, V_d the volume of a ball.

    Parameters
    ----------
    dimension
        1, 2 or 3.
    density
        Number density of that component, per length**dimension.

    Returns
    -------
    float
        Fermi wave number, per length.
    """
    return float(2 * pi * (density / ball_volume(dimension, 1.0)) ** (1 / dimension))


def density_of_fermi_wavenumber(dimension: int, wavenumber: float) -> float:
    """Return the density of one component with this Fermi wave number; inverse of the above."""
    return ball_volume(dimension, 1.0) * (wavenumber / (2 * pi)) ** dimension


def density_of_wigner_seitz_radius(dimension: int, radius: float) -> float:
    """Return the total density: one particle in a ball of radius r_s (in length units)."""
    return 1.0 / ball_volume(dimension, radius)


@dataclass(frozen=True)
class Gas:
    """A free Fermi gas of any number of spin components.

    Parameters
    ----------
    dimension
        1, 2 or 3.
    components
        Names of the spin components, in the order of the run file.
    populations
        Particles of each component.
    total_density
        Of all components together, per length unit**dimension.
    units
        What lengths and energies are measured in.
    thermal_energy
        k_B T in units of ħ²/(m · length²).
    ensemble
        ``"canonical"``: populations are fixed; ``"grand-canonical"``: they are means.
    """

    dimension: int
    components: tuple[str, ...]
    populations: tuple[int, ...]
    total_density: float
    units: Units = field(default_factory=Units)
    thermal_energy: float = 0.0
    ensemble: str = "canonical"

    @property
    def particles(self) -> int:
        """Particles of all components together."""
        return sum(self.populations)

    @property
    def volume(self) -> float:
        """Volume of the box, length unit**dimension."""
        return self.particles / self.total_density

    @property
    def majority(self) -> int:
        """Index of the most populated component (the first of equals)."""
        return self.populations.index(max(self.populations))

    @property
    def densities(self) -> tuple[float, ...]:
        """Density of each component, per length unit**dimension."""
        return tuple(population / self.volume for population in self.populations)

    @property
    def fermi_wavenumbers(self) -> tuple[float, ...]:
        """k_F of each component, per length unit."""
        return tuple(fermi_wavenumber(self.dimension, density) for density in self.densities)

    @property
    def fermi_energies(self) -> tuple[float, ...] | None:
        """E_F = ħ²k_F²/2m of each component in energy units; None where no mass is known."""
        kinetic = self.units.kinetic
        if kinetic is None:
            return None
        return tuple(0.5 * kinetic * k * k for k in self.fermi_wavenumbers)

    @property
    def fermi_temperatures(self) -> tuple[float, ...] | None:
        """T_F = E_F/k_B of each component in kelvin; None where energies have no SI value."""
        energies, joules = self.fermi_energies, self.units.joules
        if energies is None or joules is None:
            return None
        return tuple(energy * joules / BOLTZMANN for energy in energies)

    @property
    def reduced_temperature(self) -> float:
        """T/T_F of the majority component."""
        return self.thermal_energy / (0.5 * self.fermi_wavenumbers[self.majority] ** 2)

    @property
    def temperature(self) -> float | None:
        """T in kelvin; 0 at zero temperature, None where energies have no SI value."""
        kinetic, joules = self.units.kinetic, self.units.joules
        if self.thermal_energy == 0:
            return 0.0
        if kinetic is None or joules is None:
            return None
        return self.thermal_energy * kinetic * joules / BOLTZMANN

    @property
    def thermal_wavelength(self) -> float | None:
        """λ_T = (2πħ²/(m k_B T))^{1/2}, length units; None at zero temperature."""
        return (2 * pi / self.thermal_energy) ** 0.5 if self.thermal_energy else None

    @property
    def wigner_seitz_radius(self) -> float:
        """r_s: radius of the ball that holds one particle of the total density, length units."""
        return float(
            (self.total_density * ball_volume(self.dimension, 1.0)) ** (-1 / self.dimension)
        )

    @property
    def polarisation(self) -> float | None:
        """ζ = |N_1 − N_2|/(N_1 + N_2) for one (ζ = 1) or two components; None for more."""
        if len(self.populations) == 1:
            return 1.0
        if len(self.populations) == 2:
            return abs(self.populations[0] - self.populations[1]) / self.particles
        return None

    def box(self, ratio: tuple[float, ...]) -> tuple[float, ...]:
        """Return the sides of the box whose volume follows from the density.

        Parameters
        ----------
        ratio
            Ratio of the sides, one number an axis.

        Returns
        -------
        tuple of float
            L_a = ratio_a · (V / Π ratio)^(1/d), length units.
        """
        scale = (self.volume / prod(ratio)) ** (1 / self.dimension)
        return tuple(scale * side for side in ratio)
