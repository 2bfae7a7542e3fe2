"""Feature vectors: the values of all filled orbitals at a block of points.

The features of a point x are φ_k(x)/√K(x,x), k running over the N filled plane waves, so that every
feature vector has length 1. Where the filled set is symmetric under k → −k the pairs e^{±ik·x} are
exchanged for √2 cos k·x and √2 sin k·x, which span the same space: features are then real and all
products four times cheaper.

Where spins are rotated before detection, all particles of two components are one determinant and a
point has one coordinate more, u in [0, 1), which says as what it is detected: the first label where
u is below that label's share of all particles. The features of its component's orbitals are then
multiplied by the amplitude of that label.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from pairmc.compiled import kernel, overload
from pairmc.physics.axes.tables import fill_plane_waves
from pairmc.physics.orbitals import symmetric


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
    first_terms, first_population : int
        Terms and orbitals of the first component where spins are rotated; they come first.
    amplitude : array (label, component) of float64
        Amplitudes of a rotation of spins; without rows where there is none.
    """

    numbers: NDArray[np.int64]
    largest: NDArray[np.int64]
    population: int
    like: NDArray[np.float64] | NDArray[np.complex128]
    first_terms: int
    first_population: int
    amplitude: NDArray[np.float64]


# No rotation of spins.
UNROTATED = np.empty((0, 2))


def plane_waves(numbers: NDArray[np.int64]) -> PlaneWaves:
    """Return the features of a filled set, real where it is symmetric under k → −k.

    Parameters
    ----------
    numbers : array (orbital, axis) of int64
        Quantum numbers of the filled orbitals.
    """
    population = len(numbers)
    largest = np.abs(numbers).max(axis=0, initial=0)
    if not symmetric(numbers):
        like: NDArray[np.float64] | NDArray[np.complex128] = np.empty(0, dtype=np.complex128)
        return _unrotated(np.ascontiguousarray(numbers), largest, population, like)
    zero = (0,) * numbers.shape[1]
    half = [row for row in map(tuple, numbers.tolist()) if row >= zero]
    half.sort(key=lambda row: row != zero)
    terms = np.array(half, dtype=np.int64).reshape(-1, numbers.shape[1])
    return _unrotated(terms, largest, population, np.empty(0))


def varying_waves(numbers: NDArray[np.int64]) -> PlaneWaves:
    """Return complex features of orbitals of which each snapshot fills others.

    Parameters
    ----------
    numbers : array (orbital, axis) of int64
        Quantum numbers of all that may be filled.
    """
    largest = np.abs(numbers).max(axis=0, initial=0)
    return _unrotated(numbers, largest, 0, np.empty(0, dtype=np.complex128))


def spinor_waves(
    first: PlaneWaves, second: PlaneWaves, amplitude: NDArray[np.float64]
) -> PlaneWaves:
    """Return the features of two components whose spins are rotated.

    Parameters
    ----------
    first, second
        The features of either component; both real or both complex.
    amplitude : array (label, component)
        Amplitudes of the rotation.
    """
    return PlaneWaves(
        np.concatenate([first.numbers, second.numbers]),
        np.maximum(first.largest, second.largest),
        first.population + second.population,
        first.like,
        len(first.numbers),
        first.population,
        amplitude,
    )


def _unrotated(
    numbers: NDArray[np.int64],
    largest: NDArray[np.int64],
    population: int,
    like: NDArray[np.float64] | NDArray[np.complex128],
) -> PlaneWaves:
    return PlaneWaves(numbers, largest, population, like, 0, 0, UNROTATED)


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
def first_share(waves):
    """Return the share of all particles that are detected as the first label, on average."""
    first = waves.first_population / waves.population
    kept = waves.amplitude[0, 0] ** 2
    turned = waves.amplitude[0, 1] ** 2
    return kept * first + turned * (1.0 - first)


@kernel
def _turn_spins(waves, labels, features):
    """Give the features of both components the amplitude of each point's label, and length 1."""
    share = first_share(waves)
    parts = np.empty(2)
    parts[0] = waves.first_population / waves.population
    parts[1] = 1.0 - parts[0]
    factor = np.empty((2, labels.size))
    for p in range(labels.size):
        label = 0 if labels[p] < share else 1
        mean = share if label == 0 else 1.0 - share
        for component in range(2):
            scale = np.sqrt(parts[component] / mean)
            factor[component, p] = scale * waves.amplitude[label, component]
    for row in range(waves.population):
        here = factor[0] if row < waves.first_population else factor[1]
        for p in range(labels.size):
            features[row, p] *= here[p]


@kernel
def _store_spinors(waves, tables_real, tables_imaginary, labels, features):
    """Write the features of both components, each of length 1, then turn their spins."""
    terms, first = waves.first_terms, waves.first_population
    none = waves.amplitude[:0]
    if first > 0:
        numbers = waves.numbers[:terms]
        part = PlaneWaves(numbers, waves.largest, first, waves.like, 0, 0, none)
        _store(part, tables_real, tables_imaginary, features[:first])
    if first < waves.population:
        numbers, population = waves.numbers[terms:], waves.population - first
        part = PlaneWaves(numbers, waves.largest, population, waves.like, 0, 0, none)
        _store(part, tables_real, tables_imaginary, features[first:])
    _turn_spins(waves, labels, features)


@kernel
def fill_features(waves, points, features):
    """Fill the feature vectors of a block of points.

    Parameters
    ----------
    waves : PlaneWaves
        The filled plane waves.
    points : array (axis, point) of float64
        Fractions of the sides; where spins are rotated, the label's coordinate last.
    features : array (orbital, point) of the type of ``waves.like``
        Filled; each column has length 1.
    """
    dimension, count = waves.largest.size, points.shape[1]
    rows = 1
    for a in range(dimension):
        rows = max(rows, 2 * waves.largest[a] + 1)
    tables_real = np.empty((dimension, rows, count))
    tables_imaginary = np.empty((dimension, rows, count))
    for a in range(dimension):
        fill_plane_waves(points[a], waves.largest[a], tables_real[a], tables_imaginary[a])
    if waves.amplitude.shape[0] > 0:
        _store_spinors(waves, tables_real, tables_imaginary, points[dimension], features)
    else:
        _store(waves, tables_real, tables_imaginary, features)
