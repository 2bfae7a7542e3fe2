"""The loop over missing batches."""

from __future__ import annotations

import threading
from concurrent.futures import Future, ThreadPoolExecutor
from typing import Any

import numpy as np
import pytest

from pairmc.errors import BatchError
from pairmc.running.campaign import missing_batches, run_batches


def test_missing_batches_are_those_not_finished() -> None:
    assert missing_batches(5, [3, 0, 7]) == [1, 2, 4]
    assert missing_batches(2, [0, 1]) == []


def work(number: int) -> dict[str, Any]:
    if number == 6:
        raise ZeroDivisionError("planted")
    return {"n": np.array(number)}


@pytest.mark.parametrize("workers", [1, 3])
def test_every_batch_is_handed_on_once(workers: int) -> None:
    with ThreadPoolExecutor(workers) as executor:
        outcome = dict(run_batches([0, 2, 3, 5], work, executor, 2 * workers))
    assert {number: int(arrays["n"]) for number, arrays in outcome.items()} == {
        0: 0, 2: 2, 3: 3, 5: 5,
    }  # fmt: skip


def test_a_failing_batch_is_named_and_those_before_it_are_kept() -> None:
    with ThreadPoolExecutor(1) as executor:
        outcomes = run_batches([4, 5, 6, 7], work, executor, 2)
        assert [next(outcomes)[0], next(outcomes)[0]] == [4, 5]
        with pytest.raises(BatchError, match="batch 6 failed") as error:
            next(outcomes)
    assert "ZeroDivisionError: planted" in str(error.value)


def test_no_more_batches_are_submitted_than_the_window_holds() -> None:
    waiting: list[Future] = []
    most = 0
    lock = threading.Lock()

    class Counting(ThreadPoolExecutor):
        def submit(self, *arguments: Any, **words: Any) -> Future:
            nonlocal most
            future = super().submit(*arguments, **words)
            with lock:
                waiting.append(future)
                most = max(most, sum(not each.done() for each in waiting))
            return future

    with Counting(2) as executor:
        assert len(list(run_batches(range(50), lambda n: {"n": np.array(n)}, executor, 4))) == 50
    assert most <= 4
