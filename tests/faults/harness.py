"""Runs that are killed, starved and spoilt on purpose, and what must be true afterwards.

After every fault: no finished batch is gone, the result file is whole or absent. After the last one
the same command must end with the very bits of an undisturbed run, and leave nothing behind.
"""

from __future__ import annotations

import ctypes
import os
import resource
import signal
import subprocess
import sys
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from pairmc.results.load import batches_in, load
from pairmc.running.parts import DamagedPartError, Parts
from tests.conftest import same_data

BATCHES = 40

# A few seconds on two cores; snapshots are kept, so that folding takes a while too.
RUN = f"""
[gas]
dimension = 2
particles = {{ up = 49, down = 37 }}
[sampling]
snapshots = 8000
batches = {BATCHES}
seed = 5
keep_snapshots = 4000
"""

# Linux: drop a capability from what a process and its children may ever have; the capabilities to
# pass over file permissions (prctl(2), capabilities(7)).
_DROP_FROM_BOUNDING_SET = 24
_PASS_OVER_PERMISSIONS = (1, 2)


def heed_interrupts() -> None:
    """Make the program that is started next heed SIGINT, which a shell's background jobs ignore."""
    signal.signal(signal.SIGINT, signal.SIG_DFL)


def obey_permissions() -> None:
    """Make the program that is started next obey file permissions, also as root."""
    for capability in _PASS_OVER_PERMISSIONS if os.geteuid() == 0 else ():
        ctypes.CDLL(None).prctl(_DROP_FROM_BOUNDING_SET, capability, 0, 0, 0)


@dataclass
class Tally:
    """What went wrong in one kind of fault; all zeros when all is well."""

    kind: str
    cases: int = 0
    finished_batches_lost: int = 0
    unreadable_files: int = 0
    differing_variables: int = 0
    leftovers: int = 0
    wrong_endings: int = 0
    runs_completed: int = 0
    notes: list[str] = field(default_factory=list)

    @property
    def faults(self) -> int:
        """All that went wrong."""
        return (
            self.finished_batches_lost
            + self.unreadable_files
            + self.differing_variables
            + self.leftovers
            + self.wrong_endings
        )


class Campaign:
    """One output folder that faults happen to, and the undisturbed result to compare with.

    Parameters
    ----------
    folder
        Empty.
    reference
        Result file of an undisturbed run of `RUN`.
    """

    def __init__(self, folder: Path, reference: Path) -> None:
        self.folder = folder
        self.run_file = folder / "run.toml"
        self.result = folder / "run.nc"
        self.parts = Parts(folder / "run.nc.parts")
        self.reference = load(reference)
        self.run_file.write_text(RUN)
        self.finished: set[int] = set()

    def start(self, script: str = "", **options: Any) -> subprocess.Popen[str]:
        """Start sampling; `script` runs in the process before pairmc does."""
        program = f"{script}\nimport sys\nfrom pairmc.cli.main import main\nmain(sys.argv[1:])"
        return subprocess.Popen(
            [sys.executable, "-c", program, "sample", str(self.run_file), "--workers", "2"],
            stdout=subprocess.DEVNULL,
            stderr=subprocess.PIPE,
            text=True,
            **options,
        )

    def inspect(self, tally: Tally, spoilt: set[int] = frozenset()) -> None:  # type: ignore[assignment]
        """Check what a fault has left, before anything is done about it."""
        tally.cases += 1
        held = set(self.parts.finished())
        if self.result.exists():
            try:
                load(self.result)
                held |= set(range(batches_in(self.result)))
            except Exception as error:
                tally.unreadable_files += 1
                tally.notes.append(f"result: {error}")
        for batch in self.parts.finished():
            if batch in spoilt:
                continue
            try:
                self.parts.read(batch)
            except DamagedPartError as error:
                tally.unreadable_files += 1
                tally.notes.append(f"part {batch}: {error}")
        lost = self.finished - held
        tally.finished_batches_lost += len(lost)
        self.finished = held

    def finish(self, tally: Tally) -> None:
        """Let the same command run to its end; compare with the undisturbed run; start afresh."""
        process = self.start()
        _, message = process.communicate(timeout=300)
        if process.returncode:
            tally.wrong_endings += 1
            tally.notes.append(message)
            return
        differing = same_data(load(self.result), self.reference)
        tally.differing_variables += len(differing)
        left = sorted(path.name for path in self.folder.iterdir())
        tally.leftovers += len(set(left) - {"run.nc", "run.toml"})
        tally.runs_completed += 1
        self.result.unlink()
        self.finished = set()


def make_reference(folder: Path) -> tuple[Path, float]:
    """Return the result of an undisturbed run and how long it took, kernels compiled before."""
    (folder / "reference.toml").write_text(RUN)
    command = [sys.executable, "-m", "pairmc", "sample", "reference.toml", "--quiet"]
    for _ in range(2):
        (folder / "reference.nc").unlink(missing_ok=True)
        start = time.monotonic()
        subprocess.run(command, cwd=folder, check=True, stdout=subprocess.DEVNULL)
        seconds = time.monotonic() - start
    return folder / "reference.nc", seconds


