"""The one decorator for compiled kernels.

A kernel is compiled by numba on its first call, without the interpreter lock, and kept in a cache
folder whose name is a hash of every kernel source file, of the versions that matter and of the
processor. numba's own check looks at one file only: after an edit to a callee in another file it
would go on using the old machine code and return wrong numbers. Where the folder cannot be written
the kernel is compiled anew in each process.
"""

from __future__ import annotations

import hashlib
import os
import platform
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import llvmlite
import llvmlite.binding
import numba
import numpy as np
import scipy
from numba.core import config
from numba.extending import overload

__all__ = ["cache_folder", "kernel", "overload", "processor"]

# Sums may be reordered and multiplications fused, so that loops over rows use the vector unit;
# infinities and NaN keep their meaning.
_FAST = frozenset({"reassoc", "contract", "nsz", "arcp"})


def _fingerprint() -> str:
    """Return a hash of all that decides a kernel's machine code."""
    digest = hashlib.sha256()
    package = Path(__file__).parent
    for source in [Path(__file__), *sorted((package / "physics").rglob("*.py"))]:
        digest.update(str(source.relative_to(package)).encode())
        digest.update(source.read_bytes())
    versions = (
        sys.version,
        numba.__version__,
        llvmlite.__version__,
        np.__version__,
        scipy.__version__,
        platform.machine(),
        llvmlite.binding.get_host_cpu_name(),
        str(sorted(llvmlite.binding.get_host_cpu_features().items())),
    )
    digest.update("\n".join(versions).encode())
    return digest.hexdigest()[:20]


def _make_cache_folder() -> Path | None:
    """Return the writable cache folder of this version of the kernels, or None."""
    named = os.environ.get("PAIRMC_CACHE")
    base = Path(named) if named else Path(os.path.expanduser("~")) / ".cache" / "pairmc"
    folder = base / _fingerprint()
    try:
        folder.mkdir(parents=True, exist_ok=True)
        probe = folder / f".probe-{os.getpid()}"
        probe.touch()
        probe.unlink()
    except OSError:
        return None
    return folder


cache_folder: Path | None = _make_cache_folder()


def processor() -> str:
    """Return the processor's model, which decides the last bits of results."""
    return str(llvmlite.binding.get_host_cpu_name())


def kernel(function: Callable[..., Any]) -> Any:
    """Compile a function of numbers and arrays on its first call, free of the interpreter lock.

    Parameters
    ----------
    function
        Plain Python in the subset numba compiles; it stays reachable as ``.py_func``.

    Returns
    -------
    callable
        The compiled function; bit-identical from call to call on one machine.
    """
    options: dict[str, Any] = {"nogil": True, "error_model": "numpy", "fastmath": set(_FAST)}
    if cache_folder is None:
        return numba.njit(**options)(function)
    before = config.CACHE_DIR  # type: ignore[attr-defined]
    config.CACHE_DIR = str(cache_folder)  # type: ignore[attr-defined]
    try:
        return numba.njit(cache=True, **options)(function)
    finally:
        config.CACHE_DIR = before  # type: ignore[attr-defined]
