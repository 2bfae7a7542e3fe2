"""A result grows without being drawn again: more batches, --more, kept snapshots."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from pairmc.errors import InputError
from pairmc.results.load import load
from pairmc.results.sample import Progress, sample_into
from pairmc.runfile.run import RunFile
from pairmc.running.parts import Parts
from tests.conftest import same_data

Variant = Callable[..., RunFile]


class Recorder:
    """Remembers what it is told."""

    def __init__(self) -> None:
        self.said: list[str] = []
        self.drawn = 0

    def warn(self, message: str) -> None:
        self.said.append(message)

    def report(self, progress: Progress) -> None:
        self.drawn = progress.drawn


@pytest.fixture
def finished(small_result: Path, tmp_path: Path) -> Path:
    path = tmp_path / "run.nc"
    path.write_bytes(small_result.read_bytes())
    return path


def twelve(variant: Variant, *changes: tuple[str, str]) -> RunFile:
    """Return the small run with 12 instead of 8 batches of 50."""
    return variant(
        ("snapshots = 400", "snapshots = 600"), ("batches = 8", "batches = 12"), *changes
    )


def test_more_batches_of_the_same_size_extend(
    variant: Variant, finished: Path, tmp_path: Path
) -> None:
    recorder = Recorder()
    sample_into(twelve(variant), finished, report=recorder.report)
    assert recorder.drawn == 4
    sample_into(twelve(variant), tmp_path / "whole.nc")
    assert same_data(load(finished), load(tmp_path / "whole.nc")) == []
    assert len(load(finished).attrs["history"].splitlines()) == 2


def test_more_snapshots_are_rounded_up_and_that_is_said(
    variant: Variant, small_run: RunFile, finished: Path, tmp_path: Path
) -> None:
    recorder = Recorder()
    sample_into(small_run, finished, more=151, warn=recorder.warn, report=recorder.report)
    assert recorder.said == ["151 snapshots more are rounded up to 200: 4 batches of 50"]
    assert recorder.drawn == 4
    sample_into(twelve(variant), tmp_path / "whole.nc")
    assert same_data(load(finished), load(tmp_path / "whole.nc")) == []


def test_more_of_no_result_counts_from_the_runs_own_snapshots_and_says_so(
    small_run: RunFile, tmp_path: Path
) -> None:
    recorder = Recorder()
    path = tmp_path / "run.nc"
    sample_into(small_run, path, more=1, warn=recorder.warn, report=recorder.report)
    assert recorder.said == [
        "1 snapshot more is rounded up to 50: 1 batch of 50",
        "there is no result yet: the run's own 400 snapshots and 50 more are drawn",
    ]
    assert recorder.drawn == 9


def test_fewer_batches_leave_a_longer_result_as_it_is(
    variant: Variant, small_run: RunFile, finished: Path
) -> None:
    sample_into(twelve(variant), finished)
    before = finished.read_bytes()
    recorder = Recorder()
    sample_into(small_run, finished, warn=recorder.warn)
    assert "holds all 12 batches already" in recorder.said[0]
    assert finished.read_bytes() == before


@pytest.mark.parametrize("spelling", ["1.1 / um^2", "1.1e12 / m^2", "1.1e-6 nm^-2"])
def test_all_kept_snapshots_grow_too_whatever_the_units_spelling(
    variant: Variant, tmp_path: Path, spelling: str
) -> None:
    every = ("keep_snapshots = 70", 'keep_snapshots = "all"')
    path = tmp_path / "run.nc"
    sample_into(variant(every), path)
    longer = twelve(variant, every, ("1.1 / um^2", spelling))
    sample_into(longer, path)
    sample_into(longer, tmp_path / "whole.nc")
    grown, whole = load(path), load(tmp_path / "whole.nc")
    differing = same_data(grown, whole)
    assert differing in ([], ["position"])
    # another length unit: positions are converted, to single precision
    np.testing.assert_allclose(grown["position"], whole["position"], rtol=3e-7, atol=0)
    assert (differing == []) or spelling != "1.1 / um^2"
    assert grown.sizes["snapshot"] == 600


def test_an_interrupted_extension_goes_on(
    variant: Variant, small_run: RunFile, finished: Path, tmp_path: Path
) -> None:
    class PlannedStopError(Exception):
        pass

    def stop(progress: Progress) -> None:
        if progress.drawn == 2:
            raise PlannedStopError

    with pytest.raises(PlannedStopError):
        sample_into(small_run, finished, more=200, report=stop)
    parts = Parts(finished.with_name("run.nc.parts"))
    assert parts.finished() == [8, 9]
    recorder = Recorder()
    sample_into(small_run, finished, warn=recorder.warn)
    assert "holds 2 finished batches beyond them; --more takes them up" in recorder.said[1]
    assert parts.finished() == [8, 9]
    sample_into(small_run, finished, more=200, report=recorder.report)
    assert recorder.drawn == 2
    sample_into(twelve(variant), tmp_path / "whole.nc")
    assert same_data(load(finished), load(tmp_path / "whole.nc")) == []
    assert not parts.folder.exists()


def test_parts_that_the_result_holds_already_are_cleared_away(
    small_run: RunFile, finished: Path
) -> None:
    """A process may die after the result is in place and before its parts are gone."""
    parts = Parts(finished.with_name("run.nc.parts"))
    parts.write(3, {"a.count": np.zeros(1)}, {})
    sample_into(small_run, finished)
    assert not parts.folder.exists()


def test_another_batch_size_is_another_run(variant: Variant, finished: Path) -> None:
    before = finished.read_bytes()
    with pytest.raises(InputError, match=r"sampling\.batch_size is 50 there and 100 here"):
        sample_into(variant(("snapshots = 400", "snapshots = 800")), finished)
    assert finished.read_bytes() == before
