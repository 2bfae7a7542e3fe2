"""Where random numbers come from: every stream has an address.

A stream is a pure function of (seed, purpose, run digest, batch, role). Nothing is handed round, so
batch 17 holds the same numbers on one worker or on forty, and two runs that differ in anything that
decides their numbers share none.
"""

from __future__ import annotations

import numpy as np

# What a stream is for: the first word of its address.
PURPOSES = {"sample": 0, "reference": 1, "calibration": 2, "bootstrap": 3}

# What is drawn within a batch: the last word but one. Each stream is used snapshot after snapshot,
# so how many snapshots are drawn at a time changes nothing.
ROLES = {"position": 0, "occupation": 1, "twist": 2, "detection": 3}


def address(purpose: str, digest: str, batch: int) -> tuple[int, ...]:
    """Return the address of a batch: purpose, the digest as 32-bit words, the batch number.

    Parameters
    ----------
    purpose
        A key of `PURPOSES`.
    digest
        Run digest, hexadecimal, a multiple of eight digits.
    batch
        Batch number, from 0.
    """
    words = tuple(int(digest[i : i + 8], 16) for i in range(0, len(digest), 8))
    return (PURPOSES[purpose], *words, batch)


def generator(
    seed: int, purpose: str, digest: str, batch: int, role: str, part: int = 0
) -> np.random.Generator:
    """Return the generator at an address.

    Parameters
    ----------
    seed
        The run's seed, a non-negative integer of any size.
    purpose, digest, batch
        See `address`.
    role
        A key of `ROLES`.
    part
        Which determinant of a snapshot: the component, where components are drawn separately.
    """
    spawn_key = (*address(purpose, digest, batch), ROLES[role], part)
    return np.random.Generator(np.random.PCG64(np.random.SeedSequence(seed, spawn_key=spawn_key)))
