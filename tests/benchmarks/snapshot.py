"""Time of a snapshot against one Cholesky factorisation of the same size, in the same run.

The reference is LAPACK's dpotrf (zpotrf for complex features) on an N × N matrix, one thread, as
scipy calls it: no sampler of N correlated points that factorises anything can be faster than a few
of these. Medians on both sides; the speed of the machine cancels in the ratio.

    .venv/bin/python tests/benchmarks/snapshot.py
"""

from __future__ import annotations

import argparse
import json
import platform
import sys
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
from scipy.linalg import lapack

from pairmc.compiled import processor
from pairmc.physics.gas import Gas
from pairmc.physics.grids import separation_grid
from pairmc.physics.observables import pair_correlation
from pairmc.physics.sampling.direct import DirectSampler
from pairmc.physics.system import build_system
from pairmc.running.batch import limit_blas_threads
from pairmc.streams import generator

# (dimension, population): closed shells have real features, the others complex ones.
CASES = (
    (2, 49),
    (3, 57),
    (3, 123),
    (3, 257),
    (3, 515),
    (3, 925),
    (2, 256),
    (3, 258),
    (3, 514),
)


def median_time(call: Callable[[], object], seconds: float, least: int = 5) -> float:
    """Return the median time of a call, repeated for about the given seconds."""
    call()
    times: list[float] = []
    while len(times) < least or sum(times) < seconds:
        start = time.perf_counter()
        call()
        times.append(time.perf_counter() - start)
    return float(np.median(times))


def measure(dimension: int, population: int, seconds: float) -> dict[str, object]:
    """Return the figures of one case."""
    system = build_system(Gas(dimension, ("up",), (population,), 1.0), (1.0,) * dimension)
    closed = system.occupations[0].closed
    sampler = DirectSampler(
        system, lambda role, part: generator(1, "calibration", "00000000", 0, role, part)
    )
    block = max(1, 100_000 // population**2)
    draw = median_time(lambda: sampler.draw(block), seconds) / block
    snapshots = sampler.draw(block)
    grid = separation_grid(system, 80)
    tallies = pair_correlation.empty(grid)
    tally = median_time(lambda: pair_correlation.tally(snapshots, grid, tallies), 0.3) / block
    rng = np.random.default_rng(1)
    matrix = rng.standard_normal((population, population))
    matrix = matrix @ matrix.T + population * np.eye(population)
    if closed:
        reference = median_time(lambda: lapack.dpotrf(matrix, lower=1), 0.5)
    else:
        hermitian = matrix.astype(np.complex128)
        reference = median_time(lambda: lapack.zpotrf(hermitian, lower=1), 0.5)
    return {
        "case": f"{dimension}D N={population} {'real' if closed else 'complex'}",
        "snapshot_ms": 1e3 * draw,
        "factorisation_ms": 1e3 * reference,
        "ratio": draw / reference,
        "tally_share": tally / (draw + tally),
    }


def main() -> None:
    """Measure all cases, print the table, and save it where asked to."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--seconds", type=float, default=2.0, help="time for each case")
    parser.add_argument("--save", type=Path, help="JSON file to write")
    options = parser.parse_args()
    limit_blas_threads()
    sys.stdout.write(f"{processor()}, Python {platform.python_version()}, numpy {np.__version__}\n")
    sys.stdout.write(f"{'case':22}{'snapshot':>12}{'potrf':>12}{'ratio':>8}{'tally':>8}\n")
    rows = []
    for dimension, population in CASES:
        row = measure(dimension, population, options.seconds)
        rows.append(row)
        sys.stdout.write(
            f"{row['case']:22}{row['snapshot_ms']:9.3f} ms{row['factorisation_ms']:9.3f} ms"
            f"{row['ratio']:8.1f}{row['tally_share']:8.0%}\n"
        )
        sys.stdout.flush()
    if options.save:
        options.save.write_text(json.dumps({"processor": processor(), "rows": rows}, indent=2))


if __name__ == "__main__":
    main()
