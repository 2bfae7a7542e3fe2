"""Exact expectations: one module an observable, of the same name."""

from __future__ import annotations

from importlib import import_module
from typing import Any


def __getattr__(name: str) -> Any:
    if name.startswith("_"):
        raise AttributeError(name)
    try:
        return import_module(f"{__name__}.{name}")
    except ModuleNotFoundError as error:
        raise AttributeError(f"no theory of {name!r}") from error
