"""Sampling into a file: resumed equals uninterrupted, other runs' files are never touched."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

import pairmc
from pairmc.errors import InputError
from pairmc.results import fold as fold_module
from pairmc.results.load import load
from pairmc.results.sample import Progress, sample_into
from pairmc.runfile.run import RunFile
from pairmc.running.parts import Parts
from tests.conftest import same_data

Variant = Callable[..., RunFile]

SCHEMA_1_0 = Path(__file__).parent.parent / "data" / "schema-1.0.nc"


class PlannedStopError(Exception):
    """Raised where a test interrupts a run."""


def stop_after(batches: int) -> Callable[[Progress], None]:
    def report(progress: Progress) -> None:
        if progress.drawn == batches:
            raise PlannedStopError

    return report


def test_the_data_are_the_same_for_any_number_of_workers(
    small_run: RunFile, small_result: Path, tmp_path: Path
) -> None:
    for workers in (2, 5):
        sample_into(small_run, tmp_path / f"{workers}.nc", workers)
        assert same_data(load(tmp_path / f"{workers}.nc"), load(small_result)) == []


def test_resumed_equals_uninterrupted(
    small_run: RunFile, small_result: Path, tmp_path: Path
) -> None:
    path = tmp_path / "run.nc"
    with pytest.raises(PlannedStopError):
        sample_into(small_run, path, report=stop_after(3))
    parts = Parts(tmp_path / "run.nc.parts")
    assert parts.finished() == [0, 1, 2]
    assert not path.exists()
    drawn = []
    sample_into(small_run, path, report=lambda progress: drawn.append(progress.drawn))
    assert drawn[-1] == 5
    assert same_data(load(path), load(small_result)) == []
    assert [each.name for each in tmp_path.iterdir()] == ["run.nc"]


def test_a_damaged_part_is_named_and_drawn_again(
    small_run: RunFile, small_result: Path, tmp_path: Path
) -> None:
    path = tmp_path / "run.nc"
    with pytest.raises(PlannedStopError):
        sample_into(small_run, path, report=stop_after(3))
    damaged = Parts(tmp_path / "run.nc.parts").path(1)
    damaged.write_bytes(damaged.read_bytes()[:-40])
    said: list[str] = []
    sample_into(small_run, path, warn=said.append)
    assert len(said) == 1
    assert "batch-0000001.npz is damaged" in said[0]
    assert same_data(load(path), load(small_result)) == []


def test_a_complete_run_is_not_drawn_again(small_run: RunFile, small_result: Path) -> None:
    before = small_result.read_bytes()
    said: list[str] = []
    sample_into(small_run, small_result, warn=said.append)
    assert "holds all 8 batches already" in said[0]
    assert small_result.read_bytes() == before


def test_the_result_of_another_run_is_refused_and_left(
    variant: Variant, small_result: Path
) -> None:
    before = small_result.read_bytes()
    change, others = ("up = 9", "up = 13"), [("seed = 11", "seed = 12"), ("bins = 20", "bins = 21")]
    for more, words in enumerate(["here; name", "(and 1 more key differs)", "2 more keys differ"]):
        with pytest.raises(InputError, match=r"gas\.populations") as caught:
            sample_into(variant(change, *others[:more]), small_result)
        assert words in str(caught.value)
    assert small_result.read_bytes() == before


def test_the_parts_of_another_run_are_refused_and_left(
    variant: Variant, small_run: RunFile, tmp_path: Path
) -> None:
    path = tmp_path / "run.nc"
    with pytest.raises(PlannedStopError):
        sample_into(small_run, path, report=stop_after(2))
    with pytest.raises(InputError, match="unfinished batches of another run"):
        sample_into(variant(("seed = 11", "seed = 12")), path)
    assert Parts(tmp_path / "run.nc.parts").finished() == [0, 1]


@pytest.mark.parametrize("place", ["missing/run.nc", "."])
def test_a_place_that_cannot_be_written_is_refused(
    small_run: RunFile, tmp_path: Path, place: str
) -> None:
    with pytest.raises(InputError):
        sample_into(small_run, tmp_path / place)
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("contents", [b"junk", b"", b"\x89HDF\r\n\x1a\n and no more"])
def test_a_file_that_is_no_result_is_refused_and_left(
    small_run: RunFile, tmp_path: Path, contents: bytes
) -> None:
    path = tmp_path / "junk.nc"
    path.write_bytes(contents)
    with pytest.raises(InputError) as caught:
        sample_into(small_run, path)
    said = str(caught.value)
    assert f"{path}: got a file that cannot be read" in said
    assert said.endswith("name another file with --into, or move that one away")
    assert "Errno" not in said
    assert path.read_bytes() == contents
    assert list(tmp_path.iterdir()) == [path]


@pytest.mark.parametrize(("name", "got"), [("run.txt", '".txt"'), ("run", "without a suffix")])
def test_a_name_that_does_not_end_in_nc_is_refused_before_drawing(
    small_run: RunFile, tmp_path: Path, name: str, got: str
) -> None:
    with pytest.raises(InputError, match=got) as caught:
        sample_into(small_run, tmp_path / name)
    assert caught.value.problems[0].allowed == ".nc"
    assert list(tmp_path.iterdir()) == []


def test_labels_are_text_for_plain_xarray_too(small_result: Path) -> None:
    pairs, spins = ["up-up", "up-down", "down-down"], ["up", "down"]
    with xr.open_dataset(small_result) as plain:
        assert list(plain["pair"].values) == pairs
        assert list(plain["spin"].values) == spins
        assert plain["pair_correlation"].sel(pair="up-down").dims == ("separation",)
    for path in (small_result, SCHEMA_1_0):  # which names no encoding
        result = load(path)
        assert result["pair"].dtype.kind == result["spin"].dtype.kind == "U"
        assert list(result["pair"].values) == pairs


def test_parts_stay_until_the_result_has_been_read_back(
    small_run: RunFile, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def spoilt(path: Path, snapshots: bool = True) -> xr.Dataset:
        dataset = load(path, snapshots)
        dataset["pair_count"][3, 0, 5] += 1
        return dataset

    monkeypatch.setattr(fold_module, "load", spoilt)
    with pytest.raises(pairmc.errors.PairmcError, match="pair_count was not read back"):
        sample_into(small_run, tmp_path / "run.nc")
    assert len(Parts(tmp_path / "run.nc.parts").finished()) == 8
    assert not (tmp_path / "run.nc").exists()


def test_the_python_function_takes_a_path_and_keeps_nothing(
    small_result: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    text = load(small_result).attrs["run_file"]
    (tmp_path / "run.toml").write_text(text)
    result = pairmc.sample(tmp_path / "run.toml")
    assert same_data(result, load(small_result)) == []
    assert [each.name for each in tmp_path.iterdir()] == ["run.toml"]


def test_snapshots_can_be_drawn_without_a_file(small_run: RunFile) -> None:
    some = pairmc.draw_snapshots(small_run, 60)
    assert some["position"].shape == (60, 14, 2)
    few = pairmc.draw_snapshots(small_run, 7)
    np.testing.assert_array_equal(few["position"], some["position"][:7])
    other = pairmc.draw_snapshots(small_run, 7, seed=5)
    assert not np.isin(other["position"], some["position"]).any()
    for count in (0, -1, 2.5, True):
        with pytest.raises(InputError):
            pairmc.draw_snapshots(small_run, count)
