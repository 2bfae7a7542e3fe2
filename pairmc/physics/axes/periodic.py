"""A periodic axis: plane waves e^{2πi m u}, u the coordinate as a fraction of the side.

Their values at points are tabulated in tables.py.
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
    """

    length: float

    kind = "periodic"

    def energies(self, numbers: NDArray[np.int64]) -> NDArray[np.float64]:
        """Return k²/2 with k = 2πm/L, in units of ħ²/(m · length²), one for each quantum number."""
        wavenumbers = self.wavenumbers(numbers)
        return 0.5 * wavenumbers * wavenumbers

    def wavenumbers(self, numbers: NDArray[np.int64]) -> NDArray[np.float64]:
        """Return k = 2πm/L of each quantum number m, per length unit."""
        return 2 * np.pi / self.length * np.asarray(numbers, dtype=np.float64)

    def numbers_below(self, energy: float) -> NDArray[np.int64]:
        """Return all quantum numbers m, ascending, whose energy k²/2 does not exceed `energy`.

        One number more at either end is returned, so that rounding at the edge loses none.
        """
        largest = int(np.sqrt(2 * energy) * self.length / (2 * np.pi)) + 1
        return np.arange(-largest, largest + 1, dtype=np.int64)
