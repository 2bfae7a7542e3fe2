"""A batch is a pure function of a run and a number."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from pairmc.runfile.run import RunFile
from pairmc.running import batch as batch_module
from pairmc.running.batch import StoppedError, kept_in_batch, run_batch

Variant = Callable[..., RunFile]
OPEN = ("up = 9, down = 5", "up = 7, down = 6")


def same(one: dict, other: dict) -> bool:
    return set(one) == set(other) and all(np.array_equal(one[key], other[key]) for key in one)


@pytest.mark.parametrize("shells", ["closed", "open"])
def test_a_batch_is_the_same_whenever_it_is_drawn(variant: Variant, shells: str) -> None:
    run = variant(*([OPEN] if shells == "open" else []))
    first = run_batch(run, 3)
    run_batch(run, 4)
    assert same(first, run_batch(run, 3))


@pytest.mark.parametrize("shells", ["closed", "open"])
def test_how_many_snapshots_are_drawn_at_a_time_changes_nothing(
    variant: Variant, shells: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    run = variant(*([OPEN] if shells == "open" else []))
    whole = run_batch(run, 0)
    monkeypatch.setattr(batch_module, "_COORDINATES_AT_A_TIME", 200)
    assert batch_module.snapshots_at_a_time(run) == 7
    assert same(whole, run_batch(run, 0))


@pytest.mark.parametrize(
    "change",
    [
        ("1.1 / um^2", "1.2 / um^2"),
        ("seed = 11", "seed = 12"),
        ("up = 9, down = 5", "up = 9, other = 5"),
        ("snapshots = 400", "snapshots = 800"),
        ("bins = 20", "bins = 21"),
    ],
)
def test_what_is_in_the_digest_changes_every_draw(
    variant: Variant, change: tuple[str, str]
) -> None:
    one = run_batch(variant(), 0)["kept.position"]
    other = run_batch(variant(change), 0)["kept.position"]
    assert not np.isin(one, other).any()


def test_batches_and_components_share_no_numbers(small_run: RunFile) -> None:
    batches = [run_batch(small_run, number)["kept.position"] for number in range(2)]
    values = np.concatenate([part.ravel() for part in batches])
    # 24 bits of a float32: a handful of chance coincidences among 1960 numbers, 0.1 expected
    assert len(values) - len(np.unique(values)) <= 5


def test_the_kept_snapshots_are_those_with_the_lowest_index(variant: Variant) -> None:
    run = variant()
    assert [kept_in_batch(run, number) for number in range(8)] == [50, 20, 0, 0, 0, 0, 0, 0]
    assert run_batch(run, 1)["kept.position"].shape == (20, 14, 2)
    assert run_batch(run, 2)["kept.position"].shape == (0, 14, 2)
    every = variant(("keep_snapshots = 70", 'keep_snapshots = "all"'))
    assert [kept_in_batch(every, number) for number in range(8)] == [50] * 8


def test_tallies_are_those_of_the_kept_snapshots(variant: Variant) -> None:
    run = variant(("keep_snapshots = 70", 'keep_snapshots = "all"'))
    arrays = run_batch(run, 0)
    position = arrays["kept.position"].astype(float)
    system = run.system()
    edges = np.linspace(0, min(system.sides) / 2, 21)
    step = position[:, :9, None] - position[:, None, 9:]
    step -= np.round(step)
    separation = np.sqrt(((step * system.sides) ** 2).sum(axis=-1))
    # single precision may move a pair across an edge
    counted = np.histogram(separation, edges)[0]
    assert np.abs(counted - arrays["pair_correlation.count"][1]).max() <= 1
    assert counted.sum() == pytest.approx(arrays["pair_correlation.count"][1].sum(), abs=2)


def test_a_batch_stops_when_it_is_asked_to(small_run: RunFile) -> None:
    with pytest.raises(StoppedError):
        run_batch(small_run, 0, stop=lambda: True)
