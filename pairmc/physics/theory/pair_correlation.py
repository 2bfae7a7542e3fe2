"""Exact pair correlation: of this finite system, and of the infinite one.

Shares with the sampler only what the system *is* (which orbitals there are and how they are
filled): no orbital is evaluated at a point here, and no pair is counted.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy import fft, special

from pairmc.physics.gas import Gas
from pairmc.physics.grids import SeparationGrid, shell_volumes
from pairmc.physics.system import Occupation, System
from pairmc.physics.thermal import amplitude, ground_amplitude

# Wave numbers closer than this fraction are summed as one.
_SAME_WAVENUMBER = 1e-12


def expected(system: System, grid: SeparationGrid) -> dict[str, NDArray[np.float64]]:
    """Return the exact value of every bin for this finite system.

    Like components, averaged over directions and over the bin (physics: Giuliani & Vignale, 2005,
    ch. 1, before the thermodynamic limit):

        g(r) = N⁻² Σ_{k≠k'} ⟨n_k n_k'⟩ [1 − cos((k − k')·r)].

    Unlike components are independent and uniform: g = 1.

    Parameters
    ----------
    system
        The gas in its box.
    grid
        The bins; they must not reach beyond half the shortest side, where directions are cut off.

    Returns
    -------
    dict
        The variables of the observable, arrays (pair, separation).
    """
    correlation = np.ones((len(grid.pairs), grid.bins))
    for row, (_, i, j) in enumerate(grid.pairs):
        if i == j:
            correlation[row] = _like(system, system.occupations[i], grid.edges)
    return _with_hole(correlation, grid)


def bulk(system: System, grid: SeparationGrid) -> dict[str, NDArray[np.float64]]:
    """Return the value of every bin for the infinite system of the same densities.

    Like components: g = 1 − f(r)², with f the transform of the occupation of wave vectors: at zero
    temperature of the filled Fermi ball, 1D sin z/z · 2D 2J₁(z)/z · 3D 3(sin z − z cos z)/z³,
    z = k_F r (Giuliani & Vignale, 2005, ch. 1), warm as in `pairmc.physics.thermal`; averaged over
    each bin by Gauss–Legendre quadrature.

    Parameters
    ----------
    system
        The gas in its box.
    grid
        The bins.

    Returns
    -------
    dict
        The variables of the observable, arrays (pair, separation).
    """
    gas = system.gas
    correlation = np.ones((len(grid.pairs), grid.bins))
    for row, (_, i, j) in enumerate(grid.pairs):
        if i == j:
            correlation[row] = _bulk_like(gas, i, grid.edges)
    return _with_hole(correlation, grid)


def _with_hole(
    correlation: NDArray[np.float64], grid: SeparationGrid
) -> dict[str, NDArray[np.float64]]:
    """Return g and the exchange hole n_s'(g − 1)."""
    hole = (correlation - 1.0) * grid.density_second[:, None]
    return {"pair_correlation": correlation, "exchange_hole": hole}


def pair_weights(
    system: System, occupation: Occupation
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the wave-vector differences of filled orbitals, by length, and how often each occurs.

    Parameters
    ----------
    system
        The gas in its box.
    occupation
        Of the component meant.

    Returns
    -------
    wavenumbers : array (difference,)
        |q| > 0, ascending, per length unit.
    weights : array (difference,)
        Σ ⟨n_k n_k'⟩ over all ordered pairs with |k − k'| = |q|; they add up to N(N − 1).
    """
    numbers = occupation.orbitals.numbers
    reach = numbers.max(axis=0) - numbers.min(axis=0)
    shape = [int(2 * extent + 1) for extent in reach]
    place = tuple((numbers - numbers.min(axis=0)).T)
    weights = np.zeros(shape)
    for weight, factor in occupation.pair_terms():
        filled = np.zeros(shape, dtype=np.complex128)
        filled[place] = factor
        transform = fft.fftn(filled)
        # Σ_k F(k) F(k + q) without a conjugate: the transform at −p times that at p
        product = fft.ifftn(_mirrored(transform) * transform)
        weights += (weight * product).real
    weights.flat[0] = 0.0  # k = k' is not a pair
    square = np.zeros(shape)
    for a, axis in enumerate(system.axes):
        steps = np.rint(fft.fftfreq(shape[a]) * shape[a]).astype(np.int64)
        part = axis.wavenumbers(steps) ** 2
        square += part.reshape([-1 if b == a else 1 for b in range(len(shape))])
    return _by_length(np.sqrt(square.ravel()), weights.ravel())


def _mirrored(transform: NDArray[np.complex128]) -> NDArray[np.complex128]:
    """Return a transform at the negative of every frequency."""
    axes = tuple(range(transform.ndim))
    return np.roll(np.flip(transform, axes), 1, axes)


def _by_length(
    wavenumbers: NDArray[np.float64], weights: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Sum the weights of equal wave numbers; those without weight are left out."""
    kept = weights > 1e-9 * weights.max(initial=0.0)
    wavenumbers, weights = wavenumbers[kept], weights[kept]
    if len(wavenumbers) == 0:
        return wavenumbers, weights
    order = np.argsort(wavenumbers)
    wavenumbers, weights = wavenumbers[order], weights[order]
    step = np.diff(wavenumbers) > _SAME_WAVENUMBER * wavenumbers[1:]
    first = np.concatenate(([0], np.flatnonzero(step) + 1))
    return wavenumbers[first], np.add.reduceat(weights, first)


def _like(
    system: System, occupation: Occupation, edges: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return g of one component with itself, averaged over each bin."""
    wavenumbers, weights = pair_weights(system, occupation)
    total = np.zeros(len(edges) - 1)
    # in pieces, so that many differences and many bins do not fill the memory
    for start in range(0, len(wavenumbers), 1000):
        part = slice(start, start + 1000)
        waves = shell_mean_cosine(system.gas.dimension, wavenumbers[part], edges)
        total += weights[part] @ (1.0 - waves)
    return total / occupation.population**2


def shell_mean_cosine(
    dimension: int, wavenumbers: NDArray[np.float64], edges: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return cos(q·r) averaged over all directions and over shells.

    1D [sin qr]/q · 2D 2π[r J₁(qr)]/q · 3D 4π[r² j₁(qr)]/q between the edges of a shell, divided by
    the shell's volume (1D: both sides).

    Parameters
    ----------
    dimension
        1, 2 or 3.
    wavenumbers : array (difference,)
        |q| > 0, per length unit.
    edges : array (bins + 1,)
        Radii, length units.

    Returns
    -------
    array (difference, bins)
    """
    q = wavenumbers[:, None]
    z = q * edges
    if dimension == 1:
        integral = 2 * np.sin(z) / q
    elif dimension == 2:
        integral = 2 * np.pi * edges * special.j1(z) / q
    else:
        integral = 4 * np.pi * edges**2 * special.spherical_jn(1, z) / q
    return np.diff(integral, axis=1) / shell_volumes(dimension, edges)


def _bulk_like(gas: Gas, component: int, edges: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return 1 − f² of one component averaged over each bin with the weight r^(d−1)."""
    d, fermi_wavenumber = gas.dimension, gas.fermi_wavenumbers[component]
    largest = np.sqrt(fermi_wavenumber**2 + 20 * gas.thermal_energy)
    width = float(np.diff(edges).max())
    nodes, weights = np.polynomial.legendre.leggauss(16 + int(2 * largest * width))
    middle, half = 0.5 * (edges[1:] + edges[:-1]), 0.5 * np.diff(edges)
    r = middle[:, None] + half[:, None] * nodes
    measure = weights * r ** (d - 1)
    if gas.thermal_energy == 0:
        f = ground_amplitude(d, fermi_wavenumber * r)
    else:
        f = amplitude(d, gas.densities[component], gas.thermal_energy, r)
    averaged: NDArray[np.float64] = (measure * (1.0 - f**2)).sum(axis=1) / measure.sum(axis=1)
    return averaged
