"""What made a batch: the run's settings, versions and processor, stored with every part."""

from __future__ import annotations

import platform
from importlib.metadata import version
from typing import Any

from pairmc.compiled import processor
from pairmc.runfile.digest import canonical
from pairmc.runfile.run import RunFile

PACKAGES = ("pairmc", "numpy", "scipy", "numba")


def made_with() -> dict[str, str]:
    """Return all that decides the bits of a batch beside the run.

    Identical bits are promised on one processor model and one set of versions, not beyond.
    """
    made = {"processor": processor(), "python": platform.python_version()}
    return made | {package: version(package) for package in PACKAGES}


def head_of(run: RunFile) -> dict[str, Any]:
    """Return what a part says about itself: ``settings`` of its run, ``versions`` that drew it."""
    return {"settings": canonical(run), "versions": made_with()}
