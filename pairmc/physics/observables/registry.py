"""The observables there are: the one line to add for a new one.

NAME stands for physics/observables/NAME.py, physics/theory/NAME.py and figures/NAME.py.
"""

from __future__ import annotations

from importlib import import_module
from types import ModuleType

NAMES = ("pair_correlation",)


def observable(name: str) -> ModuleType:
    """Return the module that tallies the observable."""
    return import_module(f"pairmc.physics.observables.{name}")


def theory(name: str) -> ModuleType:
    """Return the module that knows the observable's exact expectation."""
    return import_module(f"pairmc.physics.theory.{name}")
