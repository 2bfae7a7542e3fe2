"""``pairmc plot``: the picture of a result."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import click

from pairmc.figures.views import VIEWS


@click.command()
@click.argument("files", metavar="FILE…", nargs=-1, required=True, type=click.Path())
@click.option(
    "--into",
    "picture",
    metavar="PICTURE",
    type=click.Path(),
    required=True,
    help="Picture to write: .png, .pdf, .svg. It may replace an older picture, no other file.",
)
@click.option(
    "--show",
    type=click.Choice(VIEWS),
    default=VIEWS[0],
    show_default=True,
    help="What to draw. The pair correlation of files that differ only in the rotation of spins "
    "is drawn in one panel, a curve for each angle.",
)
def plot(files: Sequence[str], picture: str, show: str) -> None:
    """Draw result files: sampled, exact for this system, infinite system."""
    from pairmc.figures.draw import draw, picture_format, save
    from pairmc.results.load import load

    picture_format(picture, files)
    results = [load(file, snapshots=False) for file in files]
    names = [
        f"{Path(file).name}: {result.title}" for file, result in zip(files, results, strict=True)
    ]
    save(draw(results, names if len(files) > 1 else None, show), Path(picture))
    click.echo(f"picture: {picture}", err=True)
