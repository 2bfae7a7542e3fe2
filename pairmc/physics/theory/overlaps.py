"""How often two orbitals that differ by a wave vector q are filled together, for every q at once.

W(q) = Σ_k ⟨n_k n_{k+q}⟩, q ≠ 0, is all that the pair correlation and the structure factor of a gas
of plane waves need. Worked out by Fourier transforms of occupations on the grid of quantum numbers;
grids are padded so that nothing is wrapped, and are in the order of transforms: q = 0 first.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from itertools import islice
from math import prod

import numpy as np
from numpy.typing import NDArray
from scipy import fft

from pairmc.physics.axes.periodic import Periodic
from pairmc.physics.occupation.averaged import AveragedGround
from pairmc.physics.system import Occupation

# Wave numbers closer than this fraction are one.
_SAME_WAVENUMBER = 1e-12

# Grid values handled at a time.
_CHUNK = 2_000_000


def overlaps(occupation: Occupation) -> NDArray[np.float64]:
    """Return W(q) on a grid of differences of quantum numbers; 0 at q = 0.

    Parameters
    ----------
    occupation
        Of the component meant.

    Returns
    -------
    array
        One axis per axis of the box. All together add up to ⟨N(N − 1)⟩.
    """
    shape, place = _grid(occupation.orbitals.numbers)
    axes = tuple(range(1, len(shape) + 1))
    total = np.zeros(shape, dtype=np.complex128)
    # Σ_k F(k) F(k + q) without a conjugate: the transform at −p times that at p
    pieces, most = iter(occupation.pair_terms()), max(1, _CHUNK // total.size)
    while terms := list(islice(pieces, most)):
        filled = np.zeros((len(terms), total.size), dtype=np.complex128)
        filled[:, place] = [term.factor for term in terms]
        transform = fft.fftn(filled.reshape(-1, *shape), axes=axes)
        mirrored = np.roll(np.flip(transform, axes), 1, axes)
        total += np.einsum("t,t...->...", [term.weight for term in terms], mirrored * transform)
    weights = np.asarray(fft.ifftn(total).real, dtype=np.float64)
    weights.flat[0] = 0.0  # k = k' is not a pair
    return weights


def overlaps_at_twists(
    occupation: AveragedGround, twists: NDArray[np.float64]
) -> Iterator[tuple[slice, NDArray[np.float64]]]:
    """Yield Σ_k n_k n_{k+q} at each twist, whole numbers; at q = 0 the number of particles.

    Parameters
    ----------
    occupation
        Of the component meant.
    twists : array (snapshot, axis)
        In units of 2π.

    Yields
    ------
    part : slice
        Which snapshots.
    weights : array (snapshot, …)
        Those of the part.
    """
    shape, place = _grid(occupation.orbitals.numbers)
    for part in _parts(len(twists), prod(shape)):
        filled = _indicators(occupation, place, twists[part], prod(shape))
        yield part, np.rint(_product(filled, filled, shape))


def cross_overlaps(one: Occupation, other: Occupation) -> NDArray[np.float64]:
    """Return Σ_k ⟨n_k⟩⟨n'_{k+q}⟩ of two components that are filled independently, q = 0 included.

    Parameters
    ----------
    one, other
        Of the components meant.

    Returns
    -------
    array
        One axis per axis of the box. All together add up to ⟨N⟩⟨N'⟩.
    """
    shape, places = _common_grid(one.orbitals.numbers, other.orbitals.numbers)
    filled = np.zeros((2, prod(shape)))
    for row, (occupation, place) in enumerate(zip((one, other), places, strict=True)):
        filled[row, place] = occupation.mean()
    return np.asarray(_product(filled[:1], filled[1:], shape)[0])


def cross_overlaps_at_twists(
    one: AveragedGround, other: AveragedGround, twists: NDArray[np.float64]
) -> Iterator[tuple[slice, NDArray[np.float64]]]:
    """Yield Σ_k n_k n'_{k+q} at each twist, whole numbers, q = 0 included.

    Parameters
    ----------
    one, other
        Of the components meant.
    twists : array (snapshot, axis)
        In units of 2π.

    Yields
    ------
    part : slice
        Which snapshots.
    weights : array (snapshot, …)
        Those of the part.
    """
    shape, places = _common_grid(one.orbitals.numbers, other.orbitals.numbers)
    for part in _parts(len(twists), prod(shape)):
        first, second = (
            _indicators(occupation, place, twists[part], prod(shape))
            for occupation, place in zip((one, other), places, strict=True)
        )
        yield part, np.rint(_product(first, second, shape))


def _parts(snapshots: int, size: int) -> Iterator[slice]:
    """Yield slices of the snapshots whose grids fit into memory together."""
    rows = max(1, _CHUNK // size)
    for start in range(0, snapshots, rows):
        yield slice(start, start + rows)


def _indicators(
    occupation: AveragedGround,
    place: NDArray[np.int64],
    twists: NDArray[np.float64],
    size: int,
) -> NDArray[np.float64]:
    """Return 1 where an orbital is filled, else 0: an array (snapshot, grid value)."""
    chosen = occupation.filled(twists)
    snapshot, column = np.nonzero(chosen >= 0)
    filled = np.zeros((len(chosen), size))
    filled[snapshot, place[chosen[snapshot, column]]] = 1.0
    return filled


def _product(
    one: NDArray[np.float64], other: NDArray[np.float64], shape: tuple[int, ...]
) -> NDArray[np.float64]:
    """Return Σ_k one(k) other(k + q) of arrays (snapshot, grid value), in the order of q."""
    axes = tuple(range(1, len(shape) + 1))
    first = fft.rfftn(one.reshape(-1, *shape), axes=axes)
    second = first if other is one else fft.rfftn(other.reshape(-1, *shape), axes=axes)
    return np.asarray(fft.irfftn(np.conj(first) * second, s=shape, axes=axes))


def lengths(axes: Sequence[Periodic], shape: tuple[int, ...]) -> NDArray[np.float64]:
    """Return |q| of every entry of a grid of differences, as one row, per length unit.

    Parameters
    ----------
    axes
        The axes of the box.
    shape
        Of the grid.
    """
    square = np.zeros(shape)
    for a, axis in enumerate(axes):
        steps = np.rint(fft.fftfreq(shape[a]) * shape[a]).astype(np.int64)
        part = axis.steps(steps) ** 2
        square += part.reshape([-1 if b == a else 1 for b in range(len(shape))])
    return np.asarray(np.sqrt(square.ravel()))


def by_length(
    axes: Sequence[Periodic], weights: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the lengths of differences that occur, and the sum of the weights of each.

    Parameters
    ----------
    axes
        The axes of the box.
    weights : array (snapshot, …)
        On grids of differences.

    Returns
    -------
    wavenumbers : array (difference,)
        |q| > 0, ascending, per length unit.
    sums : array (snapshot, difference)
    """
    flat = weights.reshape(len(weights), -1)
    largest = flat.max(axis=0, initial=0.0)
    occurring = largest > 1e-9 * largest.max()
    occurring[0] = False  # q = 0
    wavenumbers = lengths(axes, weights.shape[1:])
    order = np.flatnonzero(occurring)
    order = order[np.argsort(wavenumbers[order], kind="stable")]
    ascending = wavenumbers[order]
    if len(ascending) == 0:
        return ascending, np.zeros((len(flat), 0))
    step = np.diff(ascending) > _SAME_WAVENUMBER * ascending[1:]
    first = np.concatenate(([0], np.flatnonzero(step) + 1))
    return ascending[first], np.add.reduceat(flat[:, order], first, axis=1)


def _grid(numbers: NDArray[np.int64]) -> tuple[tuple[int, ...], NDArray[np.int64]]:
    """Return the shape of the grid of differences, and each orbital's place in it."""
    shape, (place, _) = _common_grid(numbers, numbers)
    return shape, place


def _common_grid(
    one: NDArray[np.int64], other: NDArray[np.int64]
) -> tuple[tuple[int, ...], tuple[NDArray[np.int64], NDArray[np.int64]]]:
    """Return the shape of the grid of differences of two tables, and the places in it of each."""
    both = np.concatenate([one, other])
    if len(both) == 0:
        nowhere = np.empty(0, dtype=np.int64)
        return (1,) * one.shape[1], (nowhere, nowhere)
    lowest = both.min(axis=0)
    shape = tuple(int(extent) for extent in 2 * (both.max(axis=0) - lowest) + 1)
    first, second = (
        np.ravel_multi_index(tuple((part - lowest).T), shape).astype(np.int64)
        for part in (one, other)
    )
    return shape, (first, second)
