"""Direct draws of whole snapshots: independent, exact, no burn-in."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from pairmc.compiled import kernel
from pairmc.physics.sampling.chain import draw_positions
from pairmc.physics.sampling.features import PlaneWaves, plane_waves
from pairmc.physics.snapshots import Snapshots, nothing, packed
from pairmc.physics.system import Occupation, System

# Gives the generator of a role ("position" or "occupation") for one component.
Streams = Callable[[str, int], np.random.Generator]


@kernel
def _draw(rng, waves, filled, first, label, position, component):
    """Draw one component of many snapshots.

    `filled` names the filled orbitals of every snapshot by their rows in ``waves.numbers``, −1
    being padding; where it has no columns, ``waves.numbers`` are filled in all.
    """
    for s in range(position.shape[0]):
        count = waves.population
        numbers = waves.numbers
        if filled.shape[1] > 0:
            count = 0
            while count < filled.shape[1] and filled[s, count] >= 0:
                count += 1
            numbers = waves.numbers[filled[s, :count]]
        if count == 0:
            continue
        here = PlaneWaves(numbers, waves.largest, count, waves.like)
        draw_positions(rng, here, position[s, first : first + count])
        component[s, first : first + count] = label


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
        occupations = self._system.occupations
        filled = [
            np.empty((snapshots, 0), dtype=np.int64)
            if occupation.closed
            else occupation.draw(self._occupation[part], snapshots)
            for part, occupation in enumerate(occupations)
        ]
        widths = [
            occupation.population if occupation.closed else chosen.shape[1]
            for occupation, chosen in zip(occupations, filled, strict=True)
        ]
        drawn = nothing(snapshots, sum(widths), self._system.gas.dimension)
        first = 0
        for part, (chosen, width) in enumerate(zip(filled, widths, strict=True)):
            rng, waves = self._position[part], self._waves[part]
            if width:
                _draw(rng, waves, chosen, first, part, drawn.position, drawn.component)
            first += width
        return drawn if all(occupation.fixed for occupation in occupations) else packed(drawn)


def _waves(occupation: Occupation) -> PlaneWaves:
    """Return the filled plane waves, or all that may be filled where that varies."""
    numbers = occupation.orbitals.numbers
    if occupation.closed:
        return plane_waves(numbers)
    largest = np.abs(numbers).max(axis=0)
    return PlaneWaves(numbers, largest, occupation.population, np.empty(0, dtype=np.complex128))
