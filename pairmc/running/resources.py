"""What the machine has: memory, disk space and cores, for a run to be refused before it starts."""

from __future__ import annotations

import os
import shutil
from pathlib import Path

from pairmc.errors import InputError, Problem
from pairmc.runfile.run import RunFile
from pairmc.running.cost import estimate

_MEMORY_INFORMATION = Path("/proc/meminfo")
_MEMORY_LIMIT = Path("/sys/fs/cgroup/memory.max")


def available_cores() -> int:
    """Return the number of cores this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def available_memory() -> float | None:
    """Return the bytes of memory to be had, or None where the system does not say."""
    try:
        lines = _MEMORY_INFORMATION.read_text().splitlines()
        rows = dict(line.split(":", 1) for line in lines)
        free = 1024.0 * float(rows["MemAvailable"].split()[0])
    except (OSError, ValueError, KeyError, IndexError):
        return None
    try:
        return min(free, float(_MEMORY_LIMIT.read_text()))
    except (OSError, ValueError):  # no limit, or "max"
        return free


def refuse_unless_it_fits(run: RunFile, folder: Path, workers: int) -> None:
    """Refuse a run that needs more memory or disk space than there is.

    Parameters
    ----------
    run
        The run.
    folder
        Where its result goes.
    workers
        Batches drawn side by side.

    Raises
    ------
    InputError
        Naming what is needed and what there is.
    """
    cost = estimate(run)
    problems = []
    memory, needed = available_memory(), cost.memory + (workers - 1) * cost.memory_per_worker
    if memory is not None and needed > memory:
        problems.append(
            Problem(
                f"memory for {workers} batches side by side" if workers > 1 else "memory",
                f"a run that needs about {_size(needed)}",
                f"up to {_size(memory)}, what this machine has to give",
                "fewer particles, fewer workers, or keep fewer snapshots",
            )
        )
    free, needed = float(shutil.disk_usage(folder).free), 2.0 * cost.file
    if needed > free:
        problems.append(
            Problem(
                f"disk space in {folder}",
                f"a run that needs about {_size(needed)} while it is folded",
                f"up to {_size(free)}, what is free",
                "keep fewer snapshots, or name another place with --into",
            )
        )
    if problems:
        raise InputError(tuple(problems))


def _size(number: float) -> str:
    return f"{number / 1e9:.3g} GB" if number >= 1e9 else f"{number / 1e6:.3g} MB"
