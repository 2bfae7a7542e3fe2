"""One process at a time on one result file; a dead one stops nobody."""

from __future__ import annotations

import os
import platform
import subprocess
import sys
from pathlib import Path

import pytest

from pairmc.errors import InputError
from pairmc.running.lock import OutputLock

HOLD = """
import sys, time
from pathlib import Path
from pairmc.running.lock import OutputLock
with OutputLock(Path(sys.argv[1])):
    print("held", flush=True)
    time.sleep(60)
"""


@pytest.fixture
def holder(tmp_path: Path):
    """Return a process that holds the lock of run.nc."""
    process = subprocess.Popen(
        [sys.executable, "-c", HOLD, tmp_path / "run.nc"], stdout=subprocess.PIPE, text=True
    )
    assert process.stdout.readline() == "held\n"
    yield process
    process.kill()
    process.communicate()


def test_a_second_process_is_refused_and_told_who_the_first_is(holder, tmp_path: Path) -> None:
    with (
        pytest.raises(InputError, match=f"process {holder.pid} on {platform.node()}"),
        OutputLock(tmp_path / "run.nc"),
    ):
        pass
    with OutputLock(tmp_path / "other.nc"):
        pass


def test_the_lock_of_a_killed_process_stops_nobody(holder, tmp_path: Path) -> None:
    holder.kill()
    holder.wait()
    assert (tmp_path / ".run.nc.lock").exists()
    with OutputLock(tmp_path / "run.nc"):
        assert str(os.getpid()) in (tmp_path / ".run.nc.lock").read_text()
    assert list(tmp_path.iterdir()) == []


def test_the_lock_goes_when_it_is_released_also_after_an_error(tmp_path: Path) -> None:
    with pytest.raises(ZeroDivisionError), OutputLock(tmp_path / "run.nc"):
        raise ZeroDivisionError
    assert list(tmp_path.iterdir()) == []
    with OutputLock(tmp_path / "run.nc"):
        pass


def test_within_one_process_too(tmp_path: Path) -> None:
    with (
        OutputLock(tmp_path / "run.nc"),
        pytest.raises(InputError, match="sampling into"),
        OutputLock(tmp_path / "run.nc"),
    ):
        pass
