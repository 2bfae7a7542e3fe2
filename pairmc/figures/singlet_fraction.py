"""The picture of the singlet fraction: how many of the pairs at a separation are spin singlets.

The exact value is there for any two components; points are there where rotations leave the state
alone, so that detected labels tell the fraction, and the reason is there where they do not.
"""

from __future__ import annotations

import numpy as np
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.figure import SubFigure

from pairmc.errors import InputError, Problem
from pairmc.figures import style
from pairmc.figures.differences import INFINITE, edges_of
from pairmc.figures.pair_scales import label_separation, scales_of
from pairmc.results.audit import INTERVAL_LEVEL
from pairmc.statistics import t_quantile

NAME = "singlet_fraction"

# Millimetres, and points.
_HEIGHT = 92.0
_MARKER_SIZE = 2.2

# Room beyond 0 and 1, so that points there are seen whole.
_MARGIN = 0.06

# Where the far value is lower there is no room below it for its name.
_LOW = 0.12


def size(dataset: xr.Dataset) -> tuple[float, float]:
    """Return width and height of the panel in millimetres."""
    return style.COLUMN, _HEIGHT


def refuse_without(dataset: xr.Dataset, heading: str) -> None:
    """Refuse a result that holds no singlet fraction.

    Raises
    ------
    InputError
        Where the gas has not two components, or the file is older than the fraction.
    """
    if f"{NAME}_expected" in dataset:
        return
    components = dataset.sizes.get("spin", 0)
    if components == 2:
        got = "a result that was written before the singlet fraction was"
        advice = "sample the run again into a new file"
    else:
        got = f"a result of {components} component{'s' * (components != 1)}"
        advice = "singlets are pairs of two components; show another view of it"
    allowed = "a result of two components that holds the singlet fraction"
    raise InputError(Problem(heading or "a result", got, allowed, advice))


def far_value(dataset: xr.Dataset) -> float:
    """Return the fraction at infinite separation, (1 − ζ²)/4: spins there know nothing of others.

    ζ is the polarisation; N_1 N_2/(N_1 + N_2)² is the same.
    """
    return 0.25 * (1.0 - float(dataset["polarisation"]) ** 2)


def refusal(dataset: xr.Dataset) -> str:
    """Return why there is no estimate from the sample; empty where there is one."""
    said = str(dataset[f"{NAME}_expected"].attrs.get("sampled_estimate", ""))
    if NAME in dataset:
        return ""
    return said.removeprefix("refused:").strip() or "the result holds none"


def draw(dataset: xr.Dataset, panel: SubFigure, heading: str) -> None:
    """Fill a panel: exact and infinite fraction, and the sampled one where there is one.

    Parameters
    ----------
    dataset
        A result that holds the expected singlet fraction.
    panel
        Empty, of the size that `size` returns.
    heading
        What the result is called.
    """
    width = style.width_of(panel) - 6.0
    panel.suptitle(style.literal(style.wrap(heading, width, style.TITLE_SIZE)))
    axes = panel.subplots()
    edges = edges_of(dataset)
    infinite, exact = dataset[f"{NAME}_bulk"].values, dataset[f"{NAME}_expected"].values
    _draw_far_value(axes, far_value(dataset))
    axes.stairs(infinite, edges, baseline=None, label="infinite system", linewidth=2.6, **INFINITE)
    axes.stairs(
        exact,
        edges,
        baseline=None,
        color=style.DARK,
        linewidth=0.6,
        label="exact, this finite system",
        zorder=4,
    )
    lowest = _draw_points(dataset, axes) if NAME in dataset else 0.0
    axes.set_xlim(0.0, float(edges[-1]))
    axes.set_ylim(lowest - _MARGIN, 1.0 + _MARGIN)
    axes.set_ylabel("pairs in the spin singlet, fraction")
    label_separation(axes, axes, scales_of(dataset))
    style.number_ticks(axes.yaxis, 5)
    reason = refusal(dataset)
    title = f"No estimate from the sample: {reason}." if reason else None
    handles, names = axes.get_legend_handles_labels()
    legend = panel.legend(
        handles[::-1],
        names[::-1],
        loc="outside lower center",
        ncols=2,
        title=None if title is None else style.wrap(title, width, style.FONT_SIZE),
        columnspacing=1.2,
        handlelength=2.2,
    )
    legend.get_title().set_multialignment("center")


def _draw_far_value(axes: Axes, far: float) -> None:
    """Draw and name the fraction at infinite separation."""
    formula = "1/4" if far == 0.25 else rf"$(1 - \zeta^2)/4$ = {far:.3g}"
    below = far > _LOW
    axes.axhline(far, color=style.LIGHT, linewidth=0.6, zorder=0)
    axes.annotate(
        f"infinite system, far apart: {formula}",
        (0.98, far),
        xycoords=("axes fraction", "data"),
        xytext=(0.0, -6.0 if below else 6.0),
        textcoords="offset points",
        ha="right",
        va="top" if below else "bottom",
    )


def _draw_points(dataset: xr.Dataset, axes: Axes) -> float:
    """Draw the sampled fraction with its intervals; return where the lowest ends, at most 0."""
    value = dataset[NAME].values
    bar = t_quantile(INTERVAL_LEVEL, dataset.sizes["batch"]) * dataset[f"{NAME}_error"].values
    known = np.isfinite(value)
    axes.errorbar(
        dataset["separation"].values[known],
        value[known],
        yerr=bar[known],
        linestyle="none",
        elinewidth=0.6,
        markeredgewidth=0.5,
        marker="o",
        markersize=_MARKER_SIZE,
        color=style.LIKE,
        label=f"sampled, {100 * INTERVAL_LEVEL:g} % interval",
        zorder=3,
    )
    return min(0.0, float((value - bar)[known].min(initial=0.0)))
