"""A periodic axis: plane waves e^{2πi (m + τ) u}, u the coordinate as a fraction of the side.

A twist τ multiplies every wave function by e^{2πiτ} where it leaves the box and comes in again
(Lin, Zong & Ceperley, PRE 64, 016702, 2001). It moves the wave numbers, and so decides which
orbitals are filled; no squared determinant depends on the common factor e^{2πiτu}, so values at
points (tables.py) and differences of wave numbers know nothing of it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True)
class Periodic:
    """One periodic direction of the box.

    Parameters
    ----------
    length
        Side of the box along this axis, length units.
    twist
        τ, in units of 2π, from −½ to ½.
    """

    length: float
    twist: float = 0.0

    kind = "periodic"

    def energies(self, numbers: NDArray[np.int64]) -> NDArray[np.float64]:
        """Return k²/2 with k = 2π(m + τ)/L, in ħ²/(m · length²), one for each quantum number."""
        wavenumbers = self.wavenumbers(numbers)
        return 0.5 * wavenumbers * wavenumbers

    def wavenumbers(self, numbers: NDArray[np.int64]) -> NDArray[np.float64]:
        """Return k = 2π(m + τ)/L of each quantum number m, per length unit."""
        return 2 * np.pi / self.length * (np.asarray(numbers, dtype=np.float64) + self.twist)

    def steps(self, differences: NDArray[np.int64]) -> NDArray[np.float64]:
        """Return 2πm/L, the step in k between orbitals whose quantum numbers differ by m."""
        return 2 * np.pi / self.length * np.asarray(differences, dtype=np.float64)

    def numbers_below(self, energy: float) -> NDArray[np.int64]:
        """Return all quantum numbers m, ascending, whose energy k²/2 does not exceed `energy`.

        A number or two more at either end are returned, so that rounding at the edge loses none.
        """
        largest = int(np.sqrt(2 * energy) * self.length / (2 * np.pi) + abs(self.twist)) + 1
        return np.arange(-largest, largest + 1, dtype=np.int64)
