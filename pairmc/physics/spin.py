"""A common rotation of the spins of two components before they are detected.

Turning all spins by an angle θ takes the spinor of the first component from (1, 0) to
(cos θ/2, sin θ/2) and that of the second from (0, 1) to (−sin θ/2, cos θ/2): entries are the
amplitudes of being detected as the first and as the second component. A snapshot is then one
determinant of all particles over position and detected label.
"""

from __future__ import annotations

from math import cos, pi, sin

import numpy as np
from numpy.typing import NDArray


def shares(rotation: float) -> tuple[float, float]:
    """Return cos² θ/2 and sin² θ/2, exact at right angles: to be detected as before, as the other.

    Parameters
    ----------
    rotation
        θ in radians.
    """
    quarters = rotation / (0.5 * pi)
    if quarters == round(quarters):
        kept = (1.0, 0.5, 0.0, 0.5)[round(quarters) % 4]
        return kept, 1.0 - kept
    return cos(0.5 * rotation) ** 2, sin(0.5 * rotation) ** 2


def amplitudes(rotation: float) -> NDArray[np.float64]:
    """Return the amplitude (label, component) of detecting each component as each label."""
    half = 0.5 * rotation
    return np.array([[cos(half), -sin(half)], [sin(half), cos(half)]])


def detected(rotation: float, prepared: tuple[float, ...]) -> tuple[float, ...]:
    """Return the mean detected numbers, or densities, of components that were prepared.

    Parameters
    ----------
    rotation
        θ in radians; 0 changes nothing, for any number of components.
    prepared
        Of each component.
    """
    if rotation == 0:
        return prepared
    kept, turned = shares(rotation)
    first, second = prepared
    return kept * first + turned * second, turned * first + kept * second
