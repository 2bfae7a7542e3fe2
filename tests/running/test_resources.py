"""Runs that need more than the machine has are refused before they start."""

from __future__ import annotations

from collections import namedtuple
from collections.abc import Callable
from pathlib import Path

import pytest

from pairmc.errors import InputError
from pairmc.runfile.run import RunFile
from pairmc.running import resources
from pairmc.running.cost import estimate
from pairmc.running.resources import available_memory, refuse_unless_it_fits

Usage = namedtuple("Usage", "total used free")


def test_a_run_that_fits_is_not_refused(small_run: RunFile, tmp_path: Path) -> None:
    refuse_unless_it_fits(small_run, tmp_path, 2)


def test_too_little_memory_and_disk_are_both_named(
    small_run: RunFile, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(resources, "available_memory", lambda: 2e8)
    monkeypatch.setattr(resources.shutil, "disk_usage", lambda folder: Usage(1e9, 1e9, 5e4))
    with pytest.raises(InputError) as refusal:
        refuse_unless_it_fits(small_run, tmp_path, 3)
    memory, disk = refusal.value.problems
    assert memory.key == "memory for 3 batches side by side"
    assert "200 MB" in memory.allowed
    assert "fewer workers" in memory.advice
    assert "0.05 MB" in disk.allowed


def test_more_workers_need_more_memory(small_run: RunFile) -> None:
    assert estimate(small_run).memory_per_worker > 0


def test_the_system_says_how_much_memory_there_is() -> None:
    memory = available_memory()
    assert memory is None or 1e8 < memory < 1e15


def test_the_file_size_is_foreseen_within_a_factor_of_two(
    small_run: RunFile, small_result: Path, variant: Callable[..., RunFile], tmp_path: Path
) -> None:
    size = small_result.stat().st_size
    assert size / 2 < estimate(small_run).file < 2 * size
