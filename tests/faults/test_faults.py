"""The quick fault suite: a few of each kind. The long one: ``python -m tests.faults``."""

from __future__ import annotations

import signal
from pathlib import Path

import numpy as np
import pytest

from tests.faults import harness
from tests.faults.harness import Campaign, Tally


@pytest.fixture(scope="module")
def reference(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, float]:
    return harness.make_reference(tmp_path_factory.mktemp("reference"))


@pytest.fixture
def campaign(reference: tuple[Path, float], tmp_path: Path) -> Campaign:
    return Campaign(tmp_path, reference[0])


def test_kills_lose_nothing(campaign: Campaign, reference: tuple[Path, float]) -> None:
    tally = Tally("kill -9")
    rng = np.random.default_rng(20261201)
    harness.kill_at_random(campaign, tally, rng, 6, signal.SIGKILL, reference[1])
    assert tally.faults == 0, tally
    assert tally.runs_completed >= 1


def test_a_full_disk_loses_nothing(campaign: Campaign) -> None:
    tally = Tally("disk full")
    harness.fill_the_disk(campaign, tally, np.random.default_rng(7), 3)
    assert tally.faults == 0, tally


def test_spoilt_parts_are_drawn_again(campaign: Campaign, reference: tuple[Path, float]) -> None:
    tally = Tally("parts spoilt")
    harness.spoil_parts(campaign, tally, np.random.default_rng(8), 1, reference[1])
    assert tally.faults == 0, tally


def test_jumping_clocks_change_nothing(campaign: Campaign) -> None:
    tally = Tally("clock jumps")
    harness.let_the_clock_jump(campaign, tally, 1)
    assert tally.faults == 0, tally


def test_the_harness_sees_a_lost_batch_and_a_spoilt_file(campaign: Campaign) -> None:
    process = campaign.start()
    while len(campaign.parts.finished()) < 3:
        assert process.poll() is None
    process.kill()
    process.communicate()
    campaign.inspect(Tally("before"))
    first, second, *_ = campaign.parts.finished()
    campaign.parts.discard(first)
    campaign.parts.path(second).write_bytes(b"half")
    tally = Tally("planted")
    campaign.inspect(tally)
    assert (tally.finished_batches_lost, tally.unreadable_files) == (1, 1)
