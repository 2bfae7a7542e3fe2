"""Feature vectors: the values of all filled orbitals at a block of points.

The features of a point x are φ_k(x)/√K(x,x), k running over the N filled plane waves, so that every
feature vector has length 1. Where the filled set is symmetric under k → −k the pairs e^{±ik·x} are
exchanged for √2 cos k·x and √2 sin k·x, which span the same space: features are then real and all
products four times cheaper.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from pairmc.compiled import kernel, overload
from pairmc.physics.axes.tables import fill_plane_waves


class PlaneWaves(NamedTuple):
    """The filled plane waves of one component in one snapshot, as the kernels take them.

    Parameters
    ----------
    numbers : array (term, axis) of int64
        Quantum numbers. Complex features: one term an orbital. Real features: one term for each
        pair ±k, and k = 0 first where it is filled.
    largest : array (axis,) of int64
        Largest |quantum number| along each axis.
    population : int
        N, the number of filled orbitals.
    like : array (0,) of float64 or complex128
        Carries the type of the features.
    """

    numbers: NDArray[np.int64]
    largest: NDArray[np.int64]
    population: int
    like: NDArray[np.float64] | NDArray[np.complex128]


def plane_waves(numbers: NDArray[np.int64]) -> PlaneWaves:
    """Return the features of a filled set, real where it is symmetric under k → −k.

    Parameters
    ----------
    numbers : array (orbital, axis) of int64
        Quantum numbers of the filled orbitals.
    """
    population = len(numbers)
    largest = np.abs(numbers).max(axis=0)
    filled = {tuple(row) for row in numbers.tolist()}
    if any(tuple(-m for m in row) not in filled for row in filled):
        like: NDArray[np.float64] | NDArray[np.complex128] = np.empty(0, dtype=np.complex128)
        return PlaneWaves(np.ascontiguousarray(numbers), largest, population, like)
    zero = (0,) * numbers.shape[1]
    half = [row for row in map(tuple, numbers.tolist()) if row >= zero]
    half.sort(key=lambda row: row != zero)
    return PlaneWaves(np.array(half, dtype=np.int64), largest, population, np.empty(0))


@kernel
def _products(waves, tables_real, tables_imaginary, term, real, imaginary):
    """Multiply the factors of one plane wave along all axes, for every point of the block."""
    dimension = waves.largest.size
    row = waves.numbers[term, 0] + waves.largest[0]
    points = real.size
    for p in range(points):
        real[p] = tables_real[0, row, p]
        imaginary[p] = tables_imaginary[0, row, p]
    for a in range(1, dimension):
        row = waves.numbers[term, a] + waves.largest[a]
        factor_real = tables_real[a, row]
        factor_imaginary = tables_imaginary[a, row]
        for p in range(points):
            c = real[p]
            s = imaginary[p]
            real[p] = c * factor_real[p] - s * factor_imaginary[p]
            imaginary[p] = c * factor_imaginary[p] + s * factor_real[p]


@kernel
def _store_real(waves, tables_real, tables_imaginary, features):
    points = features.shape[1]
    real = np.empty(points)
    imaginary = np.empty(points)
    constant = waves.population % 2
    scale = np.sqrt(2.0 / waves.population)
    if constant == 1:
        features[0, :] = np.sqrt(1.0 / waves.population)
    for term in range(constant, waves.numbers.shape[0]):
        _products(waves, tables_real, tables_imaginary, term, real, imaginary)
        row = 2 * term - constant
        for p in range(points):
            features[row, p] = scale * real[p]
            features[row + 1, p] = scale * imaginary[p]


@kernel
def _store_complex(waves, tables_real, tables_imaginary, features):
    points = features.shape[1]
    real = np.empty(points)
    imaginary = np.empty(points)
    scale = np.sqrt(1.0 / waves.population)
    for term in range(waves.numbers.shape[0]):
        _products(waves, tables_real, tables_imaginary, term, real, imaginary)
        for p in range(points):
            features[term, p] = complex(scale * real[p], scale * imaginary[p])


def _store(waves, tables_real, tables_imaginary, features):
    """Write real or complex features, whichever `features` holds."""
    store = _store_complex if features.dtype.kind == "c" else _store_real
    store(waves, tables_real, tables_imaginary, features)


@overload(_store)
def _choose_store(waves, tables_real, tables_imaginary, features):
    """Choose at compile time, by numba's type of `features`."""
    if str(features.dtype).startswith("complex"):
        return _store_complex.py_func
    return _store_real.py_func


@kernel
def fill_features(waves, points, features):
    """Fill the feature vectors of a block of points.

    Parameters
    ----------
    waves : PlaneWaves
        The filled plane waves.
    points : array (axis, point) of float64
        Fractions of the sides.
    features : array (orbital, point) of the type of ``waves.like``
        Filled; each column has length 1.
    """
    dimension, count = points.shape
    rows = 1
    for a in range(dimension):
        rows = max(rows, 2 * waves.largest[a] + 1)
    tables_real = np.empty((dimension, rows, count))
    tables_imaginary = np.empty((dimension, rows, count))
    for a in range(dimension):
        fill_plane_waves(points[a], waves.largest[a], tables_real[a], tables_imaginary[a])
    _store(waves, tables_real, tables_imaginary, features)
