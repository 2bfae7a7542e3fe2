"""What is measured where: bins of the separation of two particles."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.gas import ball_volume
from pairmc.physics.system import System, pair_labels
from pairmc.statistics import sum_by_group

# The covariance of an observable is kept over at most about this many joint bins.
JOINT_BINS = 100


class Coordinate(NamedTuple):
    """One coordinate of a grid, as a result file names it.

    Parameters
    ----------
    dimensions
        Names of its dimensions.
    values : array
        Numbers in length units to the power below, or labels as bytes.
    length_power
        Its unit as a power of the length unit; None for labels.
    long_name
        What it is.
    """

    dimensions: tuple[str, ...]
    values: NDArray[Any]
    length_power: int | None
    long_name: str


@dataclass(frozen=True, eq=False)
class SeparationGrid:
    """Equal bins of the separation from contact to half the shortest side, for all pairs.

    Parameters
    ----------
    pairs
        Label and the two component indices of each unordered pair of components.
    edges : array (separation + 1,)
        Edges of the bins, length units.
    sides : array (axis,)
        Sides of the box, length units.
    ideal : array (pair, separation)
        Unordered pairs per snapshot that a bin would hold at g = 1: ½ n_s² V Δv for like
        components, n_s n_s' V Δv for unlike ones, Δv the volume of the shell.
    density_second : array (pair,)
        Density of the second component of each pair, per length unit**dimension.
    joint : array (pair, separation) of int64
        Joint bin, over which per-snapshot moments are kept, of every bin.
    scale
        k_F of the majority component, per length unit.
    """

    pairs: tuple[tuple[str, int, int], ...]
    edges: NDArray[np.float64]
    sides: NDArray[np.float64]
    ideal: NDArray[np.float64]
    density_second: NDArray[np.float64]
    joint: NDArray[np.int64]
    scale: float

    @property
    def bins(self) -> int:
        """Number of separation bins."""
        return len(self.edges) - 1

    @property
    def joint_bins(self) -> int:
        """Number of joint bins, all pairs together."""
        return int(self.joint.max()) + 1

    @property
    def blocks(self) -> NDArray[np.int64]:
        """Block of every joint bin: its pair. Only bins of one block are ever merged."""
        blocks = np.zeros(self.joint_bins, dtype=np.int64)
        blocks[self.joint] = np.arange(len(self.pairs))[:, None]
        return blocks

    def coordinates(self) -> dict[str, Coordinate]:
        """Return what a result file says about the bins."""
        labels = np.array([label.encode() for label, _, _ in self.pairs])
        centres = 0.5 * (self.edges[1:] + self.edges[:-1])
        bounds = np.stack([self.edges[:-1], self.edges[1:]], axis=1)
        along = ("separation",)
        return {
            "pair": Coordinate(("pair",), labels, None, "pair of spin components"),
            "separation": Coordinate(along, centres, 1, "separation of two particles"),
            "separation_bounds": Coordinate(
                (*along, "bound"), bounds, 1, "separation of two particles"
            ),
            "scaled_separation": Coordinate(
                along, self.scale * centres, 0, "separation times k_F of the majority component"
            ),
        }

    def joint_sums(self, values: NDArray[np.float64]) -> NDArray[np.float64]:
        """Add an array (pair, separation) up over each joint bin."""
        return sum_by_group(values, self.joint, self.joint_bins)


def shell_volumes(dimension: int, edges: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the volume between neighbouring radii: the difference of two balls.

    Parameters
    ----------
    dimension
        1, 2 or 3.
    edges : array (bins + 1,)
        Radii, length units.
    """
    return ball_volume(dimension, 1.0) * np.diff(edges**dimension)


def separation_grid(system: System, bins: int) -> SeparationGrid:
    """Return equal bins up to half the shortest side of the system's box.

    Parameters
    ----------
    system
        The gas in its box.
    bins
        Number of bins.
    """
    gas = system.gas
    pairs = pair_labels(system)
    edges = np.linspace(0.0, 0.5 * min(system.sides), bins + 1)
    shells = shell_volumes(gas.dimension, edges)
    densities = system.detected_densities
    weights = [
        (0.5 if i == j else 1.0) * densities[i] * densities[j] * gas.volume for _, i, j in pairs
    ]
    share = max(1, JOINT_BINS // len(pairs))
    group = -(-bins // share)
    per_pair = np.arange(bins) // group
    groups = int(per_pair[-1]) + 1
    return SeparationGrid(
        pairs=pairs,
        edges=edges,
        sides=np.array(system.sides),
        ideal=np.outer(weights, shells),
        density_second=np.array([densities[j] for _, _, j in pairs]),
        joint=per_pair + groups * np.arange(len(pairs))[:, None],
        scale=gas.fermi_wavenumbers[gas.majority],
    )
