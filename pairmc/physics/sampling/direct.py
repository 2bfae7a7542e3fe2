"""Direct draws of whole snapshots: independent, exact, no burn-in."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from pairmc.compiled import kernel
from pairmc.physics.occupation.ground import GroundState
from pairmc.physics.sampling.chain import draw_positions
from pairmc.physics.sampling.features import PlaneWaves, plane_waves
from pairmc.physics.snapshots import Snapshots
from pairmc.physics.system import System

# Gives the generator of a role ("position" or "occupation") for one component.
Streams = Callable[[str, int], np.random.Generator]


@kernel
def _draw(rng, waves, filled, first, position):
    """Draw one component of many snapshots.

    `filled` names the filled orbitals of every snapshot by their rows in ``waves.numbers``; where
    it is empty, ``waves.numbers`` are filled in all.
    """
    for s in range(position.shape[0]):
        numbers = waves.numbers[filled[s]] if filled.size > 0 else waves.numbers
        here = PlaneWaves(numbers, waves.largest, waves.population, waves.like)
        draw_positions(rng, here, position[s, first : first + waves.population])


class DirectSampler:
    """Draws independent snapshots of all components of a system.

    Each component is drawn from the squared determinant of the orbitals that it fills; components
    do not influence one another.

    Parameters
    ----------
    system
        The gas in its box.
    streams
        Gives the random numbers: one stream a role and component, used snapshot after snapshot, so
        that drawing 3 and then 4 snapshots equals drawing 7.
    """

    def __init__(self, system: System, streams: Streams) -> None:
        self._system = system
        parts = range(len(system.occupations))
        self._position = [streams("position", part) for part in parts]
        self._occupation = [streams("occupation", part) for part in parts]
        self._waves = [_waves(occupation) for occupation in system.occupations]

    def draw(self, snapshots: int) -> Snapshots:
        """Return the next `snapshots` snapshots, particles ordered by component."""
        gas = self._system.gas
        position = np.empty((snapshots, gas.particles, gas.dimension))
        first = 0
        for part, occupation in enumerate(self._system.occupations):
            filled = np.empty((0, 0), dtype=np.int64)
            if not occupation.closed:
                filled = occupation.draw(self._occupation[part], snapshots)
            _draw(self._position[part], self._waves[part], filled, first, position)
            first += occupation.population
        component = np.repeat(np.arange(len(gas.populations), dtype=np.int8), gas.populations)
        return Snapshots(position, np.tile(component, (snapshots, 1)))


def _waves(occupation: GroundState) -> PlaneWaves:
    """Return the filled plane waves, or all that may be filled where that varies."""
    numbers = occupation.orbitals.numbers
    if occupation.closed:
        return plane_waves(numbers)
    largest = np.abs(numbers).max(axis=0)
    return PlaneWaves(numbers, largest, occupation.population, np.empty(0, dtype=np.complex128))
