"""Draws results, one panel for each observable of each, and saves the picture."""

from __future__ import annotations

import os
from collections.abc import Sequence
from importlib import import_module
from pathlib import Path
from typing import TYPE_CHECKING, Any

import xarray as xr

from pairmc.errors import InputError, Problem
from pairmc.figures.style import inches, style
from pairmc.files import refuse_unless_writable, write_whole
from pairmc.physics.observables import registry

if TYPE_CHECKING:
    from matplotlib.figure import Figure

# More results than this do not fit on a page.
MOST_RESULTS = 4

# What a picture says about itself: no dates and no versions, so that equal input gives equal bytes.
METADATA: dict[str, dict[str, Any]] = {
    "png": {"Software": "pairmc"},
    "pdf": {"Creator": "pairmc", "Producer": "pairmc", "CreationDate": None},
    "svg": {"Creator": "pairmc", "Date": None},
}


def plot(
    results: xr.Dataset | Sequence[xr.Dataset], into: str | os.PathLike[str] | None = None
) -> Figure:
    """Draw one result or several, and save the picture where a file is named.

    Parameters
    ----------
    results
        As `pairmc.load` returns them.
    into
        Picture to write: .png, .pdf or .svg; None writes nothing.

    Returns
    -------
    matplotlib.figure.Figure
    """
    datasets = [results] if isinstance(results, xr.Dataset) else list(results)
    if into is not None:
        picture_format(into)
    figure = draw(datasets)
    if into is not None:
        save(figure, into)
    return figure


def draw(datasets: Sequence[xr.Dataset], names: Sequence[str] | None = None) -> Figure:
    """Draw results below one another, each in panels of its own.

    Each observable is drawn by figures/NAME.py, which says how large its panel is,
    ``size(dataset)``, and fills it, ``draw(dataset, panel, heading)``.

    Parameters
    ----------
    datasets
        Results, at most `MOST_RESULTS`.
    names
        What to call each; None takes their titles.

    Returns
    -------
    matplotlib.figure.Figure
        Bound to no window; its layout is settled.

    Raises
    ------
    InputError
        Where there are no results, too many, or one with nothing to draw; or no matplotlib.
    """
    headings = [dataset.attrs.get("title", "") for dataset in datasets] if names is None else names
    if not 1 <= len(datasets) <= MOST_RESULTS:
        raise InputError(
            Problem(
                "results to draw",
                str(len(datasets)),
                f"1 to {MOST_RESULTS} in one picture",
                "draw them in several pictures",
            )
        )
    if len(headings) != len(datasets):
        raise InputError(
            Problem("names", f"{len(headings)} for {len(datasets)} results", "one for each")
        )
    with style():
        from matplotlib.backends.backend_agg import FigureCanvasAgg
        from matplotlib.figure import Figure

        panels = [
            (import_module(f"pairmc.figures.{name}"), dataset, heading)
            for dataset, heading in zip(datasets, headings, strict=True)
            for name in _observables(dataset, heading)
        ]
        sizes = [module.size(dataset) for module, dataset, _ in panels]
        heights = [height for _, height in sizes]
        width = max(width for width, _ in sizes)
        figure = Figure(figsize=inches(width, sum(heights)), layout="constrained")
        FigureCanvasAgg(figure)
        parts = figure.subfigures(len(panels), 1, squeeze=False, height_ratios=heights)
        for (module, dataset, heading), panel in zip(panels, parts[:, 0], strict=True):
            module.draw(dataset, panel, heading)
        figure.draw_without_rendering()
        figure.set_layout_engine("none")
    return figure


def save(figure: Figure, path: str | os.PathLike[str]) -> None:
    """Write a picture whole or not at all, in the format that its suffix names.

    Parameters
    ----------
    figure
        As `draw` returns it.
    path
        Ends in .png, .pdf or .svg.

    Raises
    ------
    InputError
        Where the suffix is another, or the folder is missing.
    OSError
        Where the disk refuses; nothing is left behind.
    """
    kind = picture_format(path)

    def write(temporary: Path) -> None:
        figure.savefig(temporary, format=kind, metadata=METADATA[kind])

    with style():
        write_whole(Path(path), write)


def picture_format(path: str | os.PathLike[str]) -> str:
    """Return the format that the suffix of a picture's name stands for.

    Raises
    ------
    InputError
        Where no picture can be written under this name.
    """
    path = Path(path)
    kind = path.suffix.lower().removeprefix(".")
    if kind not in METADATA:
        allowed = ", ".join(f".{known}" for known in METADATA)
        got = f'a name that ends in "{path.suffix}"' if path.suffix else "a name without a suffix"
        raise InputError(Problem(str(path), got, allowed, "the suffix says which kind of picture"))
    refuse_unless_writable(path)
    return kind


def _observables(dataset: xr.Dataset, heading: str) -> list[str]:
    """Return the observables that a result holds, or refuse one that holds none."""
    names = [name for name in registry.NAMES if name in dataset]
    if not names:
        raise InputError(
            Problem(
                heading or "a result",
                "a dataset without observables",
                ", ".join(registry.NAMES),
                "load a result of pairmc sample",
            )
        )
    return names
