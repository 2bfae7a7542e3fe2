"""The time that remains rests on batches that were drawn with compiled kernels."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from pairmc.cli import progress
from pairmc.cli.progress import Pace, ProgressDisplay
from pairmc.results.sample import Progress
from pairmc.runfile.run import RunFile

COMPILATION = 30.0


@pytest.mark.parametrize("workers", [1, 2, 5])
def test_compilation_does_not_count(workers: int) -> None:
    """Workers finish side by side, a batch each in 3 s, after the kernels have been compiled."""
    pace = Pace(workers, start=0.0)
    for drawn in range(1, 4 * workers + 1):
        turn = -(-drawn // workers)
        now = COMPILATION + 3.0 * turn + 1e-3 * drawn
        pace.note(drawn, now)
        seconds = pace.seconds(drawn, now)
        if drawn < 2 * workers:
            assert seconds is None
        elif drawn % workers == 0:
            assert seconds == pytest.approx(3.0 / workers, rel=0.01)


def test_a_clock_that_stands_still_tells_nothing() -> None:
    pace = Pace(1, start=5.0)
    for drawn in (1, 2, 3):
        pace.note(drawn, 5.0)
        assert pace.seconds(drawn, 5.0) is None


@pytest.fixture
def said(
    small_run: RunFile, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> Callable[..., list[str]]:
    """Return a function that reports batches at given times and returns the lines shown."""

    def tell(*times: float, batches: int = 8, workers: int = 1) -> list[str]:
        now = iter([0.0, *times])
        monkeypatch.setattr(progress.time, "monotonic", lambda: next(now))
        with ProgressDisplay(small_run, 2, workers) as display:
            for drawn in range(len(times)):
                display.report(Progress(drawn, batches, drawn))
        return [line for line in capsys.readouterr().err.splitlines() if line.startswith("batch")]

    return tell


def test_no_time_is_told_before_there_is_a_base_for_it(said: Callable[..., list[str]]) -> None:
    assert said(0.0, 100.0, 102.0, 104.0) == [
        "batch 0 of 8",
        "batch 1 of 8",
        "batch 2 of 8, 25 snapshots/s, about 12 s remaining",
        "batch 3 of 8, 25 snapshots/s, about 10 s remaining",
    ]


def test_a_run_too_short_for_a_base_tells_its_rate_at_the_end(
    said: Callable[..., list[str]],
) -> None:
    assert said(0.0, 10.0, 20.0, batches=2, workers=2) == [
        "batch 0 of 2",
        "batch 1 of 2",
        "batch 2 of 2, 5 snapshots/s, start included",
    ]
