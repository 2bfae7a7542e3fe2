"""Weights of wave-vector differences on a grid, and what is asked of them."""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy import fft

from pairmc.physics.axes.periodic import Periodic

# Wave numbers closer than this fraction are one.
_SAME_WAVENUMBER = 1e-12


class Overlaps(NamedTuple):
    """W(q) on a grid of differences of quantum numbers.

    Parameters
    ----------
    weights : array (snapshot, …)
        One axis per axis of the box; in the order of transforms, or folded.
    folded
        Only differences without a negative part are there; W is even along each axis.
    """

    weights: NDArray[np.float64]
    folded: bool = False

    @property
    def total(self) -> NDArray[np.float64]:
        """Sum over all differences (snapshot,)."""
        flat = self.weights.reshape(len(self.weights), -1)
        return np.asarray(flat @ self._copies() if self.folded else flat.sum(axis=1))

    @property
    def at_zero(self) -> NDArray[np.float64]:
        """W(0) (snapshot,)."""
        return self.weights.reshape(len(self.weights), -1)[:, 0]

    def at(self, steps: tuple[int, ...]) -> NDArray[np.float64]:
        """Return W (snapshot,) at one difference; 0 beyond the grid."""
        shape = self.weights.shape[1:]
        reach = [size - 1 if self.folded else size // 2 for size in shape]
        if any(abs(step) > most for step, most in zip(steps, reach, strict=True)):
            return np.zeros(len(self.weights))
        place = [
            abs(step) if self.folded else step % size
            for step, size in zip(steps, shape, strict=True)
        ]
        flat = self.weights.reshape(len(self.weights), -1)
        return flat[:, int(np.ravel_multi_index(place, shape))]

    def by_length(
        self, axes: Sequence[Periodic]
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return the lengths of differences that occur, and the sum of the weights of each.

        Parameters
        ----------
        axes
            The axes of the box.

        Returns
        -------
        wavenumbers : array (difference,)
            |q| > 0, ascending, per length unit.
        sums : array (snapshot, difference)
        """
        flat = self.weights.reshape(len(self.weights), -1)
        largest = flat.max(axis=0, initial=0.0)
        largest[0] = 0.0  # q = 0 is no difference
        occurring = largest > 1e-9 * largest.max()
        wavenumbers = self._lengths(axes)
        order = np.flatnonzero(occurring)
        order = order[np.argsort(wavenumbers[order], kind="stable")]
        ascending = wavenumbers[order]
        if len(ascending) == 0:
            return ascending, np.zeros((len(flat), 0))
        chosen = flat[:, order] * self._copies()[order] if self.folded else flat[:, order]
        step = np.diff(ascending) > _SAME_WAVENUMBER * ascending[1:]
        first = np.concatenate(([0], np.flatnonzero(step) + 1))
        return ascending[first], np.add.reduceat(chosen, first, axis=1)

    def _steps(self) -> list[NDArray[np.int64]]:
        """Return the differences along each axis, in the order of the grid."""
        if self.folded:
            return [np.arange(size) for size in self.weights.shape[1:]]
        return [
            np.rint(fft.fftfreq(size) * size).astype(np.int64) for size in self.weights.shape[1:]
        ]

    def _lengths(self, axes: Sequence[Periodic]) -> NDArray[np.float64]:
        """Return |q| of every entry of the grid, as one row, per length unit."""
        square = np.zeros(self.weights.shape[1:])
        for a, (axis, steps) in enumerate(zip(axes, self._steps(), strict=True)):
            part = axis.steps(steps) ** 2
            square += part.reshape([-1 if b == a else 1 for b in range(square.ndim)])
        return np.asarray(np.sqrt(square.ravel()))

    def _copies(self) -> NDArray[np.float64]:
        """Return for how many differences every entry of a folded grid stands, as one row."""
        copies = np.ones(self.weights.shape[1:])
        for a, steps in enumerate(self._steps()):
            part = np.where(steps > 0, 2.0, 1.0)
            copies *= part.reshape([-1 if b == a else 1 for b in range(copies.ndim)])
        return copies.ravel()
