"""The infinite ideal Fermi gas at any temperature: μ, energy, S(q → 0) and the amplitude f(r).

Everything follows from the gas at zero temperature: with the Fermi function n_F, any sum over
filled states is ∫ dε (−∂n_F/∂ε) X₀(ε), X₀(ε) the value at zero temperature with Fermi energy ε. The
weight is a bell of width k_B T, so one quadrature serves from the coldest gas to the hottest. One
component; ħ = m = 1: energies k²/2, thermal energy k_B T, densities per length**dimension.
"""

from __future__ import annotations

from math import exp, log, log1p, pi, sqrt

import numpy as np
from numpy.typing import NDArray
from scipy import optimize, special

from pairmc.physics.gas import ball_volume, fermi_wavenumber

FloatArray = NDArray[np.float64]

# The bell is followed to where it has fallen to e^−45 of its height.
_REACH = 45.0

# Gauss–Legendre nodes in a panel, and panels at least.
_NODES, _PANELS = 16, 24

# Values of r handled at a time.
_CHUNK = 2000


def ground_amplitude(dimension: int, z: FloatArray) -> FloatArray:
    """Return f(z), z = k_F r, at zero temperature: the transform of the filled Fermi ball.

    1D sin z/z · 2D 2J₁(z)/z · 3D 3j₁(z)/z (Giuliani & Vignale, 2005, ch. 1); 1 at z = 0.
    """
    if dimension == 1:
        return np.sinc(z / np.pi)
    if dimension == 2:
        return np.asarray(special.j0(z) + special.jv(2, z))  # = 2 J₁(z)/z
    return np.asarray(special.spherical_jn(0, z) + special.spherical_jn(2, z))  # = 3 j₁(z)/z


def fermi_function(energy: FloatArray, potential: float, thermal_energy: float) -> FloatArray:
    """Return 1/(e^{(ε−μ)/k_B T} + 1)."""
    return np.asarray(special.expit((potential - energy) / thermal_energy), dtype=np.float64)


def chemical_potential(dimension: int, density: float, thermal_energy: float) -> float:
    """Return μ of one component: the solution of n = ∫ dᵈk/(2π)ᵈ n_F(k²/2).

    Parameters
    ----------
    dimension
        1, 2 or 3.
    density
        Of the component.
    thermal_energy
        k_B T > 0.
    """
    T = thermal_energy
    fermi_energy = 0.5 * fermi_wavenumber(dimension, density) ** 2
    if dimension == 2:
        x = fermi_energy / T
        return fermi_energy + T * log1p(-exp(-x)) if x > 1 else T * log(np.expm1(x))
    thermal_length = sqrt(2 * pi / T)
    # without exclusion more particles would share the same μ
    low = T * log(density * thermal_length**dimension) - T

    def excess(potential: float) -> float:
        k, weight = bell(potential, T, 0.0)
        return float(weight @ _ground_density(dimension, k)) / density - 1.0

    high = fermi_energy + 10 * T
    return float(optimize.brentq(excess, min(low, fermi_energy - T), high, xtol=1e-15 * high))


def energy_per_particle(dimension: int, density: float, thermal_energy: float) -> float:
    """Return E/N = n⁻¹ ∫ dε (−∂n_F/∂ε) d/(d+2) ε n₀(ε)."""
    potential = chemical_potential(dimension, density, thermal_energy)
    k, weight = bell(potential, thermal_energy, 0.0)
    energies = dimension / (dimension + 2) * 0.5 * k * k * _ground_density(dimension, k)
    return float(weight @ energies) / density


def long_wavelength_structure_factor(
    dimension: int, density: float, thermal_energy: float
) -> float:
    """Return S(q → 0) = (k_B T/n) ∂n/∂μ of the infinite gas, with ∂n₀/∂ε = d n₀/k²."""
    potential = chemical_potential(dimension, density, thermal_energy)
    k, weight = bell(potential, thermal_energy, 0.0)
    states = dimension * _ground_density(dimension, k) / k**2
    return thermal_energy * float(weight @ states) / density


def amplitude(dimension: int, density: float, thermal_energy: float, r: FloatArray) -> FloatArray:
    """Return f(r) = n⁻¹ ∫ dᵈk/(2π)ᵈ e^{ik·r} n_F(k²/2), so that g = 1 − f².

    Parameters
    ----------
    dimension, density, thermal_energy
        See `chemical_potential`.
    r : array
        Separations, length units.

    Returns
    -------
    array
        Of the shape of `r`.
    """
    potential = chemical_potential(dimension, density, thermal_energy)
    flat = np.ravel(r)
    k, weight = bell(potential, thermal_energy, float(flat.max(initial=0.0)))
    share = weight * _ground_density(dimension, k) / density
    values = np.empty_like(flat)
    for start in range(0, len(flat), _CHUNK):
        part = slice(start, start + _CHUNK)
        values[part] = ground_amplitude(dimension, np.outer(flat[part], k)) @ share
    return values.reshape(np.shape(r))


def _ground_density(dimension: int, k: FloatArray) -> FloatArray:
    """Return the density at zero temperature with Fermi wave number k."""
    return ball_volume(dimension, 1.0) * (k / (2 * pi)) ** dimension


def bell(
    potential: float, thermal_energy: float, largest_separation: float
) -> tuple[FloatArray, FloatArray]:
    """Return wave numbers k and weights of ∫ dε (−∂n_F/∂ε) …, ε = k²/2, as a sum over k.

    Parameters
    ----------
    potential, thermal_energy
        μ and k_B T > 0.
    largest_separation
        Panels are as many as cos(k r) needs there, length units.
    """
    lowest, highest = bell_ends(potential, thermal_energy)
    panels = _PANELS + int((highest - lowest) * largest_separation / 4)
    k, weight = panel_nodes(np.array(lowest), np.array(highest), panels)
    return k, weight * bell_density(k, potential, thermal_energy)


def bell_ends(potential: float, thermal_energy: float) -> tuple[float, float]:
    """Return the wave numbers between which the bell is not negligible."""
    lowest = sqrt(2 * max(0.0, potential - _REACH * thermal_energy))
    return lowest, sqrt(2 * (max(0.0, potential) + _REACH * thermal_energy))


def bell_density(k: FloatArray, potential: float, thermal_energy: float) -> FloatArray:
    """Return −∂n_F/∂k at wave numbers k."""
    filled = fermi_function(0.5 * k * k, potential, thermal_energy)
    empty = fermi_function(-0.5 * k * k, -potential, thermal_energy)
    return k * filled * empty / thermal_energy


def panel_nodes(
    start: FloatArray, stop: FloatArray, panels: int = _PANELS
) -> tuple[FloatArray, FloatArray]:
    """Return Gauss–Legendre nodes and weights in equal panels of intervals.

    Parameters
    ----------
    start, stop : array (…)
        Ends of each interval.
    panels
        Panels of each.

    Returns
    -------
    nodes, weights : array (…, node)
    """
    nodes, weights = np.polynomial.legendre.leggauss(_NODES)
    unit = ((np.arange(panels)[:, None] + 0.5 * (1 + nodes)) / panels).ravel()
    width = (stop - start)[..., None]
    share = np.tile(weights, panels) / (2 * panels)
    return start[..., None] + width * unit, width * share
