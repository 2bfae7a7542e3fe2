"""pairmc: what Pauli exclusion alone does to the positions of fermions.

The public names are loaded when they are first used, so that ``import pairmc`` costs nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from pairmc.figures.draw import plot as plot
    from pairmc.physics import theory as theory
    from pairmc.results.load import load as load
    from pairmc.results.sample import sample as sample
    from pairmc.results.snapshots import draw_snapshots as draw_snapshots
    from pairmc.runfile.read import read_run_file as read_run_file

_HOMES = {
    "draw_snapshots": "pairmc.results.snapshots",
    "load": "pairmc.results.load",
    "plot": "pairmc.figures.draw",
    "read_run_file": "pairmc.runfile.read",
    "sample": "pairmc.results.sample",
}

__all__ = ["draw_snapshots", "load", "plot", "read_run_file", "sample", "theory"]


def __getattr__(name: str) -> Any:
    if name == "theory":
        return import_module("pairmc.physics.theory")
    if name == "__version__":
        from importlib.metadata import version

        return version("pairmc")
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'pairmc' has no attribute {name!r}")


def __dir__() -> list[str]:
    return [*__all__, "__version__"]
