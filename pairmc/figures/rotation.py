"""The picture of one gas at several angles of spin rotation: g of each kind of pair, all angles.

Angles run from light to dark and have markers of their own. Where bins are many, the points of the
angles take turns, so that angles of equal g do not cover one another; the differences below, one
strip for each angle, are those of all merged bins.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.colors import to_hex, to_rgb
from matplotlib.figure import SubFigure
from matplotlib.lines import Line2D
from matplotlib.markers import CARETUP, MarkerStyle
from numpy.typing import NDArray

from pairmc.figures import style
from pairmc.figures.differences import (
    INFINITE,
    band_patch,
    draw_differences,
    edges_of,
    reach_of,
    three_ticks,
)
from pairmc.figures.pair_correlation import limits_of
from pairmc.figures.pair_scales import label_separation, label_values, scales_of
from pairmc.figures.views import angle_of
from pairmc.results.summary import DOUBTFUL, probability, verdict

# One for each angle, in order; ends of the ramp of colours.
MARKERS = ("o", "s", "^", "D", "v", "p", "X")
_LIGHTEST, _DARKEST = "#74acd9", "#06213f"

# Millimetres: heading and legend, and what they take more in a column; the values; one strip of
# differences.
_FRAME_HEIGHT, _COLUMN_HEIGHT = 40.0, 20.0
_VALUES_HEIGHT, _STRIP_HEIGHT = 60.0, 12.0

# Points.
_VALUE_MARKER, _DIFFERENCE_MARKER = 3.2, 2.0

# Points above the panel, at its edge.
_ABOVE = MarkerStyle(CARETUP)

# Angles take turns only as far as each keeps about so many points.
_LEAST_POINTS = 15

# Expected values closer than this are those of equivalent pairs, but for rounding.
_EQUAL = 1e-9


def size(datasets: Sequence[xr.Dataset]) -> tuple[float, float]:
    """Return width and height of the panel in millimetres."""
    height = _FRAME_HEIGHT + _VALUES_HEIGHT + _STRIP_HEIGHT * len(datasets)
    if len(kinds(datasets)) == 1:
        return style.COLUMN, height + _COLUMN_HEIGHT
    return style.PAGE, height


def kinds(datasets: Sequence[xr.Dataset]) -> list[int]:
    """Return the pairs to draw: not again a pair of like components that is as one before it.

    Two such pairs are equivalent where their exact values are the same at all angles.
    """
    chosen: list[int] = []
    for index, label in enumerate(datasets[0]["pair"].values):
        earlier = [one for one in chosen if _is_like(datasets[0]["pair"].values[one])]
        if not (_is_like(label) and any(_equivalent(datasets, one, index) for one in earlier)):
            chosen.append(index)
    return chosen


def draw(datasets: Sequence[xr.Dataset], panel: SubFigure) -> None:
    """Fill a panel: a column for each kind of pair, g above, a strip of differences an angle below.

    Parameters
    ----------
    datasets
        Results that differ in the rotation only, at most `views.MOST_ANGLES`.
    panel
        Empty, of the size that `size` returns.
    """
    datasets = sorted(datasets, key=angle_of)
    columns = kinds(datasets)
    width = style.width_of(panel) - 6.0
    titles = dict.fromkeys(str(dataset.attrs.get("title", "")) for dataset in datasets)
    panel.suptitle(style.literal(style.wrap("; ".join(titles), width, style.TITLE_SIZE)))
    axes = panel.subplots(
        1 + len(datasets),
        len(columns),
        squeeze=False,
        height_ratios=[_VALUES_HEIGHT] + [_STRIP_HEIGHT] * len(datasets),
        sharex=True,
    )
    drawn = [dataset.isel(pair=columns) for dataset in datasets]
    limits, reach, scales = limits_of(drawn), reach_of(drawn), scales_of(datasets[0])
    looks = _looks(len(datasets))
    beyond = False
    for column, index in enumerate(columns):
        upper, strips = axes[0, column], axes[1:, column]
        beyond |= _draw_values(datasets, index, upper, limits, looks)
        for dataset, strip, look in zip(datasets, strips, looks, strict=True):
            draw_differences(
                dataset, index, strip, reach, look | {"markersize": _DIFFERENCE_MARKER}
            )
            strip.set_yticks(three_ticks(reach))
            strip.tick_params(labelbottom=False, labelleft=column == 0)
        label_separation(upper, strips[-1], scales)
        label_values(datasets[0], index, upper, column == 0)
    for dataset, strip in zip(datasets, axes[1:, -1], strict=True):
        strip.text(1.015, 0.5, words(angle_of(dataset)), transform=strip.transAxes, va="center")
    middle, height = (1 + len(datasets)) // 2, 0.5 if len(datasets) % 2 else 0.0
    axes[middle, 0].set_ylabel("difference /\nstandard error", y=height)
    panel.align_ylabels(axes[:, 0])
    _legend_of_angles(datasets, axes[0, 0], looks)
    _legend_of_kinds(datasets, panel, width, beyond)


def words(angle: float) -> str:
    """Return an angle in print: ``60°``."""
    return f"{angle:g}°"


def in_words(datasets: Sequence[xr.Dataset]) -> str:
    """Return the outcome of the global tests, and what is not drawn, in sentences."""
    outcomes: dict[str, list[str]] = {}
    for dataset in datasets:
        p = float(dataset["pair_correlation_p_value"])
        if not np.isfinite(p):
            outcomes.setdefault("too few snapshots for a test", []).append(words(angle_of(dataset)))
        elif p < DOUBTFUL:
            outcomes.setdefault(verdict(p), []).append(words(angle_of(dataset)))
    said = "; ".join(f"{outcome} at {', '.join(at)}" for outcome, at in outcomes.items())
    sentences = [
        "p: all merged bins of all pairs at one angle together against the exact values; "
        f"{said or verdict(1.0) + ' at any angle'}."
    ]
    step = _step(datasets)
    if step > 1:
        sentences.append(
            f"Points: one bin in {step} of each angle, in turn; differences: all merged bins."
        )
    if any(angle_of(dataset) for dataset in datasets):
        sentences.append("Differences move together, as the numbers of detected labels fluctuate.")
    labels, shown = datasets[0]["pair"].values, kinds(datasets)
    for index, label in enumerate(labels):
        if index not in shown:
            same = next(one for one in shown if _equivalent(datasets, one, index))
            sentences.append(f"The exact g of {label} is that of {labels[same]}: not drawn.")
    return " ".join(sentences)


def _is_like(label: Any) -> bool:
    """Return whether a pair is of one component with itself."""
    first, second = str(label).split("-")
    return first == second


def _equivalent(datasets: Sequence[xr.Dataset], one: int, other: int) -> bool:
    """Return whether the exact values of two pairs are the same in all results."""
    return all(
        _alike(values.isel(pair=one).values, values.isel(pair=other).values)
        for dataset in datasets
        for values in (dataset["pair_correlation_expected"], dataset["pair_correlation_bulk"])
    )


def _alike(one: NDArray[np.float64], other: NDArray[np.float64]) -> bool:
    """Return whether two curves are one, where both are there."""
    both = np.isfinite(one) & np.isfinite(other)
    return np.allclose(one[both], other[both], rtol=0.0, atol=_EQUAL)


def _looks(angles: int) -> list[dict[str, Any]]:
    """Return marker and colour of each angle, from light to dark."""
    ends = np.array([to_rgb(_LIGHTEST), to_rgb(_DARKEST)])
    ramp = [(1.0 - part) * ends[0] + part * ends[1] for part in np.linspace(0.0, 1.0, angles)]
    return [
        {"marker": marker, "color": to_hex(tuple(colour.tolist()))}
        for marker, colour in zip(MARKERS, ramp, strict=False)
    ]


def _step(datasets: Sequence[xr.Dataset]) -> int:
    """Return from how many bins one point is drawn at each angle."""
    return min(len(datasets), max(1, datasets[0].sizes["separation"] // _LEAST_POINTS))


def _draw_values(
    datasets: Sequence[xr.Dataset],
    index: int,
    axes: Axes,
    limits: tuple[float, float],
    looks: Sequence[dict[str, Any]],
) -> bool:
    """Draw sampled, exact and infinite g of one pair at all angles.

    Returns
    -------
    bool
        Whether points lie above the panel; they are marked at its edge.
    """
    edges, step, above = edges_of(datasets[0]), _step(datasets), False
    infinite: list[Any] = []
    for order, (dataset, look) in enumerate(zip(datasets, looks, strict=True)):
        part = dataset.isel(pair=index)
        bulk = part["pair_correlation_bulk"].values
        if not any(_alike(bulk, other) for other in infinite):
            axes.stairs(bulk, edges, baseline=None, label="infinite", linewidth=1.3, **INFINITE)
            infinite.append(bulk)
        axes.stairs(
            part["pair_correlation_expected"].values,
            edges,
            baseline=None,
            color=look["color"],
            linewidth=0.7,
            label=f"exact, {words(angle_of(dataset))}",
            zorder=4,
        )
        turn = part.isel(separation=slice(order * step // len(datasets), None, step))
        separation, sampled = turn["separation"].values, turn["pair_correlation"].values
        interval = turn["pair_correlation_interval"].values
        axes.errorbar(
            separation,
            sampled,
            yerr=np.abs(interval.T - sampled),
            linestyle="none",
            elinewidth=0.6,
            markeredgewidth=0.5,
            markersize=_VALUE_MARKER,
            label=f"sampled, {words(angle_of(dataset))}",
            zorder=3,
            **look,
        )
        high = separation[sampled > limits[1]]
        if len(high) > 0:
            above = True
            axes.plot(
                high,
                np.full(len(high), 1.0),
                transform=axes.get_xaxis_transform(),
                marker=_ABOVE,
                color=look["color"],
                linestyle="none",
                markersize=4.5,
                clip_on=False,
                label="above",
                zorder=5,
            )
    axes.set_xlim(0.0, float(edges[-1]))
    axes.set_ylim(*limits)
    return above


def _legend_of_angles(
    datasets: Sequence[xr.Dataset], axes: Axes, looks: Sequence[dict[str, Any]]
) -> None:
    """Name the angles, and how well each agrees, in the corner that no g reaches."""
    handles, names = [], []
    for dataset, look in zip(datasets, looks, strict=True):
        shown = probability(float(dataset["pair_correlation_p_value"]))
        relation = "" if shown[0] in "<>" else "= "
        handles.append(Line2D([], [], linewidth=0.7, markersize=_VALUE_MARKER, **look))
        names.append(f"{words(angle_of(dataset))}   ($p$ {relation}{shown})")
    axes.legend(handles, names, loc="lower right", title="spins rotated by", handlelength=2.2)


def _legend_of_kinds(
    datasets: Sequence[xr.Dataset], panel: SubFigure, width: float, beyond: bool
) -> None:
    """Name what is drawn at every angle."""
    interval = datasets[0]["pair_correlation_interval"].attrs["long_name"].rsplit(", ", 1)[-1]
    plain: dict[str, Any] = {"color": style.DARK, "linewidth": 0.7}
    entries: dict[str, Any] = {
        f"sampled, {interval}": Line2D([], [], **plain, linestyle="none", marker="|", markersize=6),
        "exact, this finite system": Line2D([], [], **plain),
        "infinite system": Line2D([], [], linewidth=1.3, **INFINITE),
    } | dict([band_patch()])
    if beyond:
        entries["above the panel"] = Line2D(
            [], [], color=style.DARK, linestyle="none", marker=_ABOVE, markersize=4.5
        )
    legend = panel.legend(
        list(entries.values()),
        list(entries),
        loc="outside lower center",
        ncols=2 if width < style.COLUMN else len(entries),
        title=style.wrap(in_words(datasets), width, style.FONT_SIZE, lines=8),
        columnspacing=1.2,
        handlelength=2.2,
    )
    legend.get_title().set_multialignment("center")
