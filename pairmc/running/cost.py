"""What a run will cost: time, memory and file size, before anything is drawn."""

from __future__ import annotations

from dataclasses import dataclass
from math import log

from pairmc.runfile.run import RunFile

# Seconds a snapshot of N particles takes on one core, as a N³ + b N² ln N + c N: matrix products,
# feature vectors, all else. Measured at N = 49 to 925 on one core of a 2.4 GHz server; other
# machines differ by a factor of two or so.
_REAL = (9e-11, 2.5e-9, 2.2e-6)
_COMPLEX = (3.1e-10, 4e-9, 2.2e-6)
_SECONDS_PER_PAIR = 5e-9
_SECONDS_PER_ORBITAL = 1e-8  # a warm gas decides for each whether it is filled

# Compiling the kernels the first time; kept in a cache afterwards.
FIRST_COMPILATION = 25.0

# Coordinates drawn before they are tallied, see batch.py.
_COORDINATES = 60_000

# The interpreter, the libraries and the compiled kernels.
_BASE_MEMORY = 250e6


@dataclass(frozen=True)
class Cost:
    """An estimate.

    Parameters
    ----------
    seconds
        On one core, without compilation.
    memory
        Largest memory of the process with one worker, bytes.
    memory_per_worker
        What each further worker adds, bytes.
    file
        Size of the result file, bytes.
    """

    seconds: float
    memory: float
    memory_per_worker: float
    file: float


def estimate(run: RunFile) -> Cost:
    """Estimate what a run costs, within a factor of two or so.

    Parameters
    ----------
    run
        The run.
    """
    particles = run.gas.particles
    seconds = 0.5 * particles * particles * _SECONDS_PER_PAIR
    largest = 0.0
    tables = 0.0
    for occupation in run.system().occupations:
        N, orbitals = occupation.population, len(occupation.orbitals.level)
        a, b, c = _REAL if occupation.closed else _COMPLEX
        seconds += a * N**3 + b * N * N * log(N + 1) + c * N
        largest = max(largest, (8 if occupation.closed else 16) * 2.5 * N * N)
        if run.gas.thermal_energy > 0:
            seconds += _SECONDS_PER_ORBITAL * orbitals
            tables += 8.0 * orbitals * (N + 1)
    kept = run.snapshots if run.keep_snapshots is None else min(run.keep_snapshots, run.snapshots)
    per_snapshot = particles * (4.0 * run.gas.dimension + 1.0)
    pairs = len(run.gas.components) * (len(run.gas.components) + 1) // 2
    bins = sum(settings.bins for settings in run.observables.values())
    tallies = pairs * bins * (run.batches * 8.0 + 120.0)
    worker = largest + 40.0 * _COORDINATES + 4.0 * per_snapshot * min(kept, run.batch_size)
    return Cost(
        seconds=seconds * run.snapshots,
        memory=_BASE_MEMORY + tables + worker + 4.0 * tallies,
        memory_per_worker=worker,
        file=60_000.0 + tallies + kept * per_snapshot,
    )
