"""Parts are stored whole or not at all, and damage is seen."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from pairmc.files import write_whole
from pairmc.running.parts import DamagedPartError, Parts

ARRAYS = {"a.count": np.arange(12).reshape(3, 4), "kept.position": np.ones((2, 3), np.float32)}
MADE = {"digest": "ab", "numpy": "2"}


@pytest.fixture
def parts(tmp_path: Path) -> Parts:
    parts = Parts(tmp_path / "run.nc.parts")
    parts.write(5, ARRAYS, MADE)
    return parts


def test_a_part_is_read_as_it_was_written(parts: Parts) -> None:
    arrays, made = parts.read(5)
    assert made == MADE
    assert set(arrays) == set(ARRAYS)
    for name, array in ARRAYS.items():
        np.testing.assert_array_equal(arrays[name], array)
        assert arrays[name].dtype == array.dtype


def test_finished_batches_are_those_with_a_file(parts: Parts) -> None:
    parts.write(2, ARRAYS, MADE)
    (parts.folder / "batch-note.npz").write_text("not a part")
    assert parts.finished() == [2, 5]
    assert Parts(parts.folder / "nowhere").finished() == []


def test_every_flipped_bit_and_every_truncation_is_seen(parts: Parts) -> None:
    whole = parts.path(5).read_bytes()
    rng = np.random.default_rng(3)
    for place in rng.integers(0, len(whole), 60):
        spoilt = bytearray(whole)
        spoilt[place] ^= 1 << int(rng.integers(8))
        parts.path(5).write_bytes(spoilt)
        try:
            arrays, made = parts.read(5)
        except DamagedPartError:
            continue
        # bits that carry nothing (dates in the archive's list) may flip unseen
        assert made == MADE
        assert all(np.array_equal(arrays[name], ARRAYS[name]) for name in ARRAYS)
    for length in (0, 1, len(whole) // 2, len(whole) - 1):
        parts.path(5).write_bytes(whole[:length])
        with pytest.raises(DamagedPartError):
            parts.read(5)


def test_a_part_under_another_number_is_damaged(parts: Parts) -> None:
    parts.path(5).rename(parts.path(6))
    with pytest.raises(DamagedPartError, match="checksum"):
        parts.read(6)


def test_removing_leaves_foreign_files(parts: Parts) -> None:
    (parts.folder / "note.txt").write_text("mine")
    parts.remove(9)
    assert [path.name for path in parts.folder.iterdir()] == ["note.txt"]
    (parts.folder / "note.txt").unlink()
    parts.remove(9)
    assert not parts.folder.exists()


def test_a_failing_write_leaves_the_old_file_and_no_leftover(tmp_path: Path) -> None:
    path = tmp_path / "result.nc"
    path.write_text("old")

    def fail(temporary: Path) -> None:
        temporary.write_text("half")
        raise OSError("disk full")

    with pytest.raises(OSError, match="disk full"):
        write_whole(path, fail)
    assert path.read_text() == "old"
    assert [each.name for each in tmp_path.iterdir()] == ["result.nc"]


def test_what_a_crash_left_is_cleaned(parts: Parts) -> None:
    (parts.folder / ".batch-0000007.npz.unfinished-123").write_text("half")
    assert parts.finished() == [5]
    parts.clean()
    assert [path.name for path in parts.folder.iterdir()] == ["batch-0000005.npz"]
