"""Which panels a picture has: how large each is, and what fills it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import partial
from importlib import import_module
from typing import TYPE_CHECKING

from pairmc.errors import InputError, Problem
from pairmc.figures.views import differ_only_in_rotation, with_all_pairs
from pairmc.physics.observables import registry

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.figure import SubFigure


@dataclass(frozen=True)
class Panel:
    """A panel across the whole picture.

    Parameters
    ----------
    width, height
        Millimetres.
    fill
        Draws into it.
    """

    width: float
    height: float
    fill: Callable[[SubFigure], None]


def panels_of(datasets: Sequence[xr.Dataset], headings: Sequence[str], view: str) -> list[Panel]:
    """Return the panels of a picture, from above to below.

    Parameters
    ----------
    datasets
        Results.
    headings
        What each is called.
    view
        One of `views.VIEWS`.

    Raises
    ------
    InputError
        Where a result does not hold what is to be shown.
    """
    named = list(zip(datasets, headings, strict=True))
    if view == "singlet-fraction":
        return [_of_singlets(dataset, heading) for dataset, heading in named]
    shown = ("pair_correlation",) if view == "pair-correlation" else registry.NAMES
    held = [_held(dataset, heading, shown) for dataset, heading in named]
    if view == "pair-correlation" and differ_only_in_rotation(datasets):
        return [_of_angles(datasets)]
    options = {"hole": False} if view == "pair-correlation" else {}
    return [
        _of_observable(name, dataset, heading, **options)
        for (dataset, heading), names in zip(named, held, strict=True)
        for name in names
    ]


def _of_observable(name: str, dataset: xr.Dataset, heading: str, **options: bool) -> Panel:
    """Return the panel that figures/NAME.py draws."""
    module = import_module(f"pairmc.figures.{name}")
    draw = partial(module.draw, **options)
    width, height = module.size(dataset)
    return Panel(width, height, lambda panel: draw(dataset, panel, heading))


def _of_singlets(dataset: xr.Dataset, heading: str) -> Panel:
    """Return the panel of a singlet fraction."""
    from pairmc.figures import singlet_fraction

    singlet_fraction.refuse_without(dataset, heading)
    return Panel(
        *singlet_fraction.size(dataset),
        lambda panel: singlet_fraction.draw(dataset, panel, heading),
    )


def _of_angles(datasets: Sequence[xr.Dataset]) -> Panel:
    """Return the one panel of results that differ in the rotation only."""
    from pairmc.figures import rotation

    aligned = with_all_pairs(datasets)
    return Panel(*rotation.size(aligned), lambda panel: rotation.draw(aligned, panel))


def _held(dataset: xr.Dataset, heading: str, among: Sequence[str]) -> list[str]:
    """Return which observables a result holds, or refuse one that holds none."""
    names = [name for name in among if name in dataset]
    if not names:
        raise InputError(
            Problem(
                heading or "a result",
                "a dataset without observables",
                ", ".join(among),
                "load a result of pairmc sample",
            )
        )
    return names
