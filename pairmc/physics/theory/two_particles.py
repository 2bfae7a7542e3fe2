"""Exact pair correlation of a singlet or triplet of two particles.

Shares with the sampler only what the state is. The state is Φ(r) χ[s, s'], Φ the spatial part and χ
the spin amplitudes; with D the rotation of one spin χ becomes D χ Dᵀ, so that

    ρ⁽²⁾_ss'(r) = 2 |Φ(r)|² |(D χ Dᵀ)[s, s']|²,   |Φ(r)|² = (1 ± cos q·r)/V²,

the density of ordered pairs: s at 0, s' at r. Each component is detected once on average.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.spin import amplitudes
from pairmc.physics.theory.pair_densities import shell_mean_cosine
from pairmc.physics.two_particles import TwoParticleState

# Spin amplitudes (label, label) of two particles.
_SPINS = {
    "singlet": np.array([[0.0, 1.0], [-1.0, 0.0]]) / np.sqrt(2.0),
    "triplet": np.array([[0.0, 1.0], [1.0, 0.0]]) / np.sqrt(2.0),
}


def pair_correlation(
    state: TwoParticleState, sides: Sequence[float], edges: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return g = V² ρ⁽²⁾ averaged over directions and each bin.

    Parameters
    ----------
    state
        Singlet or triplet.
    sides
        Sides of the box, length units.
    edges : array (separation + 1,)
        Edges of the bins, length units, up to half the shortest side.

    Returns
    -------
    array (3, separation)
        first-first, first-second, second-second.
    """
    cosine = np.ones(len(edges) - 1)
    wavenumber = float(np.linalg.norm(2 * np.pi * state.step / np.asarray(sides)))
    if wavenumber > 0:
        cosine = shell_mean_cosine(len(sides), np.array([wavenumber]), edges)[0]
    return _correlation(state, cosine)


def pair_correlation_at(
    state: TwoParticleState, sides: Sequence[float], displacements: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return g = V² ρ⁽²⁾ at displacement vectors.

    Parameters
    ----------
    state, sides
        See `pair_correlation`.
    displacements : array (point, axis)
        Length units.

    Returns
    -------
    array (3, point)
        first-first, first-second, second-second.
    """
    waved = displacements @ (2 * np.pi * state.step / np.asarray(sides))
    return _correlation(state, np.cos(waved))


def _correlation(state: TwoParticleState, cosine: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return g of the three pairs of labels where the cosine, or its mean, is known."""
    turned = amplitudes(state.rotation) @ _SPINS[state.kind] @ amplitudes(state.rotation).T
    chances = 2.0 * np.array([turned[0, 0], turned[0, 1], turned[1, 1]]) ** 2
    if not state.step.any():
        return np.outer(chances, np.ones_like(cosine))
    sign = 1.0 if state.kind == "singlet" else -1.0
    return np.outer(chances, 1.0 + sign * cosine)
