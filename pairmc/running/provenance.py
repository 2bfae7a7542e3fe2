"""What made a batch: versions and processor, stored with every part."""

from __future__ import annotations

import platform
from importlib.metadata import version

from pairmc.compiled import processor
from pairmc.runfile.digest import digest
from pairmc.runfile.run import RunFile

PACKAGES = ("pairmc", "numpy", "scipy", "numba")


def made_with(run: RunFile) -> dict[str, str]:
    """Return the run digest and all that decides the bits of its batches.

    Identical bits are promised on one processor model and one set of versions, not beyond.
    """
    made = {"digest": digest(run), "processor": processor(), "python": platform.python_version()}
    return made | {package: version(package) for package in PACKAGES}
