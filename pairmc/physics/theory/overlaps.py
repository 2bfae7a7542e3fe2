"""How often two orbitals that differ by a wave vector q are filled together, for every q at once.

W(q) = Σ_k ⟨n_k n_{k+q}⟩, q ≠ 0, is all that the pair correlation and the structure factor of a gas
of plane waves need. Worked out by Fourier transforms of occupations on the grid of quantum numbers,
padded so that nothing is wrapped. Large grids that are even along each axis (a hot gas without a
twist) are folded onto one orthant and take cosine transforms: an eighth of the memory in 3D.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from itertools import islice
from math import prod

import numpy as np
from numpy.typing import NDArray
from scipy import fft

from pairmc.physics.occupation.averaged import AveragedGround
from pairmc.physics.system import Occupation
from pairmc.physics.theory.differences import Overlaps

# Grid values handled at a time.
_CHUNK = 2_000_000

# Grids of more points than this are folded onto one orthant where all is even along each axis.
FOLD_ABOVE = 200_000


def overlaps(occupation: Occupation) -> Overlaps:
    """Return W(q) of a component; 0 at q = 0, where nothing is a pair.

    Parameters
    ----------
    occupation
        Of the component meant.

    Returns
    -------
    Overlaps
        Of one snapshot. All together add up to ⟨N(N − 1)⟩.
    """
    numbers = occupation.orbitals.numbers
    fold = _folding(numbers, occupation.mean)
    shape, place = _orthant(numbers, numbers.max(axis=0)) if fold else _grid(numbers)
    total = np.zeros(shape, dtype=np.complex128)
    pieces, most = iter(occupation.pair_terms()), max(1, _CHUNK // total.size)
    while terms := list(islice(pieces, most)):
        filled = np.zeros((len(terms), total.size), dtype=np.complex128)
        filled[:, place] = [term.factor for term in terms]
        weights = [term.weight for term in terms]
        # Σ_k F(k) F(k + q) without a conjugate: the transform at −p times that at p
        transform = _transform(filled.reshape(-1, *shape), fold)
        mirrored = transform if fold else _mirrored(transform)
        total += np.einsum("t,t...->...", weights, mirrored * transform)
    found = fft.idctn(total.real, type=1) if fold else fft.ifftn(total).real
    found = np.array(found, dtype=np.float64)
    found.flat[0] = 0.0
    return Overlaps(found[None], fold)


def _transform(filled: NDArray[np.complex128], fold: bool) -> NDArray[np.complex128]:
    """Return the transform of arrays (term, …) over all axes but the first."""
    axes = tuple(range(1, filled.ndim))
    if fold:
        return np.asarray(fft.dctn(filled, type=1, axes=axes))
    return np.asarray(fft.fftn(filled, axes=axes))


def _mirrored(transform: NDArray[np.complex128]) -> NDArray[np.complex128]:
    """Return transforms (term, …) at the negative of every frequency."""
    axes = tuple(range(1, transform.ndim))
    return np.roll(np.flip(transform, axes), 1, axes)


def _folding(numbers: NDArray[np.int64], mean: Callable[[], NDArray[np.float64]]) -> bool:
    """Return whether a large grid can be folded: all is even along each axis.

    Parameters
    ----------
    numbers : array (orbital, axis)
        Quantum numbers.
    mean
        Gives mean occupations; whether orbitals are alike shows in them.
    """
    if prod(_grid(numbers)[0]) <= FOLD_ABOVE:
        return False
    if np.any(numbers.min(axis=0) != -numbers.max(axis=0)):
        return False
    compact = tuple(int(extent) for extent in 2 * numbers.max(axis=0) + 1)
    place = np.ravel_multi_index(tuple((numbers + numbers.max(axis=0)).T), compact)
    grid = np.zeros(prod(compact))
    grid[place] = mean()
    grid = grid.reshape(compact)
    return all(np.allclose(grid, np.flip(grid, a), 1e-9, 0.0) for a in range(grid.ndim))


def _orthant(
    numbers: NDArray[np.int64], largest: NDArray[np.int64]
) -> tuple[tuple[int, ...], NDArray[np.int64]]:
    """Return the shape of a folded grid of differences, and each orbital's place in it.

    One point more than there are differences along each axis, so that ±2M stay apart where the
    cosine transform takes the grid for even and periodic.
    """
    shape = tuple(int(2 * extent + 2) for extent in largest)
    return shape, np.ravel_multi_index(tuple(np.abs(numbers).T), shape).astype(np.int64)


def overlaps_at_twists(
    occupation: AveragedGround, twists: NDArray[np.float64]
) -> Iterator[tuple[slice, Overlaps]]:
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
    overlaps : Overlaps
        Those of the part.
    """
    shape, place = _grid(occupation.orbitals.numbers)
    for part in _parts(len(twists), prod(shape)):
        filled = _indicators(occupation, place, twists[part], prod(shape))
        yield part, Overlaps(np.rint(_product(filled, filled, shape)))


def cross_overlaps(one: Occupation, other: Occupation) -> Overlaps:
    """Return Σ_k ⟨n_k⟩⟨n'_{k+q}⟩ of two components that are filled independently, q = 0 included.

    Parameters
    ----------
    one, other
        Of the components meant.

    Returns
    -------
    Overlaps
        Of one snapshot. All together add up to ⟨N⟩⟨N'⟩.
    """
    tables = [one.orbitals.numbers, other.orbitals.numbers]
    fold = all(_folding(table, part.mean) for table, part in zip(tables, (one, other), strict=True))
    if fold:
        extent = np.max([table.max(axis=0) for table in tables], axis=0)
        shape, first = _orthant(tables[0], extent)
        places = first, _orthant(tables[1], extent)[1]
    else:
        shape, places = _common_grid(*tables)
    filled = np.zeros((2, prod(shape)))
    for row, (occupation, place) in enumerate(zip((one, other), places, strict=True)):
        filled[row, place] = occupation.mean()
    if fold:
        transforms = fft.dctn(filled.reshape(2, *shape), type=1, axes=range(1, len(shape) + 1))
        found = fft.idctn(transforms[0] * transforms[1], type=1)[None]
    else:
        found = _product(filled[:1], filled[1:], shape)
    return Overlaps(np.asarray(found), fold)


def cross_overlaps_at_twists(
    one: AveragedGround, other: AveragedGround, twists: NDArray[np.float64]
) -> Iterator[tuple[slice, Overlaps]]:
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
    overlaps : Overlaps
        Those of the part.
    """
    shape, places = _common_grid(one.orbitals.numbers, other.orbitals.numbers)
    for part in _parts(len(twists), prod(shape)):
        first, second = (
            _indicators(occupation, place, twists[part], prod(shape))
            for occupation, place in zip((one, other), places, strict=True)
        )
        yield part, Overlaps(np.rint(_product(first, second, shape)))


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
