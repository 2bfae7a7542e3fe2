"""One worker against two, on a run of one-second batches, kernels compiled before.

.venv/bin/python tests/benchmarks/workers.py
"""

from __future__ import annotations

import statistics
import sys
import tempfile
import time
from pathlib import Path

from pairmc.results.sample import sample_into
from pairmc.runfile.read import read_run_text

RUN = """
[gas]
dimension = 3
particles = {{ up = {up}, down = {down} }}
[sampling]
snapshots = {snapshots}
batches = 16
seed = 1
"""

# About one second a batch on one core of a 2.4 GHz server; small and large particle numbers.
CASES = {
    "57 + 33": (57, 33, 16 * 3500),
    "257 + 123": (257, 123, 16 * 270),
    "515": (515, 1, 16 * 55),
}


def seconds(text: str, workers: int) -> float:
    """Return how long a whole run takes."""
    with tempfile.TemporaryDirectory() as folder:
        start = time.perf_counter()
        sample_into(read_run_text(text), Path(folder) / "run.nc", workers)
        return time.perf_counter() - start


def main() -> None:
    """Time every case with one and two workers in turn, five times each."""
    for name, (up, down, snapshots) in CASES.items():
        text = RUN.format(up=up, down=down, snapshots=snapshots)
        seconds(RUN.format(up=up, down=down, snapshots=16), 1)
        pairs = [(seconds(text, 1), seconds(text, 2)) for _ in range(5)]
        one, two = (min(times) for times in zip(*pairs, strict=True))
        ratio = statistics.median(first / second for first, second in pairs)
        sys.stdout.write(
            f"{name:12} batch {one / 16:5.2f} s   shortest: one worker {one:6.2f} s, two "
            f"{two:6.2f} s, ratio {one / two:.2f}   median ratio of pairs {ratio:.2f}\n"
        )
        sys.stdout.flush()


if __name__ == "__main__":
    main()
