"""Points and weights that integrate over the actual d-dimensional shell between two radii.

Radius by Gauss–Legendre with weight r^(d−1); angles by the trapezoid rule round the circle and, in
three dimensions, Gauss–Legendre in the cosine of the polar angle. No angle is done in closed form.
"""

from __future__ import annotations

from math import ceil

import numpy as np
from numpy.typing import NDArray


def gauss_legendre(lower: float, upper: float, count: int) -> tuple[NDArray, NDArray]:
    """Return nodes and weights of the Gauss–Legendre rule on an interval."""
    nodes, weights = np.polynomial.legendre.leggauss(count)
    half = 0.5 * (upper - lower)
    return lower + half * (nodes + 1.0), half * weights


def harmonics(phase: float) -> int:
    """Return the order above which e^{iz cos θ} has no harmonic left, z = `phase`.

    Its harmonics are Bessel functions J_n(z), and at n = z + c z^(1/3) these are about
    Ai(2^(1/3) c)/z^(1/3): below 1e-15 from c = 12 on. The constant covers small z.
    """
    return ceil(phase + 12.0 * phase ** (1 / 3)) + 16


def directions(dimension: int, phase: float) -> tuple[NDArray, NDArray]:
    """Return unit vectors (point, axis) and weights that sum to 1, good for e^{iz cos θ}."""
    if dimension == 1:
        return np.array([[1.0], [-1.0]]), np.array([0.5, 0.5])
    count = harmonics(phase)
    angles = 2 * np.pi * (np.arange(count) + 0.5) / count
    circle = np.stack([np.cos(angles), np.sin(angles)], axis=1)
    if dimension == 2:
        return circle, np.full(count, 1.0 / count)
    cosines, weights = gauss_legendre(-1.0, 1.0, count // 2 + 1)
    sines = np.sqrt(1.0 - cosines**2)
    vectors = np.empty((len(cosines), count, 3))
    vectors[:, :, :2] = sines[:, None, None] * circle
    vectors[:, :, 2] = cosines[:, None]
    return vectors.reshape(-1, 3), np.repeat(0.5 * weights / count, count)


def shell_rule(
    dimension: int, inner: float, outer: float, wavenumber: float
) -> tuple[NDArray, NDArray]:
    """Return points and weights that integrate plane waves over a shell to rounding.

    Parameters
    ----------
    dimension
        1, 2 or 3.
    inner, outer
        Radii of the shell, 0 ≤ inner < outer; a ball has inner = 0.
    wavenumber
        Largest wave number in the integrand; it decides how many points are needed.

    Returns
    -------
    points : array (point, axis)
    weights : array (point,)
        Volumes; they sum to the volume of the shell.
    """
    radii, radial = gauss_legendre(inner, outer, harmonics(wavenumber * (outer - inner)) // 2 + 2)
    vectors, angular = directions(dimension, wavenumber * outer)
    surface = {1: 2.0, 2: 2 * np.pi, 3: 4 * np.pi}[dimension]
    points = radii[:, None, None] * vectors
    weights = surface * (radial * radii ** (dimension - 1))[:, None] * angular
    return points.reshape(-1, dimension), weights.ravel()
