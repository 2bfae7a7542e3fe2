"""A spin singlet or triplet of two particles, drawn exactly.

Two orbitals a and b of a periodic box, particles 1 and 2 of one component each:

    singlet (φ_a φ_b + φ_b φ_a)/√2 · (up down − down up)/√2, or φ_a φ_a where a = b,
    triplet (φ_a φ_b − φ_b φ_a)/√2 · (up down + down up)/√2

(two spins ½ and exchange symmetry: any text on quantum mechanics). The squared spatial part depends
on the separation alone, (1 ± cos q·r)/V² with q = k_a − k_b, + for the singlet.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import pi
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.snapshots import Snapshots
from pairmc.physics.spin import shares


@dataclass(frozen=True, eq=False)
class TwoParticleState:
    """A singlet or triplet of two particles of different components.

    Parameters
    ----------
    kind
        ``"singlet"`` or ``"triplet"``, the one with as many up as down.
    numbers : array (2, axis) of int64
        Quantum numbers of the two orbitals; equal ones only in a singlet. A twist changes neither
        positions nor labels.
    rotation
        Angle in radians by which both spins are turned before they are detected.
    """

    kind: Literal["singlet", "triplet"]
    numbers: NDArray[np.int64]
    rotation: float = 0.0

    @property
    def step(self) -> NDArray[np.int64]:
        """Difference of the quantum numbers (axis,): q in units of 2π over the sides."""
        return np.asarray(self.numbers[0] - self.numbers[1], dtype=np.int64)

    def draw(self, rng: np.random.Generator, snapshots: int) -> Snapshots:
        """Return independent snapshots, particles ordered by the component detected.

        Parameters
        ----------
        rng
            Used snapshot after snapshot, the same number of times for each.
        snapshots
            How many.

        Returns
        -------
        Snapshots
            Positions (snapshot, 2, axis) as fractions of the sides, components (snapshot, 2).
        """
        dimension = self.numbers.shape[1]
        uniform = rng.random((snapshots, 2 * dimension + 2))
        first = uniform[:, :dimension]
        separation = self._separation(uniform[:, dimension:-2], uniform[:, -2])
        position = np.stack([first, (first + separation) % 1.0], axis=1)
        return Snapshots(position, self._labels(uniform[:, -1]))

    def _separation(
        self, proposal: NDArray[np.float64], threshold: NDArray[np.float64]
    ) -> NDArray[np.float64]:
        """Return separations (snapshot, axis) with the density 1 ± cos q·r, fractions of the sides.

        A uniform proposal is kept with probability (1 ± cos q·r)/2. What is not kept is moved by
        half a wavelength, which turns the sign of the cosine: it arrives with (1 ± cos q·r)/2 too.
        """
        if not self.step.any():
            return proposal
        sign = 1.0 if self.kind == "singlet" else -1.0
        cosine = np.cos(2 * pi * (proposal @ self.step))
        moved = threshold >= 0.5 * (1.0 + sign * cosine)
        axis = int(np.flatnonzero(self.step)[0])
        separation = proposal.copy()
        separation[moved, axis] += 0.5 / abs(int(self.step[axis]))
        return separation

    def _labels(self, uniform: NDArray[np.float64]) -> NDArray[np.int8]:
        """Return the components detected (snapshot, 2), ascending.

        A rotation does not change the singlet. The triplet is seen in one component with
        probability sin² θ, each as often as the other.
        """
        labels = np.zeros((len(uniform), 2), dtype=np.int8)
        labels[:, 1] = 1
        if self.kind == "triplet":
            unlike = shares(2.0 * self.rotation)[0]
            labels[uniform >= unlike, 1] = 0
            labels[uniform >= 0.5 * (1.0 + unlike)] = 1
        return labels