def kill_at_random(
    campaign: Campaign,
    tally: Tally,
    rng: np.random.Generator,
    cases: int,
    number: signal.Signals,
    seconds: float,
) -> None:
    """Send a signal at random moments, time after time; the run goes on in between."""
    endings = {signal.SIGKILL: -9, signal.SIGINT: 130, signal.SIGTERM: 143}
    for _ in range(cases):
        process = campaign.start(preexec_fn=heed_interrupts)
        # beyond the handler's installation for the signals that are handled
        time.sleep(rng.uniform(0.0 if number == signal.SIGKILL else 1.2, 1.1 * seconds))
        process.send_signal(number)
        asked = time.monotonic()
        _, message = process.communicate(timeout=60)
        late = time.monotonic() - asked > 5
        # before Python runs the program, and after, signals have their default effect
        outside = process.returncode == -number and (not message or f"{BATCHES} of" in message)
        ended = process.returncode in (0, endings[number]) or outside
        if not ended or late or "Traceback" in message:
            tally.wrong_endings += 1
            tally.notes.append(f"code {process.returncode}: {message}")
        campaign.inspect(tally)
        if process.returncode == 0 or rng.random() < 0.1:
            campaign.finish(tally)
    campaign.finish(tally)


def fill_the_disk(campaign: Campaign, tally: Tally, rng: np.random.Generator, cases: int) -> None:
    """Let writes fail beyond a random file size: a part now, the result another time."""
    for _ in range(cases):
        limit = int(10 ** rng.uniform(3.5, 6.3))

        def starve(limit: int = limit) -> None:
            resource.setrlimit(resource.RLIMIT_FSIZE, (limit, resource.RLIM_INFINITY))

        process = campaign.start(preexec_fn=starve)
        _, message = process.communicate(timeout=300)
        told = "kept" in message and "Traceback" not in message
        if process.returncode not in (0, 1) or (process.returncode == 1 and not told):
            tally.wrong_endings += 1
            tally.notes.append(f"code {process.returncode}: {message}")
        campaign.inspect(tally)
        if process.returncode == 0 or rng.random() < 0.3:
            campaign.finish(tally)
    campaign.finish(tally)


def take_permission_away(
    campaign: Campaign, tally: Tally, rng: np.random.Generator, cases: int, seconds: float
) -> None:
    """Make the folders read-only while a run without privileges is writing into them."""
    for _ in range(cases):
        process = campaign.start(preexec_fn=obey_permissions)
        time.sleep(rng.uniform(1.0, seconds))
        folders = [campaign.folder, campaign.parts.folder]
        for folder in filter(Path.exists, folders):
            folder.chmod(0o555)
        _, message = process.communicate(timeout=120)
        for folder in filter(Path.exists, folders):
            folder.chmod(0o755)
        if process.returncode not in (0, 1, 2) or "Traceback" in message:
            tally.wrong_endings += 1
            tally.notes.append(f"code {process.returncode}: {message}")
        campaign.inspect(tally)
        if process.returncode == 0:
            campaign.finish(tally)
    campaign.finish(tally)


JUMPING_CLOCK = """
import random, time
random.seed({seed})
_time = time.time
time.time = lambda: _time() + random.choice([0.0, -1e8, 1e8])
"""


def let_the_clock_jump(campaign: Campaign, tally: Tally, cases: int) -> None:
    """Let the clock on the wall jump back and forth by years while a run is drawn."""
    for case in range(cases):
        process = campaign.start(JUMPING_CLOCK.format(seed=case))
        _, message = process.communicate(timeout=300)
        if process.returncode or "Traceback" in message:
            tally.wrong_endings += 1
            tally.notes.append(message)
        campaign.inspect(tally)
        campaign.finish(tally)


def spoil_parts(
    campaign: Campaign, tally: Tally, rng: np.random.Generator, cases: int, seconds: float
) -> None:
    """Truncate or flip bits of finished parts of a killed run: they are named and drawn again."""
    for _ in range(cases):
        process = campaign.start()
        time.sleep(rng.uniform(0.4, 0.9) * seconds)
        process.kill()
        process.communicate()
        finished = campaign.parts.finished()
        spoilt = (
            set(rng.choice(finished, min(2, len(finished)), replace=False)) if finished else set()
        )
        for batch in spoilt:
            path = campaign.parts.path(int(batch))
            contents = bytearray(path.read_bytes())
            if rng.random() < 0.5:
                contents = contents[: rng.integers(len(contents))]
            else:
                contents[len(contents) // 2] ^= 1 << int(rng.integers(8))
            path.write_bytes(contents)
        campaign.inspect(tally, spoilt)
        campaign.finish(tally)


Fault = Callable[..., None]


def table(tallies: list[Tally]) -> str:
    """Return the outcome as a table."""
    head = (
        f"{'fault':24}{'cases':>7}{'runs':>6}{'batches lost':>14}{'unreadable':>12}"
        f"{'bits differ':>13}{'leftovers':>11}{'wrong endings':>15}"
    )
    rows = [
        f"{t.kind:24}{t.cases:7}{t.runs_completed:6}{t.finished_batches_lost:14}"
        f"{t.unreadable_files:12}{t.differing_variables:13}{t.leftovers:11}{t.wrong_endings:15}"
        for t in tallies
    ]
    return "\n".join([head, *rows])
