"""Exact values as functions of the twist.

Everything that is averaged over directions repeats when a component of the twist grows by 1, and
does not change where the twist is reversed. A warm gas depends on it smoothly, so a short Fourier
series is the whole function: its terms of order p fall as e^{−p π L k_B T/k_F}, k_B T in ħ²/m (the
damping of a finite box's oscillations by temperature). A nearly cold gas needs a term for every
orbital; there each twist is worked out on its own.
"""

from __future__ import annotations

from collections.abc import Callable
from itertools import product
from math import log, pi

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.system import System

FloatArray = NDArray[np.float64]

# Twists along each axis that a series is made from; odd, so that all frequencies have partners.
_SIZES = (3, 5, 7, 9, 13, 17, 25, 33, 49, 65)

# The highest terms of a series are below this fraction of the largest value. They average out over
# random twists, and the mean over all twists is off by the terms of twice that order only.
TOLERANCE = 1e-6

# Nothing is concluded from a series so short that temperature alone leaves more of its last term: a
# nearly cold gas is constant but for a few sharp steps, which a few twists need not show.
DAMPED = 1e-5

# A series is believed once it gives the value at a twist that it was not made from, to this.
_CHECKED = 1e-5
_IRREGULAR = (0.4987, 0.3172, 0.1459)

# At most so many twists are worked out for a series.
MOST = 3000


def slowest_fall(system: System) -> float:
    """Return the rate a, of e^{−a p}, at which temperature damps terms of order p: π L k_B T/k_F.

    Parameters
    ----------
    system
        The gas in its box. The smallest rate of all axes and components is returned.
    """
    gas = system.gas
    return pi * min(system.sides) * gas.thermal_energy / max(gas.fermi_wavenumbers)


class TwistFunction:
    """A vector that depends on the twist, worked out once at a few twists where that suffices.

    Parameters
    ----------
    function
        Takes a twist (axis,) in units of 2π and returns a vector; even, and of period 1.
    dimension
        Number of axes.
    fall
        Rate at which terms are damped, see `slowest_fall`.
    """

    def __init__(
        self, function: Callable[[FloatArray], FloatArray], dimension: int, fall: float
    ) -> None:
        self._function = function
        self._dimension = dimension
        self._series = self._expand(-log(DAMPED) / fall)

    def __call__(self, twists: FloatArray) -> FloatArray:
        """Return the vector (snapshot, entry) at each twist (snapshot, axis)."""
        if self._series is None:
            return np.stack([self._function(twist) for twist in twists])
        frequencies, terms = self._series
        return np.cos(2 * np.pi * twists @ frequencies.T) @ terms

    def _expand(self, order: float) -> tuple[FloatArray, FloatArray] | None:
        """Return frequencies (term, axis) and terms (term, entry), or None: too many are needed.

        Parameters
        ----------
        order
            The least order of the highest terms.
        """
        for size in _SIZES:
            half = size // 2
            if half < order:
                continue
            if size**self._dimension > MOST:
                return None
            steps = np.array(list(product(range(-half, half + 1), repeat=self._dimension)))
            values = self._values(steps, size)
            # on this grid the cosines are orthogonal: the transform of an even function
            terms = np.cos(2 * np.pi / size * steps @ steps.T) @ values / len(steps)
            scale = np.abs(values).max(initial=0.0)
            highest = np.abs(terms[np.abs(steps).max(axis=1) == half]).max(initial=0.0)
            frequencies = steps.astype(np.float64)
            if highest <= TOLERANCE * scale and self._holds(frequencies, terms, scale):
                return frequencies, terms
        return None

    def _holds(self, frequencies: FloatArray, terms: FloatArray, scale: float) -> bool:
        """Return whether the series gives the value at a twist that it was not made from."""
        twist = np.array(_IRREGULAR[: self._dimension])
        difference = np.cos(2 * np.pi * frequencies @ twist) @ terms - self._function(twist)
        return bool(np.abs(difference).max(initial=0.0) <= _CHECKED * scale)

    def _values(self, steps: NDArray[np.int64], size: int) -> FloatArray:
        """Return the function at twists of whole steps of 1/size, each pair ±τ worked out once."""
        known: dict[tuple[int, ...], FloatArray] = {}
        for step in map(tuple, steps.tolist()):
            opposite = tuple(-part for part in step)
            if opposite in known:
                known[step] = known[opposite]
            else:
                known[step] = self._function(np.array(step) / size)
        return np.stack(list(known.values()))
