"""Finished batches on disk: one small file each, until they are folded into the result."""

from __future__ import annotations

import hashlib
import json
import shutil
from pathlib import Path
from typing import Any

import numpy as np

from pairmc.files import remove_unfinished, write_whole
from pairmc.running.batch import Arrays


class DamagedPartError(Exception):
    """A part cannot be read back as it was written."""


class Parts:
    """The folder of finished batches of one result file.

    Parameters
    ----------
    folder
        Made when the first batch is written.
    """

    def __init__(self, folder: Path) -> None:
        self.folder = folder

    def path(self, batch: int) -> Path:
        """Return the file of a batch."""
        return self.folder / f"batch-{batch:07d}.npz"

    def finished(self) -> list[int]:
        """Return the numbers of the batches that have a file, ascending."""
        if not self.folder.is_dir():
            return []
        return sorted(
            int(path.stem.removeprefix("batch-"))
            for path in self.folder.glob("batch-*.npz")
            if path.stem.removeprefix("batch-").isdigit()
        )

    def write(self, batch: int, arrays: Arrays, made: dict[str, Any]) -> None:
        """Store a finished batch: whole or not at all.

        Parameters
        ----------
        batch
            Its number.
        arrays
            What the batch returned.
        made
            What made it: the run's settings, versions, processor.
        """
        self.folder.mkdir(exist_ok=True)
        head = {"batch": batch, "checksum": checksum(arrays), "made": made}
        stored = arrays | {"head": np.array(json.dumps(head))}

        def save(path: Path) -> None:
            with path.open("wb") as file:
                np.savez(file, allow_pickle=False, **stored)

        write_whole(self.path(batch), save)

    def read(self, batch: int) -> tuple[Arrays, dict[str, Any]]:
        """Return a finished batch and what made it.

        Raises
        ------
        DamagedPartError
            Where the file is not what was written.
        """
        try:
            with (
                self.path(batch).open("rb") as file,
                np.load(file, allow_pickle=False) as stored,
            ):
                arrays: Arrays = {name: stored[name] for name in stored.files}
            head: dict[str, Any] = json.loads(str(arrays.pop("head")))
            intact = head["batch"] == batch and head["checksum"] == checksum(arrays)
            made: dict[str, Any] = head["made"]
        except Exception as error:  # a flipped bit can make the readers fail in any way
            raise DamagedPartError(f"{type(error).__name__}: {error}") from error
        if not intact:
            raise DamagedPartError("its checksum does not fit")
        return arrays, made

    def discard(self, batch: int) -> None:
        """Delete the file of one batch."""
        self.path(batch).unlink(missing_ok=True)

    def clean(self) -> None:
        """Delete what crashed writers left."""
        if self.folder.is_dir():
            remove_unfinished(self.folder)

    def remove(self, batches: int) -> None:
        """Delete the parts of batches below `batches`, and the folder if nothing else is in it."""
        if not self.folder.is_dir():
            return
        for batch in self.finished():
            if batch < batches:
                self.discard(batch)
        self.clean()
        if not any(self.folder.iterdir()):
            shutil.rmtree(self.folder)


def checksum(arrays: Arrays) -> str:
    """Return a hash of names, types, shapes and contents."""
    digest = hashlib.sha256()
    for name in sorted(arrays):
        part = np.ascontiguousarray(arrays[name])
        digest.update(f"{name} {part.dtype.str} {part.shape};".encode())
        digest.update(part.tobytes())
    return digest.hexdigest()
