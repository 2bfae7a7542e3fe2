"""Which batches are missing, and drawing them on whatever executor there is."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import FIRST_COMPLETED, Executor, Future, wait

from pairmc.errors import BatchError, PairmcError
from pairmc.running.batch import Arrays


def missing_batches(batches: int, finished: Iterable[int]) -> list[int]:
    """Return the numbers below `batches` that are not finished, ascending."""
    return sorted(set(range(batches)) - set(finished))


def run_batches(
    numbers: Iterable[int], work: Callable[[int], Arrays], executor: Executor, window: int
) -> Iterator[tuple[int, Arrays]]:
    """Draw batches and hand each on as it finishes.

    Parameters
    ----------
    numbers
        Batches to draw.
    work
        Draws one batch; runs on the executor.
    executor
        Any executor of the standard library's type.
    window
        At most this many batches are submitted at a time.

    Yields
    ------
    number, arrays
        In the order of finishing.

    Raises
    ------
    BatchError
        Where a batch failed; those that finished before have been handed on.
    """
    waiting = iter(numbers)
    running: dict[Future[Arrays], int] = {}
    try:
        while True:
            while len(running) < window and (number := next(waiting, None)) is not None:
                running[executor.submit(work, number)] = number
            if not running:
                return
            finished, _ = wait(running, return_when=FIRST_COMPLETED)
            for future in sorted(finished, key=running.__getitem__):
                number = running.pop(future)
                yield number, _outcome(future, number)
    finally:
        for future in running:
            future.cancel()


def _outcome(future: Future[Arrays], number: int) -> Arrays:
    """Return what a batch returned, or say which batch failed."""
    try:
        return future.result()
    except PairmcError:
        raise
    except Exception as error:
        raise BatchError(number, f"{type(error).__name__}: {error}") from error
