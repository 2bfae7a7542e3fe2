"""Draws results, one panel for each observable of each, and saves the picture."""

from __future__ import annotations

import os
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import xarray as xr

from pairmc.errors import InputError, Problem
from pairmc.figures.panels import panels_of
from pairmc.figures.style import inches, style
from pairmc.figures.views import MOST_ANGLES, VIEWS, differ_only_in_rotation
from pairmc.files import known_suffix, refuse_unless_writable, write_whole
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


def plot(
    results: Result | Sequence[Result],
    into: str | os.PathLike[str] | None = None,
    show: str = VIEWS[0],
) -> Figure:
    """Draw one result or several, and save the picture where a file is named.

    Parameters
    ----------
    results
        As `pairmc.load` returns them, or paths of result files.
    into
        Picture to write: .png, .pdf or .svg; None writes nothing. An older picture of the same
        format is replaced, no other file.
    show
        "exchange-hole", "pair-correlation" or "singlet-fraction".

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
    figure = draw([_dataset(each) for each in given], show=show)
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


def draw(
    datasets: Sequence[xr.Dataset], names: Sequence[str] | None = None, show: str = VIEWS[0]
) -> Figure:
    """Draw results below one another, each in panels of its own.

    Each observable is drawn by figures/NAME.py, which says how large its panel is,
    ``size(dataset)``, and fills it, ``draw(dataset, panel, heading)``. Pair correlations of results
    that differ only in the rotation of spins share a panel.

    Parameters
    ----------
    datasets
        Results, at most `MOST_RESULTS`; at most `MOST_ANGLES` that share a panel.
    names
        What to call each; None takes their titles, as a panel of several does.
    show
        One of `VIEWS`.

    Returns
    -------
    matplotlib.figure.Figure
        Bound to no window; its layout is settled.

    Raises
    ------
    InputError
        Where there are no results, too many, or one without what is to be shown; or no matplotlib.
    """
    if show not in VIEWS:
        raise InputError(Problem("show", repr(show), ", ".join(repr(view) for view in VIEWS)))
    headings = [dataset.attrs.get("title", "") for dataset in datasets] if names is None else names
    together = show == "pair-correlation" and differ_only_in_rotation(datasets)
    most = MOST_ANGLES if together else MOST_RESULTS
    if not 1 <= len(datasets) <= most:
        raise InputError(
            Problem(
                "results to draw",
                str(len(datasets)),
                f"1 to {most} in one picture",
                "draw them in several pictures",
            )
        )
    if len(headings) != len(datasets):
        results = "1 result" if len(datasets) == 1 else f"{len(datasets)} results"
        raise InputError(Problem("names", f"{len(headings)} for {results}", "one for each"))
    with style():
        from matplotlib.backends.backend_agg import FigureCanvasAgg
        from matplotlib.figure import Figure

        panels = panels_of(datasets, headings, show)
        heights = [panel.height for panel in panels]
        width = max(panel.width for panel in panels)
        figure = Figure(figsize=inches(width, sum(heights)), layout="constrained")
        FigureCanvasAgg(figure)
        parts = figure.subfigures(len(panels), 1, squeeze=False, height_ratios=heights)
        for panel, part in zip(panels, parts[:, 0], strict=True):
            panel.fill(part)
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
