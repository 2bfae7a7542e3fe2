"""Pair correlation: how often two particles are found at a separation, against chance.

g_ss'(r) = ρ⁽²⁾_ss'(r)/(n_s n_s'), averaged over directions and over each bin; normalised by the
densities of the run, not by the number of pairs, so that like particles at fixed N have
∫(g − 1) n dV = −1 exactly.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from pairmc.compiled import kernel
from pairmc.physics.grids import SeparationGrid, separation_grid
from pairmc.physics.observables.pair_correlation_settings import Settings
from pairmc.physics.observables.variable import Headline, Variable
from pairmc.physics.snapshots import Snapshots
from pairmc.physics.system import System

NAME = "pair_correlation"

DIMENSIONS = ("pair", "separation")

COUNT = Variable(DIMENSIONS, 0, "unordered pairs in the bin")
COUNT_NAME = "pair_count"

# The variable that counts divided by (snapshots · grid.ideal) give.
MAIN = "pair_correlation"

VARIABLES = {
    "pair_correlation": Variable(DIMENSIONS, 0, "pair correlation, normalised by the densities"),
    "exchange_hole": Variable(
        DIMENSIONS,
        "-dimension",
        "exchange hole: density of the second component of the pair around a particle of the "
        "first, less its mean density",
    ),
}

HEADLINE = Headline(
    "hole_depth",
    Variable(
        ("pair",),
        "-dimension",
        "depth of the exchange hole: density missing next to a particle, innermost merged bin",
    ),
)


def grid(settings: Settings, system: System) -> SeparationGrid:
    """Return the bins of the separation.

    Parameters
    ----------
    settings
        The observable's table of the run file.
    system
        The gas in its box.
    """
    return separation_grid(system, settings.bins)


def empty(grid: SeparationGrid, averaged: bool = False) -> dict[str, NDArray[Any]]:
    """Return tallies of nothing.

    Parameters
    ----------
    grid
        The bins.
    averaged
        Every snapshot has a twist of its own, and so an expectation of its own.

    Returns
    -------
    dict
        ``count`` (pair, separation): unordered pairs in each bin. ``moment_sum`` (joint) and
        ``moment_product`` (joint, joint): Σx and Σxxᵀ over snapshots, x the pairs of one snapshot
        in each joint bin. All int64, so that they add exactly in any order. With `averaged` also,
        float64, ``expected_count`` (pair, separation), the sum of expectations, and
        ``residual_sum``, ``residual_product``: Σy and Σyyᵀ of y, x less its expectation.
    """
    joint, shape = grid.joint_bins, (len(grid.pairs), grid.bins)
    tallies: dict[str, NDArray[Any]] = {
        "count": np.zeros(shape, dtype=np.int64),
        "moment_sum": np.zeros(joint, dtype=np.int64),
        "moment_product": np.zeros((joint, joint), dtype=np.int64),
    }
    if averaged:
        tallies["expected_count"] = np.zeros(shape)
        tallies["residual_sum"] = np.zeros(joint)
        tallies["residual_product"] = np.zeros((joint, joint))
    return tallies


def tally(
    snapshots: Snapshots,
    grid: SeparationGrid,
    out: dict[str, NDArray[Any]],
    expected: NDArray[np.float64] | None = None,
) -> None:
    """Add the pairs of many snapshots to `out`.

    Parameters
    ----------
    snapshots
        Positions and components.
    grid
        The bins.
    out
        Tallies as made by `empty`; added to in place.
    expected : array (snapshot, pair, separation)
        Pair correlation expected of each snapshot, where that differs between them.
    """
    components = 1 + max(j for _, _, j in grid.pairs)
    pair_of = np.empty((components, components), dtype=np.int64)
    for index, (_, i, j) in enumerate(grid.pairs):
        pair_of[i, j] = pair_of[j, i] = index
    single = 0 if expected is None else len(snapshots.position)
    vectors = np.zeros((single, grid.joint_bins), dtype=np.int64)
    _tally_pairs(
        snapshots.position,
        snapshots.component,
        grid.sides,
        pair_of,
        grid.bins / grid.edges[-1],
        grid.joint,
        out["count"],
        out["moment_sum"],
        out["moment_product"],
        vectors,
    )
    if expected is not None:
        counts = expected * grid.ideal
        residual = vectors - np.stack([grid.joint_sums(part) for part in counts])
        out["expected_count"] += counts.sum(axis=0)
        out["residual_sum"] += residual.sum(axis=0)
        out["residual_product"] += residual.T @ residual


@kernel
def _count_pairs(position, component, sides, pair_of, bins_per_length, count):
    """Add the pairs of one snapshot, at their minimum-image separation, to `count`.

    The separations from one particle to those before it are worked out together, an axis at a time,
    so that they run through the vector unit; only the counting is one by one.
    """
    places, dimension = position.shape
    bins = count.shape[1]
    particles = 0
    while particles < places and component[particles] >= 0:
        particles += 1  # empty places stand behind all particles
    scaled = np.empty((dimension, particles))
    for i in range(particles):
        for a in range(dimension):
            scaled[a, i] = position[i, a]
    square = np.empty(particles)
    index = np.empty(particles, dtype=np.int32)
    for i in range(particles):
        square[:i] = 0.0
        for a in range(dimension):
            along = scaled[a]
            here = along[i]
            scale = (sides[a] * bins_per_length) ** 2
            for j in range(i):
                step = abs(along[j] - here)
                step = min(step, 1.0 - step)
                square[j] += scale * (step * step)
        for j in range(i):
            index[j] = np.int32(np.sqrt(square[j]))
        row = pair_of[component[i]]
        for j in range(i):
            if index[j] < bins:
                count[row[component[j]], index[j]] += 1


@kernel
def _tally_pairs(
    position,
    component,
    sides,
    pair_of,
    bins_per_length,
    joint,
    total,
    moment_sum,
    moment_product,
    vectors,
):
    """Add the pairs of all snapshots, and the moments of their joint bins.

    The joint bins of each snapshot are written to `vectors` where that has rows.
    """
    count = np.empty(total.shape, dtype=np.int64)
    vector = np.empty(moment_sum.size, dtype=np.int64)
    for s in range(position.shape[0]):
        count[:] = 0
        vector[:] = 0
        _count_pairs(position[s], component[s], sides, pair_of, bins_per_length, count)
        for pair in range(total.shape[0]):
            for b in range(total.shape[1]):
                total[pair, b] += count[pair, b]
                vector[joint[pair, b]] += count[pair, b]
        if s < vectors.shape[0]:
            for k in range(vector.size):
                vectors[s, k] = vector[k]
        for k in range(vector.size):
            moment_sum[k] += vector[k]
            for l in range(vector.size):
                moment_product[k, l] += vector[k] * vector[l]


def values(
    count: NDArray[np.int64] | NDArray[np.float64],
    snapshots: NDArray[np.int64] | int,
    grid: SeparationGrid,
) -> dict[str, NDArray[np.float64]]:
    """Return the variables that follow from counts.

    Parameters
    ----------
    count : array (…, pair, separation)
        Unordered pairs in each bin.
    snapshots : int or array (…, 1, 1)
        Snapshots they were counted in.
    grid
        The bins.

    Returns
    -------
    dict
        ``pair_correlation`` = count/(snapshots · ideal); ``exchange_hole`` = n_s'(g − 1), per
        length unit**dimension.
    """
    correlation = count / (snapshots * grid.ideal)
    return derived(correlation, grid)


def derived(
    correlation: NDArray[np.float64], grid: SeparationGrid
) -> dict[str, NDArray[np.float64]]:
    """Return all variables from the pair correlation (…, pair, separation)."""
    hole = grid.density_second[:, None] * (correlation - 1.0)
    return {"pair_correlation": correlation, "exchange_hole": hole}


def mean_counts(
    expected: dict[str, NDArray[np.float64]], grid: SeparationGrid
) -> NDArray[np.float64]:
    """Return the pairs per snapshot in each bin (pair, separation) if the values are `expected`."""
    return expected["pair_correlation"] * grid.ideal


def headline(correlation: NDArray[np.float64], grid: SeparationGrid) -> NDArray[np.float64]:
    """Return the depth of the hole n_s'(1 − g), where g (pair,) is that next to contact."""
    return grid.density_second * (1.0 - correlation)
