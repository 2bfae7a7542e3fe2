"""The picture of a pair correlation: for each pair, g and the exchange hole; below it, the audit.

Points are averages over a bin and stand at its centre; the exact values are averages over the same
bins and drawn as steps, so that a point is to be held against the step it stands on.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.container import ErrorbarContainer
from matplotlib.figure import SubFigure
from matplotlib.legend_handler import HandlerTuple
from numpy.typing import NDArray

from pairmc.errors import InputError, Problem
from pairmc.figures import style
from pairmc.figures.differences import INFINITE, band_patch, draw_differences, edges_of, reach_of
from pairmc.figures.pair_scales import label_hole, label_separation, label_values, scales_of
from pairmc.results.summary import probability, verdict

# Pairs in one picture.
MOST_PAIRS = 21

# Millimetres: heading and legend; one row of pairs.
_FRAME_HEIGHT, _ROW_HEIGHT = 22.0, 78.0

# Height of the values' panel where that of the differences is 1.
_RATIO = 2.0

# Points; smaller where there are more bins than this.
_MARKER_SIZE = 2.2
_CROWDED = 100

# Room above the highest point and below the lowest, as a part of what is shown.
_MARGIN = 0.08

# Points above so many times the highest curve do not set the scale.
_HIGHEST = 2.0


def size(dataset: xr.Dataset) -> tuple[float, float]:
    """Return width and height of the panel in millimetres."""
    rows, columns = _shape(dataset)
    width = style.COLUMN if columns == 1 else style.PAGE
    return width, _FRAME_HEIGHT + _ROW_HEIGHT * rows


def draw(dataset: xr.Dataset, panel: SubFigure, heading: str, hole: bool = True) -> None:
    """Fill a panel: for each pair, g above and standardised differences below.

    Parameters
    ----------
    dataset
        A result that holds `pair_correlation`.
    panel
        Empty, of the size that `size` returns.
    heading
        What the result is called.
    hole
        With a scale of the exchange hole at the right.
    """
    rows, columns = _shape(dataset)
    width = style.width_of(panel) - 6.0
    panel.suptitle(style.literal(style.wrap(heading, width, style.TITLE_SIZE)))
    axes = panel.subplots(
        2 * rows, columns, squeeze=False, height_ratios=[_RATIO, 1.0] * rows, sharex=True
    )
    scales = scales_of(dataset)
    limits = limits_of([dataset])
    reach = reach_of([dataset])
    for index in range(rows * columns):
        row, column = divmod(index, columns)
        upper, lower = axes[2 * row, column], axes[2 * row + 1, column]
        if index >= dataset.sizes["pair"]:
            upper.remove()
            lower.remove()
            continue
        first, last = column == 0, index in (dataset.sizes["pair"] - 1, (row + 1) * columns - 1)
        _draw_values(dataset, index, upper, limits)
        marker = _marker(dataset, index) | {"markersize": _MARKER_SIZE}
        draw_differences(dataset, index, lower, reach, marker)
        label_separation(upper, lower, scales)
        label_values(dataset, index, upper, first)
        if hole:
            label_hole(dataset, index, upper, scales, last)
        if first:
            lower.set_ylabel("difference /\nstandard error")
        else:
            lower.tick_params(labelleft=False)
    panel.align_ylabels(axes[:, 0])
    handles, names = _legend_entries(dataset, axes)
    legend = panel.legend(
        handles,
        names,
        loc="outside lower center",
        ncols=2 if width < style.COLUMN else 4 if len(names) <= 4 else 3,
        title=style.wrap(in_words(dataset), width, style.FONT_SIZE),
        columnspacing=1.2,
        handlelength=2.2,
        handler_map={tuple: HandlerTuple(ndivide=None)},
    )
    legend.get_title().set_multialignment("center")


def in_words(dataset: xr.Dataset) -> str:
    """Return the outcome of the global test as a sentence."""
    p = float(dataset["pair_correlation_p_value"])
    merged = dataset.sizes["pair_correlation_merged_bin"]
    if not np.isfinite(p):
        return "Too few snapshots for a test of all bins together against the exact values."
    shown = probability(p)
    relation = "" if shown[0] in "<>" else "= "
    bins = "1 merged bin" if merged == 1 else f"All {merged} merged bins together"
    return f"{bins} against the exact values: p {relation}{shown}, {verdict(p)}."


def _shape(dataset: xr.Dataset) -> tuple[int, int]:
    """Return rows and columns of pairs.

    Raises
    ------
    InputError
        Where there are too many for one picture.
    """
    pairs = dataset.sizes["pair"]
    if not 1 <= pairs <= MOST_PAIRS:
        raise InputError(
            Problem(
                "pairs of components to draw",
                str(pairs),
                f"1 to {MOST_PAIRS} in one picture",
                'choose some in Python: pairmc.plot(result.sel(pair=["…", "…"]))',
            )
        )
    columns = min(pairs, 3 if pairs <= 6 else 4)
    return -(-pairs // columns), columns


def limits_of(datasets: Sequence[xr.Dataset]) -> tuple[float, float]:
    """Return the range of g: all curves, the lower ends of all intervals, and the points.

    Where next to nothing was expected, one chance pair is a point far above all others and the
    interval of no pair ends beyond any scale: such bars leave the panel, and points above
    `_HIGHEST` times the highest curve are marked at its edge.
    """
    curves = max(
        float(dataset[f"pair_correlation_{part}"].max())
        for dataset in datasets
        for part in ("expected", "bulk")
    )
    points = np.concatenate([dataset["pair_correlation"].values.ravel() for dataset in datasets])
    low = min(0.0, *(float(dataset["pair_correlation_interval"].min()) for dataset in datasets))
    high = max(curves, float(points[points <= _HIGHEST * curves].max(initial=0.0)))
    room = _MARGIN * (high - low)
    return low - room, high + 1.5 * room


def _is_like(label: str) -> bool:
    """Return whether a pair is of one component with itself."""
    first, second = label.split("-")
    return first == second


def _marker(dataset: xr.Dataset, index: int) -> dict[str, Any]:
    """Return the marker of a pair: full circles for like components, open squares for unlike."""
    size = _MARKER_SIZE * min(1.0, (_CROWDED / dataset.sizes["separation"]) ** 0.5)
    if _is_like(str(dataset["pair"].values[index])):
        return {"marker": "o", "color": style.LIKE, "markersize": size}
    return {
        "marker": "s",
        "color": style.UNLIKE,
        "markersize": size,
        "markerfacecolor": "white",
    }


def _draw_values(
    dataset: xr.Dataset, index: int, axes: Axes, limits: tuple[float, float]
) -> ErrorbarContainer:
    """Draw the sampled g of one pair over the exact and the infinite one."""
    part = dataset.isel(pair=index)
    separation, sampled = part["separation"].values, part["pair_correlation"].values
    interval = part["pair_correlation_interval"].values
    above = separation[sampled > limits[1]]
    if len(above) > 0:
        axes.plot(
            above,
            np.full(len(above), 1.0),
            transform=axes.get_xaxis_transform(),
            **_marker(dataset, index) | {"marker": "^", "markersize": 4.5, "linestyle": "none"},
            clip_on=False,
            label="above",
            zorder=5,
        )
    axes.stairs(
        part["pair_correlation_bulk"].values,
        edges_of(dataset),
        baseline=None,
        label="infinite",
        linewidth=2.6,
        zorder=1,
        **INFINITE,
    )
    axes.stairs(
        part["pair_correlation_expected"].values,
        edges_of(dataset),
        baseline=None,
        color=style.DARK,
        linewidth=0.6,
        label="exact",
        zorder=4,
    )
    axes.set_xlim(0.0, float(edges_of(dataset)[-1]))
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
        **_marker(dataset, index),
    )


def _legend_entries(dataset: xr.Dataset, axes: NDArray[Any]) -> tuple[list[Any], list[str]]:
    """Return what is drawn, one of each kind, and what it is called."""
    drawn: dict[str, dict[str, Any]] = {}
    for index, label in enumerate(dataset["pair"].values):
        row, column = divmod(index, axes.shape[1])
        handles, names = axes[2 * row, column].get_legend_handles_labels()
        kind = "like" if _is_like(str(label)) else "unlike"
        drawn.setdefault(kind, {}).update(zip(names, handles, strict=True))
    one = next(iter(drawn.values()))
    above = [kind["above"] for kind in drawn.values() if "above" in kind]
    interval = dataset["pair_correlation_interval"].attrs["long_name"].rsplit(", ", 1)[-1]
    entries = {
        f"sampled, {interval}": tuple(kind["sampled"] for kind in drawn.values()),
        "exact, this finite system": one["exact"],
        "infinite system": one["infinite"],
    } | dict([band_patch()])
    if above:
        entries["above the panel"] = tuple(above)
    return list(entries.values()), list(entries)
