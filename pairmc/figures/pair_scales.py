"""The four scales of a panel: separation below and times k_F above, g left and the hole right."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import xarray as xr
from matplotlib.axes import Axes
from numpy.typing import ArrayLike

from pairmc.figures import style

# Characters of a pair's name on one line.
_LONGEST_LABEL = 22


@dataclass(frozen=True)
class Scales:
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


def scales_of(dataset: xr.Dataset) -> Scales:
    """Return what the axes of a result are measured in."""
    separation = dataset["separation"]
    majority = int(np.argmax(dataset["population"].values))
    return Scales(
        unit=separation.attrs.get("length_unit", ""),
        dimension=dataset.sizes["axis"],
        length_exponent=style.exponent_for(float(separation.max())),
        density_exponent=style.exponent_for(max(_densities(dataset))),
        wavenumber=float(dataset["fermi_wavenumber"][majority]),
        majority=str(dataset["spin"].values[majority]) if dataset.sizes["spin"] > 1 else "",
    )


def _title(label: str) -> str:
    """Return the name of a pair, long ones on two lines."""
    return label if len(label) <= _LONGEST_LABEL else label.replace("-", "-\n")


def label_separation(upper: Axes, lower: Axes, scales: Scales) -> None:
    """Name both scales of the separation: with its unit below, times k_F above."""
    unit = style.unit_in_words(scales.unit, 1, scales.length_exponent)
    lower.set_xlabel(f"separation $r$ ({unit})")
    style.number_ticks(lower.xaxis, 5, scales.length_exponent)
    upper.tick_params(labelbottom=False)
    lower.tick_params(labelbottom=True)
    top = upper.secondary_xaxis("top", functions=_linear(scales.wavenumber, 0.0))
    style.number_ticks(top.xaxis, 6)
    of = f" of {scales.majority}" if scales.majority else ""
    top.set_xlabel(rf"$k_\mathrm{{F}} r$  ($k_\mathrm{{F}}${of})" if of else r"$k_\mathrm{F} r$")


def label_values(dataset: xr.Dataset, index: int, axes: Axes, first: bool) -> None:
    """Name a pair and the scale of its g, at the left."""
    axes.set_title(_title(str(dataset["pair"].values[index])))
    style.number_ticks(axes.yaxis, 6)
    if first:
        axes.set_ylabel("pair correlation $g$")
    else:
        axes.tick_params(labelleft=False)


def label_hole(dataset: xr.Dataset, index: int, axes: Axes, scales: Scales, last: bool) -> None:
    """Name the scale of the exchange hole n_s'(g − 1) at the right."""
    second = list(dataset["spin"].values).index(str(dataset["pair"].values[index]).split("-")[1])
    right = axes.secondary_yaxis("right", functions=_linear(_densities(dataset)[second], 1.0))
    style.number_ticks(right.yaxis, 6, scales.density_exponent)
    if last:
        unit = style.unit_in_words(scales.unit, -scales.dimension, scales.density_exponent)
        right.set_ylabel(f"exchange hole ({unit})")


def _densities(dataset: xr.Dataset) -> list[float]:
    """Return the density of each component, as it is detected."""
    if "detected_population" in dataset:
        volume = float(np.prod(dataset["side"].values))
        return [float(number) / volume for number in dataset["detected_population"]]
    return [float(density) for density in dataset["density"]]


def _linear(
    slope: float, zero: float
) -> tuple[Callable[[ArrayLike], ArrayLike], Callable[[ArrayLike], ArrayLike]]:
    """Return the function slope·(x − zero) and its inverse."""

    def forward(x: ArrayLike) -> ArrayLike:
        return slope * (np.asarray(x) - zero)

    def back(y: ArrayLike) -> ArrayLike:
        return np.asarray(y) / slope + zero

    return forward, back
