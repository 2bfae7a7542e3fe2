"""What a run will cost: time, memory and file size, before anything is drawn."""

from __future__ import annotations

from dataclasses import dataclass
from math import log, sqrt

from pairmc.physics.orbitals import symmetric
from pairmc.physics.system import Averaged, Occupation
from pairmc.runfile.run import RunFile

# Seconds a snapshot of N particles takes on one core, as a N³ + b N² ln N + c N: matrix products,
# feature vectors, all else. Measured at N = 49 to 925 on one core of a 2.4 GHz server; other
# machines differ by a factor of two or so.
_REAL = (9e-11, 2.5e-9, 2.2e-6)
_COMPLEX = (3.1e-10, 4e-9, 2.2e-6)
_SECONDS_PER_PAIR = 5e-9
_SECONDS_PER_ORBITAL = 1e-8  # a warm gas decides for each whether it is filled
_SECONDS_PER_TWISTED_ORBITAL = 4e-8  # a twist of its own moves the energy of each
_SECONDS_PER_GRID_VALUE = 1e-7  # transforms for the expectation at a twist

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
    if run.rotation:
        # one determinant of all particles in place of one a component
        a, b, c = _REAL if all(map(_real, run.system().components)) else _COMPLEX
        seconds += a * particles**3 + b * particles**2 * log(particles + 1) + c * particles
    averaged = run.twist == "averaged"
    for occupation in run.system().components:
        N, orbitals = occupation.population, len(occupation.orbitals)
        a, b, c = _REAL if _real(occupation) else _COMPLEX
        if not run.rotation:
            seconds += a * N**3 + b * N * N * log(N + 1) + c * N
        together = particles if run.rotation else N
        largest = max(largest, (8 if _real(occupation) else 16) * 2.5 * together**2)
        if averaged:
            seconds += _SECONDS_PER_TWISTED_ORBITAL * orbitals
            if not run.gas.thermal_energy:
                seconds += _SECONDS_PER_GRID_VALUE * 2**run.gas.dimension * orbitals
        elif run.gas.thermal_energy > 0:
            seconds += _SECONDS_PER_ORBITAL * orbitals
            tables += 8.0 * orbitals * (N + 1)
    total = seconds * run.snapshots
    if averaged and run.gas.thermal_energy > 0:
        total += _warm_expectations(run)
    kept = run.snapshots if run.keep_snapshots is None else min(run.keep_snapshots, run.snapshots)
    per_snapshot = particles * (4.0 * run.gas.dimension + 1.0)
    pairs = len(run.gas.components) * (len(run.gas.components) + 1) // 2
    bins = sum(settings.bins for settings in run.observables.values())
    tallies = pairs * bins * (run.batches * 8.0 + 120.0)
    worker = largest + 40.0 * _COORDINATES + 4.0 * per_snapshot * min(kept, run.batch_size)
    return Cost(
        seconds=total,
        memory=_BASE_MEMORY + tables + worker + 4.0 * tallies,
        memory_per_worker=worker,
        file=60_000.0 + tallies + kept * per_snapshot,
    )


def _real(occupation: Occupation | Averaged) -> bool:
    """Return whether features are real: one determinant, alike under k → −k."""
    return occupation.closed and symmetric(occupation.orbitals.numbers)


def _warm_expectations(run: RunFile) -> float:
    """Return the seconds that the expectations at all twists take, see theory/twists.py."""
    from pairmc.physics.theory.twists import DAMPED, MOST, slowest_fall

    gas, system = run.gas, run.system()
    d, one = gas.dimension, 0.0
    for occupation in system.components:
        warmth = min(1.0, gas.reduced_temperature)
        angles = 1.0 if not occupation.fixed else 12 + 4 * sqrt(occupation.population * warmth)
        one += 3e-3 + _SECONDS_PER_GRID_VALUE * angles * 1.5 * 2**d * len(occupation.orbitals)
    terms = (2 - 2 * log(DAMPED) / slowest_fall(system)) ** d
    return one * (0.5 * terms if terms < MOST else run.snapshots)
