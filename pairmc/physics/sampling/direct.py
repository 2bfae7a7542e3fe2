"""Direct draws of whole snapshots: independent, exact, no burn-in."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from pairmc.compiled import kernel
from pairmc.physics.sampling.chain import draw_positions
from pairmc.physics.sampling.features import (
    PlaneWaves,
    first_share,
    plane_waves,
    spinor_waves,
    varying_waves,
)
from pairmc.physics.snapshots import Snapshots, nothing, packed
from pairmc.physics.spin import amplitudes
from pairmc.physics.system import Averaged, Occupation, System

# Gives the generator of a role ("position", "occupation", "twist") for one component.
Streams = Callable[[str, int], np.random.Generator]


@kernel
def _count(filled):
    """Return how many orbitals are filled; padding stands behind them."""
    count = 0
    while count < filled.size and filled[count] >= 0:
        count += 1
    return count


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
            count = _count(filled[s])
            numbers = waves.numbers[filled[s, :count]]
        if count == 0:
            continue
        here = PlaneWaves(numbers, waves.largest, count, waves.like, 0, 0, waves.amplitude)
        draw_positions(rng, here, position[s, first : first + count])
        component[s, first : first + count] = label


@kernel
def _draw_rotated(rng, waves, one, other, position, component):
    """Draw both components of many snapshots, their spins rotated.

    `one` and `other` name the filled orbitals of either component by their rows in
    ``waves.numbers``, as in `_draw`; where they have no columns, ``waves.numbers`` are filled.
    """
    dimension = position.shape[2]
    for s in range(position.shape[0]):
        count, first, terms = waves.population, waves.first_population, waves.first_terms
        numbers = waves.numbers
        if one.shape[1] + other.shape[1] > 0:
            first = terms = _count(one[s])
            count = first + _count(other[s])
            numbers = np.empty((count, dimension), dtype=np.int64)
            for k in range(first):
                numbers[k] = waves.numbers[one[s, k]]
            for k in range(first, count):
                numbers[k] = waves.numbers[other[s, k - first]]
        if count == 0:
            continue
        here = PlaneWaves(numbers, waves.largest, count, waves.like, terms, first, waves.amplitude)
        points = np.empty((count, dimension + 1))
        draw_positions(rng, here, points)
        share = first_share(here)
        place = 0
        for label in range(2):
            for i in range(count):
                if (points[i, dimension] < share) == (label == 0):
                    position[s, place] = points[i, :dimension]
                    component[s, place] = label
                    place += 1


class DirectSampler:
    """Draws independent snapshots of all components of a system.

    Each component is drawn from the squared determinant of the orbitals that it fills; components
    do not influence one another. Where spins are rotated before detection, both are one determinant
    of spinor orbitals over position and label.

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
        parts = range(len(system.components))
        self._position = [streams("position", part) for part in parts]
        self._occupation = [streams("occupation", part) for part in parts]
        self._twist = streams("twist", 0)  # common to all components
        self._waves = [_waves(occupation) for occupation in system.components]
        if system.rotation:
            closed = [occupation.closed for occupation in system.components]
            if not all(closed) or len({part.like.dtype for part in self._waves}) > 1:
                self._waves = [varying_waves(part.orbitals.numbers) for part in system.components]

    def draw(self, snapshots: int) -> Snapshots:
        """Return the next `snapshots` snapshots, particles ordered by component."""
        if self._system.pair is not None:
            return self._system.pair.draw(self._position[0], snapshots)
        occupations, dimension = self._system.components, self._system.gas.dimension
        twist = np.empty((0, 0))
        if self._system.averaged:
            twist = self._twist.random((snapshots, dimension)) - 0.5
        filled = self._filled(snapshots, twist)
        widths = [
            occupation.population if occupation.closed else chosen.shape[1]
            for occupation, chosen in zip(occupations, filled, strict=True)
        ]
        drawn = nothing(snapshots, sum(widths), dimension)._replace(twist=twist)
        if self._system.rotation:
            self._draw_rotated(filled, drawn)
        else:
            self._draw_components(filled, widths, drawn)
        return drawn if all(occupation.fixed for occupation in occupations) else packed(drawn)

    def _draw_components(
        self, filled: list[NDArray[np.int64]], widths: list[int], drawn: Snapshots
    ) -> None:
        """Draw the components one after the other into `drawn`."""
        first = 0
        for part, (chosen, width) in enumerate(zip(filled, widths, strict=True)):
            rng, waves = self._position[part], self._waves[part]
            if width:
                _draw(rng, waves, chosen, first, part, drawn.position, drawn.component)
            first += width

    def _draw_rotated(self, filled: list[NDArray[np.int64]], drawn: Snapshots) -> None:
        """Draw both components as one determinant into `drawn`; the first stream serves both."""
        rng, occupations = self._position[0], self._system.components
        turned = amplitudes(self._system.rotation)
        waves = spinor_waves(self._waves[0], self._waves[1], turned)
        closed = [occupation.closed for occupation in occupations]
        one, other = (
            np.tile(np.arange(part.population), (len(chosen), 1)) if shut else chosen
            for part, shut, chosen in zip(occupations, closed, filled, strict=True)
        )
        if waves.population:  # closed, and known once and for all
            one, other = (np.empty((len(one), 0), dtype=np.int64) for _ in range(2))
        rows = len(self._waves[0].numbers)
        other = np.where(other >= 0, other + rows, -1)
        _draw_rotated(rng, waves, one, other, drawn.position, drawn.component)

    def _filled(self, snapshots: int, twist: NDArray[np.float64]) -> list[NDArray[np.int64]]:
        """Return the filled orbitals of each component; no columns where they are always all."""
        if self._system.averaged:
            return [
                occupation.draw_at(rng, twist)
                for rng, occupation in zip(self._occupation, self._system.averaged, strict=True)
            ]
        return [
            np.empty((snapshots, 0), dtype=np.int64)
            if occupation.closed
            else occupation.draw(rng, snapshots)
            for rng, occupation in zip(self._occupation, self._system.occupations, strict=True)
        ]


def _waves(occupation: Occupation | Averaged) -> PlaneWaves:
    """Return the filled plane waves, or all that may be filled where that varies."""
    numbers = occupation.orbitals.numbers
    return plane_waves(numbers) if occupation.closed else varying_waves(numbers)
