"""Snapshots: the positions and components of all particles, many snapshots at a time."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

# Component of a place that holds no particle, where numbers fluctuate; its position is NaN.
NO_COMPONENT = -1


class Snapshots(NamedTuple):
    """Independent snapshots of one system.

    Parameters
    ----------
    position : array (snapshot, particle, axis) of float64, where stored of float32
        Fractions of the sides, in [0, 1); NaN where there is no particle.
    component : array (snapshot, particle) of int8
        Component of each particle; `NO_COMPONENT` where there is none, after all particles.
    twist : array (snapshot, axis) of float64
        Twist of each snapshot in units of 2π; empty where all have the same.
    """

    position: NDArray[Any]
    component: NDArray[np.int8]
    twist: NDArray[np.float64] = np.empty((0, 0))

    def first(self, count: int) -> Snapshots:
        """Return the first `count` snapshots."""
        return Snapshots(self.position[:count], self.component[:count], self.twist[:count])


def packed(snapshots: Snapshots) -> Snapshots:
    """Move empty places behind the particles, and drop those that are empty in every snapshot."""
    empty = snapshots.component == NO_COMPONENT
    order = np.argsort(empty, axis=1, kind="stable")
    width = int((~empty).sum(axis=1).max(initial=0))
    order = order[:, :width]
    return Snapshots(
        np.take_along_axis(snapshots.position, order[:, :, None], axis=1),
        np.take_along_axis(snapshots.component, order, axis=1),
        snapshots.twist,
    )


def joined(parts: Sequence[Snapshots], particles: int, dimension: int) -> Snapshots:
    """Return the snapshots of all parts, in order, as wide as the widest.

    Parameters
    ----------
    parts
        Any number, also none.
    particles, dimension
        Width and axes where there are no parts.
    """
    if not parts:
        return nothing(0, particles, dimension)
    width = max(part.component.shape[1] for part in parts)
    return Snapshots(
        np.concatenate([widened(part, width).position for part in parts]),
        np.concatenate([widened(part, width).component for part in parts]),
        np.concatenate([part.twist for part in parts]),
    )


def nothing(snapshots: int, particles: int, dimension: int) -> Snapshots:
    """Return snapshots of which every place is empty."""
    return Snapshots(
        np.full((snapshots, particles, dimension), np.nan),
        np.full((snapshots, particles), NO_COMPONENT, dtype=np.int8),
    )


def widened(snapshots: Snapshots, width: int) -> Snapshots:
    """Return the snapshots with empty places up to `width` added; of the same number types."""
    missing = width - snapshots.component.shape[1]
    return Snapshots(
        np.pad(snapshots.position, ((0, 0), (0, missing), (0, 0)), constant_values=np.nan),
        np.pad(snapshots.component, ((0, 0), (0, missing)), constant_values=NO_COMPONENT),
        snapshots.twist,
    )
