"""The picture of a pair correlation: for each pair, g and the exchange hole; below it, the audit.

Points are averages over a bin and stand at its centre; the exact values are averages over the same
bins and drawn as steps, so that a point is to be held against the step it stands on.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.container import ErrorbarContainer
from matplotlib.figure import SubFigure
from matplotlib.patches import Patch
from matplotlib.ticker import FuncFormatter, MaxNLocator
from numpy.typing import NDArray

from pairmc.figures import style
from pairmc.results.audit import INTERVAL_LEVEL
from pairmc.statistics import t_quantile

# Pairs beside one another.
MOST_COLUMNS = 3

# Room above the highest point and below the lowest, as a part of what is shown.
_MARGIN = 0.08

# The lower panel shows at least so many standard errors.
_LEAST_DIFFERENCE = 3.6

# Below these global p-values the words change.
_DOUBTFUL, _EXCLUDED = 1e-2, 1e-4


def size(dataset: xr.Dataset) -> tuple[float, float]:
    """Return width and height of the panel in millimetres."""
    rows, columns = _shape(dataset)
    width = style.COLUMN if columns == 1 else style.PAGE
    return width, 24.0 + (60.0 if columns == 1 else 52.0) * rows


def draw(dataset: xr.Dataset, panel: SubFigure, heading: str) -> None:
    """Fill a panel: for each pair, g above and standardised differences below.

    Parameters
    ----------
    dataset
        A result that holds `pair_correlation`.
    panel
        Empty, of the size that `size` returns.
    heading
        What the result is called.
    """
    rows, columns = _shape(dataset)
    width = size(dataset)[0] - 6.0
    panel.suptitle(style.literal(style.wrap(heading, width, style.TITLE_SIZE)))
    axes = panel.subplots(
        2 * rows, columns, squeeze=False, height_ratios=[2.2, 1.0] * rows, sharex=True
    )
    scales = _scales(dataset)
    limits = _limits(dataset)
    reach = _reach(dataset)
    for index in range(rows * columns):
        row, column = divmod(index, columns)
        upper, lower = axes[2 * row, column], axes[2 * row + 1, column]
        if index >= dataset.sizes["pair"]:
            upper.remove()
            lower.remove()
            continue
        first, last = column == 0, index in (dataset.sizes["pair"] - 1, (row + 1) * columns - 1)
        _draw_values(dataset, index, upper, limits)
        _draw_differences(dataset, index, lower, reach)
        _label_separation(upper, lower, scales)
        _label_values(dataset, index, upper, scales, first, last)
        if first:
            lower.set_ylabel("difference\n(standard errors)")
        else:
            lower.tick_params(labelleft=False)
    panel.align_ylabels(axes[:, 0])
    handles = _legend_handles(dataset, axes[0, 0])
    panel.legend(
        handles=list(handles.values()),
        labels=list(handles),
        loc="outside lower center",
        ncols=2 if columns == 1 else 3,
        title=style.wrap(in_words(dataset), width, style.FONT_SIZE),
        alignment="center",
        columnspacing=1.2,
        handlelength=2.2,
    )


def in_words(dataset: xr.Dataset) -> str:
    """Return the outcome of the global test as a sentence."""
    p = float(dataset["pair_correlation_p_value"])
    merged = dataset.sizes["pair_correlation_merged_bin"]
    if not np.isfinite(p):
        return "Too few snapshots for a test of all bins together against the exact values."
    if p >= _DOUBTFUL:
        verdict = "the sample agrees with the exact values"
    elif p >= _EXCLUDED:
        verdict = "such differences from the exact values are rarely chance"
    else:
        verdict = "the sample differs from the exact values"
    bins = "1 merged bin" if merged == 1 else f"All {merged} merged bins together"
    return f"{bins}: p = {p:.2g}, {verdict}."


@dataclass(frozen=True)
class _Scales:
    """What the axes are measured in.

    Parameters
    ----------
    unit
        Length unit as in the file, empty where there is none.
    dimension
        1, 2 or 3.
    length_exponent, density_exponent
        Powers of ten taken out of the numbers at the ticks.
    wavenumber
        k_F of the majority, per length unit.
    majority
        Name of the majority component, empty where there is no other.
    """

    unit: str
    dimension: int
    length_exponent: int
    density_exponent: int
    wavenumber: float
    majority: str


def _scales(dataset: xr.Dataset) -> _Scales:
    separation = dataset["separation"]
    majority = int(np.argmax(dataset["population"].values))
    return _Scales(
        unit=separation.attrs.get("length_unit", ""),
        dimension=dataset.sizes["axis"],
        length_exponent=style.exponent_for(float(separation.max())),
        density_exponent=style.exponent_for(float(dataset["density"].max())),
        wavenumber=float(dataset["fermi_wavenumber"][majority]),
        majority=str(dataset["spin"].values[majority]) if dataset.sizes["spin"] > 1 else "",
    )


def _shape(dataset: xr.Dataset) -> tuple[int, int]:
    """Return rows and columns of pairs."""
    pairs = dataset.sizes["pair"]
    columns = min(pairs, MOST_COLUMNS)
    return -(-pairs // columns), columns


def _limits(dataset: xr.Dataset) -> tuple[float, float]:
    """Return the range of g: all points, all curves, and the lower ends of all intervals.

    The upper ends are left out: where next to nothing was expected and nothing was counted, they
    are beyond any scale, and their bars leave the panel.
    """
    shown = [dataset[f"pair_correlation{part}"].values for part in ("", "_expected", "_bulk")]
    low = min(0.0, float(dataset["pair_correlation_interval"].min()))
    high = float(np.max(shown))
    room = _MARGIN * (high - low)
    return low - room, high + 1.5 * room


def _reach(dataset: xr.Dataset) -> float:
    """Return how many standard errors the lower panels show to either side."""
    differences = np.abs(dataset["pair_correlation_difference"].values)
    finite = differences[np.isfinite(differences)]
    return max(_LEAST_DIFFERENCE, 1.15 * float(finite.max(initial=0.0)))


def _is_like(label: str) -> bool:
    """Return whether a pair is of one component with itself."""
    first, second = label.split("-")
    return first == second


def _marker(label: str) -> dict[str, Any]:
    """Return the marker of a pair: full circles for like components, open squares for unlike."""
    if _is_like(label):
        return {"marker": "o", "color": style.LIKE, "markersize": 2.2}
    return {"marker": "s", "color": style.UNLIKE, "markersize": 2.2, "markerfacecolor": "white"}


def _edges(dataset: xr.Dataset) -> NDArray[np.float64]:
    """Return the edges of the bins (separation + 1,)."""
    bounds = dataset["separation_bounds"].values
    return np.append(bounds[:, 0], bounds[-1, 1])


def _draw_values(
    dataset: xr.Dataset, index: int, axes: Axes, limits: tuple[float, float]
) -> ErrorbarContainer:
    """Draw the sampled g of one pair over the exact and the infinite one."""
    part = dataset.isel(pair=index)
    separation, sampled = part["separation"].values, part["pair_correlation"].values
    interval = part["pair_correlation_interval"].values
    axes.plot(
        separation,
        part["pair_correlation_bulk"].values,
        color=style.LIGHT,
        linestyle=(0, (2.2, 0.7)),
        linewidth=2.6,
        label="infinite",
        zorder=1,
    )
    axes.stairs(
        part["pair_correlation_expected"].values,
        _edges(dataset),
        baseline=None,
        color=style.DARK,
        linewidth=0.7,
        label="exact",
        zorder=2,
    )
    axes.set_xlim(0.0, float(_edges(dataset)[-1]))
    axes.set_ylim(*limits)
    return axes.errorbar(
        separation,
        sampled,
        yerr=np.abs(interval.T - sampled),
        linestyle="none",
        elinewidth=0.6,
        markeredgewidth=0.5,
        label="sampled",
        zorder=3,
        **_marker(str(part["pair"].values)),
    )


def _draw_differences(dataset: xr.Dataset, index: int, axes: Axes, reach: float) -> None:
    """Draw the standardised differences of the merged bins of one pair, each over its width."""
    band = t_quantile(INTERVAL_LEVEL, dataset.sizes["batch"])
    axes.axhspan(-band, band, color=style.BAND, linewidth=0.0, zorder=0)
    axes.axhline(0.0, color=style.DARK, linewidth=0.5, zorder=1)
    axes.set_ylim(-reach, reach)
    axes.yaxis.set_major_locator(MaxNLocator(4, integer=True, symmetric=True))
    start, stop, difference = merged_differences(dataset, index)
    if len(difference) == 0:
        axes.text(
            0.5, 0.5, "too few pairs", transform=axes.transAxes, ha="center", va="center", zorder=2
        )
        return
    marker = _marker(str(dataset["pair"].values[index]))
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


def merged_differences(
    dataset: xr.Dataset, index: int
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Return lower edge, upper edge and standardised difference of each merged bin of a pair."""
    part, edges = dataset.isel(pair=index), _edges(dataset)
    merge = part["pair_correlation_merge"].values
    numbers, first, sizes = np.unique(merge, return_index=True, return_counts=True)
    tested = numbers >= 0
    first, after = first[tested], (first + sizes)[tested]
    return edges[first], edges[after], part["pair_correlation_difference"].values[first]


