"""Streams of random numbers: a pure function of their address, and of all of it."""

from __future__ import annotations

from collections import Counter

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pairmc.streams import PURPOSES, ROLES, address, generator

DIGEST = "0123456789abcdef" * 4
HERE = {"seed": 7, "purpose": "sample", "digest": DIGEST, "batch": 3, "role": "position", "part": 1}


def first(**changes: object) -> tuple[int, ...]:
    """Return the first four words of the stream at an address."""
    return tuple(generator(**(HERE | changes)).integers(0, 2**64, 4, dtype=np.uint64).tolist())


def test_the_same_address_gives_the_same_numbers():
    assert first() == first()
    assert np.array_equal(generator(**HERE).random(1000), generator(**HERE).random(1000))


@pytest.mark.parametrize(
    "changes",
    [
        {"seed": 8},
        {"seed": 7 + 2**32},
        {"seed": 7 + 2**64},
        {"seed": 7 + 2**127},
        {"purpose": "reference"},
        {"digest": DIGEST[:-1] + "e"},
        {"digest": "1" + DIGEST[1:]},
        {"digest": DIGEST[8:] + DIGEST[:8]},
        {"batch": 4},
        {"batch": 3 + 2**32},
        {"role": "occupation"},
        {"part": 0},
        {"batch": 1, "part": 3},
    ],
)
def test_every_element_changes_the_stream(changes):
    assert first(**changes) != first()
    # not the same numbers a few places on, either
    assert not set(first(**changes)) & set(generator(**HERE).integers(0, 2**64, 200, np.uint64))


def test_no_two_addresses_share_a_stream():
    """6,144 addresses and 64 random bits each: chance alone would give a collision in 10¹²."""
    seen: Counter[int] = Counter()
    digests = [DIGEST, DIGEST[::-1], "0" * 64, "0" * 56 + "00000001"]
    for seed in (0, 1, 2**32, 2**128 - 1):
        for purpose in PURPOSES:
            for digest in digests:
                for batch in (0, 1, 2, 39, 40, 2**31):
                    for role in ROLES:
                        for part in range(4):
                            seen[
                                first(**_address(seed, purpose, digest, batch, role, part))[0]
                            ] += 1
    assert len(seen) == 4 * 4 * 4 * 6 * 4 * 4
    assert max(seen.values()) == 1


def _address(*values: object) -> dict[str, object]:
    return dict(zip(HERE, values, strict=True))


@settings(max_examples=60, deadline=None, derandomize=True)
@given(st.integers(0, 2**128 - 1), st.integers(0, 2**128 - 1))
def test_every_bit_of_a_seed_counts(one, other):
    assert (first(seed=one) == first(seed=other)) == (one == other)


def test_seeds_of_any_size():
    words = {first(seed=seed) for seed in (0, 2**64, 2**128 - 1, 2**128, 2**500)}
    assert len(words) == 5
    with pytest.raises(ValueError, match="non-negative"):
        first(seed=-1)


def test_address_is_purpose_digest_and_batch():
    words = address("bootstrap", "00000001ffffffff", 12)
    assert words == (PURPOSES["bootstrap"], 1, 2**32 - 1, 12)


def test_the_generator_is_a_stated_one():
    """The stream as numpy documents it, so that it can be had without this package."""
    spawn_key = (*address("sample", DIGEST, 3), ROLES["position"], 1)
    sequence = np.random.SeedSequence(entropy=7, spawn_key=spawn_key)
    assert np.array_equal(
        np.random.Generator(np.random.PCG64(sequence)).random(9), generator(**HERE).random(9)
    )


def test_unknown_purposes_and_roles_are_errors():
    with pytest.raises(KeyError):
        first(purpose="sampling")
    with pytest.raises(KeyError):
        first(role="positions")


def test_purposes_and_roles_keep_their_numbers():
    """Renumbering would silently change every run's snapshots."""
    assert PURPOSES == {"sample": 0, "reference": 1, "calibration": 2, "bootstrap": 3}
    assert ROLES == {"position": 0, "occupation": 1, "twist": 2, "detection": 3}
