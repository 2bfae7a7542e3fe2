"""Panels of differences: sampled less exact in standard errors, each merged bin over its width."""

from __future__ import annotations

from collections.abc import Sequence
from math import floor, log10
from typing import Any

import numpy as np
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.patches import Patch
from matplotlib.ticker import StrMethodFormatter
from numpy.typing import NDArray

from pairmc.figures import style
from pairmc.results.audit import INTERVAL_LEVEL
from pairmc.statistics import t_quantile

# The curve of the infinite system.
INFINITE: dict[str, Any] = {"color": style.LIGHT, "linestyle": (0, (2.2, 0.7))}

# At least so many standard errors are shown.
_LEAST_DIFFERENCE = 3.6


def edges_of(dataset: xr.Dataset) -> NDArray[np.float64]:
    """Return the edges of the bins (separation + 1,)."""
    bounds = dataset["separation_bounds"].values
    return np.append(bounds[:, 0], bounds[-1, 1])


def reach_of(datasets: Sequence[xr.Dataset]) -> float:
    """Return how many standard errors are to be shown to either side."""
    largest = 0.0
    for dataset in datasets:
        differences = np.abs(dataset["pair_correlation_difference"].values)
        largest = max(largest, float(differences[np.isfinite(differences)].max(initial=0.0)))
    return max(_LEAST_DIFFERENCE, 1.15 * largest)


def draw_differences(
    dataset: xr.Dataset, index: int, axes: Axes, reach: float, marker: dict[str, Any]
) -> None:
    """Draw the standardised differences of the merged bins of one pair, each over its width.

    Parameters
    ----------
    dataset
        A result that holds `pair_correlation`.
    index
        Which pair.
    axes
        Empty; its separations are set by others.
    reach
        Standard errors shown to either side.
    marker
        Marker, its size and its colours.
    """
    band = t_quantile(INTERVAL_LEVEL, dataset.sizes["batch"])
    axes.axhspan(-band, band, color=style.BAND, linewidth=0.0, zorder=0)
    axes.axhline(0.0, color=style.DARK, linewidth=0.5, zorder=1)
    axes.set_ylim(-reach, reach)
    axes.set_yticks(whole_ticks(reach))
    axes.yaxis.set_major_formatter(StrMethodFormatter("{x:.0f}"))
    start, stop, difference, infinite = merged_differences(dataset, index)
    if len(difference) == 0:
        axes.text(0.5, 0.72, "too few pairs", transform=axes.transAxes, ha="center", va="center")
        return
    axes.stairs(
        infinite, np.append(start, stop[-1]), baseline=None, linewidth=1.3, zorder=2, **INFINITE
    )
    finite = np.isfinite(difference)
    axes.errorbar(
        (0.5 * (start + stop))[finite],
        difference[finite],
        xerr=(0.5 * (stop - start))[finite],
        linestyle="none",
        elinewidth=0.6,
        markeredgewidth=0.5,
        zorder=3,
        **marker,
    )
    beyond = np.isinf(difference)
    axes.plot(
        (0.5 * (start + stop))[beyond],
        np.sign(difference[beyond]) * 0.93 * reach,
        linestyle="none",
        **(marker | {"marker": "x"}),
    )


def band_patch() -> tuple[str, Patch]:
    """Return what the band of differences is called in a legend, and how it looks there."""
    words = f"{100 * INTERVAL_LEVEL:g} % band of differences"
    return words, Patch(color=style.BAND, linewidth=0.0)


def whole_ticks(reach: float) -> NDArray[np.float64]:
    """Return a few whole numbers either side of zero, none so near the edge that labels touch."""
    power = 10.0 ** max(0, floor(log10(reach / 2.5)))
    step = next(step for step in (1, 2, 5, 10) if reach / (step * power) <= 2.5) * power
    most = int(0.85 * reach / step)
    return np.arange(-most, most + 1, dtype=np.float64) * step


def three_ticks(reach: float) -> NDArray[np.float64]:
    """Return zero and a whole number either side of it, far apart, for panels that are low."""
    highest = 0.85 * reach
    power = 10.0 ** floor(log10(highest))
    last = next(step for step in (9, 8, 7, 6, 5, 4, 3, 2, 1.5, 1) if step * power <= highest)
    return floor(last * power) * np.array([-1.0, 0.0, 1.0])


def merged_differences(
    dataset: xr.Dataset, index: int
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Return what is known of the merged bins of one pair.

    Returns
    -------
    start, stop : array (merged,)
        Edges, in length units.
    difference : array (merged,)
        Sampled less exact, in standard errors.
    infinite : array (merged,)
        Infinite system less exact, in the same standard errors; each g of a bin counts with the
        volume of its shell.
    """
    part, edges = dataset.isel(pair=index), edges_of(dataset)
    merge = part["pair_correlation_merge"].values
    numbers, first, sizes = np.unique(merge, return_index=True, return_counts=True)
    tested = numbers >= 0
    numbers, first, after = numbers[tested], first[tested], (first + sizes)[tested]
    shell = np.diff(edges ** dataset.sizes["axis"])
    bulk = shell * part["pair_correlation_bulk"].values
    average = [bulk[a:b].sum() / shell[a:b].sum() for a, b in zip(first, after, strict=True)]
    merged = dataset.isel(pair_correlation_merged_bin=numbers)
    exact = merged["pair_correlation_merged_expected"].values
    error = merged["pair_correlation_merged_error"].values
    infinite = (np.array(average) - exact) / np.where(error > 0.0, error, np.nan)
    return edges[first], edges[after], part["pair_correlation_difference"].values[first], infinite