def _label_separation(upper: Axes, lower: Axes, scales: _Scales) -> None:
    """Name both scales of the separation: with its unit below, times k_F above."""
    unit = style.unit_in_words(scales.unit, 1, scales.length_exponent)
    lower.set_xlabel(f"separation $r$ ({unit})")
    lower.xaxis.set_major_locator(MaxNLocator(5))
    lower.xaxis.set_major_formatter(_in_powers(scales.length_exponent))
    upper.tick_params(labelbottom=False)
    lower.tick_params(labelbottom=True)
    top = upper.secondary_xaxis(
        "top", functions=(lambda r: r * scales.wavenumber, lambda z: z / scales.wavenumber)
    )
    top.xaxis.set_major_locator(MaxNLocator(6))
    of = f" of {scales.majority}" if scales.majority else ""
    top.set_xlabel(rf"$k_\mathrm{{F}} r$  ($k_\mathrm{{F}}${of})" if of else r"$k_\mathrm{F} r$")


def _label_values(
    dataset: xr.Dataset, index: int, axes: Axes, scales: _Scales, first: bool, last: bool
) -> None:
    """Name both scales of the values: g at the left, the exchange hole n_s'(g − 1) at the right."""
    label = str(dataset["pair"].values[index])
    second = list(dataset["spin"].values).index(label.split("-")[1])
    density = float(dataset["density"][second])
    axes.set_title(label)
    if first:
        axes.set_ylabel("pair correlation $g$")
    else:
        axes.tick_params(labelleft=False)
    right = axes.secondary_yaxis(
        "right", functions=(lambda g: density * (g - 1.0), lambda hole: hole / density + 1.0)
    )
    right.yaxis.set_major_locator(MaxNLocator(5))
    right.yaxis.set_major_formatter(_in_powers(scales.density_exponent))
    if last:
        unit = style.unit_in_words(scales.unit, -scales.dimension, scales.density_exponent)
        right.set_ylabel(f"exchange hole ({unit})")


def _in_powers(exponent: int) -> FuncFormatter:
    """Return a format of ticks that takes out a power of ten."""
    return FuncFormatter(lambda value, _: f"{value / 10.0**exponent:g}".replace("-", "−"))


def _legend_handles(dataset: xr.Dataset, axes: Axes) -> dict[str, Any]:
    """Return what is explained in the legend."""
    drawn, labels = axes.get_legend_handles_labels()
    by_label = dict(zip(labels, drawn, strict=True))
    interval = dataset["pair_correlation_interval"].attrs["long_name"].rsplit(", ", 1)[-1]
    return {
        f"sampled, {interval}": by_label["sampled"],
        "exact, this finite system": by_label["exact"],
        "infinite system": by_label["infinite"],
        f"{100 * INTERVAL_LEVEL:g} % of differences": Patch(color=style.BAND, linewidth=0.0),
    }
