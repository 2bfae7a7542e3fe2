"""The exact exchange hole within a radius, by quadrature over the actual shells."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise, product

import numpy as np
from numpy.typing import NDArray

from tests.oracles.pair_density import largest_transfer, pair_correlation
from tests.oracles.shells import shell_rule


def hole_charge(
    occupied_sets: Sequence[NDArray[np.int64]],
    sides: Sequence[float],
    radii: Sequence[float],
    weights: Sequence[float] | None = None,
) -> NDArray:
    """Return n_s ∫_{|x|<r} (g − 1) dV for each radius.

    Parameters
    ----------
    occupied_sets, sides, weights
        As in `pair_density.pair_correlation`.
    radii
        Ascending, positive, up to half the shortest side.

    Returns
    -------
    array (radius,)
        Between −1 and 0.
    """
    if radii[-1] > 0.5 * min(sides) * (1 + 1e-12):
        raise ValueError("balls beyond half the shortest side leave the box")
    density = len(occupied_sets[0]) / float(np.prod(sides))
    wavenumber = largest_transfer(occupied_sets, sides)
    parts = np.empty(len(radii))
    for b, (inner, outer) in enumerate(pairwise([0.0, *radii])):
        points, volumes = shell_rule(len(sides), inner, outer, wavenumber)
        hole = pair_correlation(points, occupied_sets, sides, weights) - 1.0
        parts[b] = density * hole @ volumes
    return np.cumsum(parts)


def box_transform(
    occupied_sets: Sequence[NDArray[np.int64]],
    sides: Sequence[float],
    transfer: Sequence[int],
    weights: Sequence[float] | None = None,
) -> float:
    """Return n_s ∫ (g − 1) e^{−iq·r} dV over the whole box by the trapezoid rule.

    g is a trigonometric polynomial, for which that rule is exact once it has more points along an
    axis than the highest harmonic. At q = 0 it is −1 for any set; elsewhere it is S(q) − 1.

    Parameters
    ----------
    occupied_sets, sides, weights
        As in `pair_density.pair_correlation`.
    transfer
        q in units of 2π/L_a, integers.
    """
    extent = np.max([np.ptp(waves, axis=0) for waves in occupied_sets], axis=0)
    counts = extent + np.abs(transfer) + 1
    fractions = np.array(list(product(*(np.arange(count) / count for count in counts))))
    hole = pair_correlation(fractions * np.asarray(sides), occupied_sets, sides, weights) - 1.0
    return float(len(occupied_sets[0]) * np.mean(hole * np.cos(2 * np.pi * fractions @ transfer)))
