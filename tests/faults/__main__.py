"""The long fault suite: ``.venv/bin/python -m tests.faults``; half an hour.

Prints a table; exit code 1 where anything was lost, unreadable, different or left behind.
"""

from __future__ import annotations

import argparse
import signal
import sys
import tempfile
from pathlib import Path

import numpy as np

from tests.faults import harness
from tests.faults.harness import Campaign, Tally


def main() -> int:
    """Run all kinds of faults and print the table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--kills", type=int, default=200, help="kill -9 at random moments")
    parser.add_argument("--others", type=int, default=20, help="cases of every other kind")
    parser.add_argument("--seed", type=int, default=1)
    options = parser.parse_args()
    tallies: list[Tally] = []
    with tempfile.TemporaryDirectory() as base:
        Path(base).chmod(0o755)
        reference, seconds = harness.make_reference(Path(base))
        sys.stdout.write(f"an undisturbed run takes {seconds:.1f} s\n")

        def prepare(kind: str) -> tuple[Campaign, Tally, np.random.Generator]:
            folder = Path(base) / kind.replace(" ", "-")
            folder.mkdir()
            tallies.append(Tally(kind))
            seed = [options.seed, len(tallies)]
            return Campaign(folder, reference), tallies[-1], np.random.default_rng(seed)

        for name, number, cases in (
            ("kill -9", signal.SIGKILL, options.kills),
            ("SIGTERM", signal.SIGTERM, options.others),
            ("interrupt", signal.SIGINT, options.others),
        ):
            harness.kill_at_random(*prepare(name), cases, number, seconds)
            sys.stdout.write(f"{name}: done\n")
            sys.stdout.flush()
        harness.fill_the_disk(*prepare("disk full"), options.others)
        harness.take_permission_away(*prepare("permission lost"), options.others, seconds)
        campaign, tally, _ = prepare("clock jumps")
        harness.let_the_clock_jump(campaign, tally, max(1, options.others // 4))
        harness.spoil_parts(*prepare("parts spoilt"), options.others, seconds)
    sys.stdout.write(harness.table(tallies) + "\n")
    for tally in tallies:
        for note in tally.notes:
            sys.stdout.write(f"{tally.kind}: {note}\n")
    return int(any(tally.faults for tally in tallies))


if __name__ == "__main__":
    sys.exit(main())
