"""Snapshots: the positions and components of all particles, many snapshots at a time."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray


class Snapshots(NamedTuple):
    """Independent snapshots of one system.

    Parameters
    ----------
    position : array (snapshot, particle, axis) of float64
        Fractions of the sides, in [0, 1).
    component : array (snapshot, particle) of int8
        Component of each particle.
    """

    position: NDArray[np.float64]
    component: NDArray[np.int8]
