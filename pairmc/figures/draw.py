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
from pairmc.files import known_suffix, refuse_unless_writable, write_whole
from pairmc.physics.observables import registry
from pairmc.results.load import load

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


# How the formats begin; an SVG file may say first that it is XML.
BEGINNINGS = {
    "png": (b"\x89PNG\r\n\x1a\n",),
    "pdf": (b"%PDF-",),
    "svg": (b"<?xml", b"<svg"),
}
_MOST_BEFORE_SVG = 1000  # bytes between the beginning of an SVG file and its first element

Result = xr.Dataset | str | os.PathLike[str]


def plot(results: Result | Sequence[Result], into: str | os.PathLike[str] | None = None) -> Figure:
    """Draw one result or several, and save the picture where a file is named.

    Parameters
    ----------
    results
        As `pairmc.load` returns them, or paths of result files.
    into
        Picture to write: .png, .pdf or .svg; None writes nothing. An older picture of the same
        format is replaced, no other file.

    Returns
    -------
    matplotlib.figure.Figure

    Raises
    ------
    InputError
        Where something else is to be drawn, or no picture can be written there.
    """
    given = _listed(results)
    paths = [each for each in given if not isinstance(each, xr.Dataset)]
    if into is not None:
        picture_format(into, paths)
    figure = draw([_dataset(each) for each in given])
    if into is not None:
        save(figure, into)
    return figure


def _listed(results: object) -> list[Result]:
    """Return what is to be drawn as a list, or refuse what cannot be drawn."""
    if isinstance(results, Sequence) and not isinstance(results, str | bytes):
        given, place = list(results), "a list with "
    else:
        given, place = [results], ""
    for each in given:
        if not isinstance(each, xr.Dataset | str | os.PathLike):
            got = f"{place}a value of type {type(each).__name__}"
            allowed = "a result, the path of a result file, or a list of these"
            advice = "a result is what pairmc.load and pairmc.sample return"
            raise InputError(Problem("results to draw", got, allowed, advice))
    return given


def _dataset(result: Result) -> xr.Dataset:
    """Return a result, read from its file where it is a path."""
    return result if isinstance(result, xr.Dataset) else load(result, snapshots=False)


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
        results = "1 result" if len(datasets) == 1 else f"{len(datasets)} results"
        raise InputError(Problem("names", f"{len(headings)} for {results}", "one for each"))
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
        Where the suffix is another, the folder is missing, or another kind of file is there.
    OSError
        Where the disk refuses; nothing is left behind.
    """
    kind = picture_format(path)

    def write(temporary: Path) -> None:
        figure.savefig(temporary, format=kind, metadata=METADATA[kind])

    with style():
        write_whole(Path(path), write)


def picture_format(
    path: str | os.PathLike[str], results: Sequence[str | os.PathLike[str]] = ()
) -> str:
    """Return the format that the suffix of a picture's name stands for.

    Parameters
    ----------
    path
        The picture's name.
    results
        Files that are drawn in it.

    Raises
    ------
    InputError
        Where no picture can be written under this name, or a file is there that is no picture of
        this format.
    """
    path = Path(path)
    kind = known_suffix(path, METADATA, "the suffix says which kind of picture")
    refuse_unless_writable(path)
    if not path.exists():
        return kind
    drawn = any(Path(each).exists() and path.samefile(each) for each in results)
    if drawn or not _is_picture(path, kind):
        other = f"the name of a file that is no {kind.upper()} picture"
        got = "the name of a result that is to be drawn" if drawn else other
        allowed = f"a new name, or an older {kind.upper()} picture"
        advice = "name another file, or move that one away"
        raise InputError(Problem(str(path), got, allowed, advice))
    return kind


def _is_picture(path: Path, kind: str) -> bool:
    """Return whether a file is a picture of a format, or empty, so that nothing is lost with it."""
    if not path.is_file():
        return False
    with path.open("rb") as file:
        start = file.read(_MOST_BEFORE_SVG)
    known = start.startswith(BEGINNINGS[kind]) and (kind != "svg" or b"<svg" in start)
    return known or not start


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
