"""What is already there where a run is to be sampled into: its own batches, or another run's."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

from pairmc.errors import InputError, Problem, ResultFileError
from pairmc.results.load import batches_in, read_attributes, run_settings
from pairmc.runfile.digest import canonical, differing_keys
from pairmc.runfile.run import RunFile
from pairmc.running.parts import DamagedPartError, Parts

_ANOTHER_PLACE = "name another file with --into, or move that one away"


def stored_batches(run: RunFile, path: Path) -> int:
    """Return how many batches of this run a result file holds; 0 where there is none.

    Raises
    ------
    InputError
        Where the file is another run's, naming the key that differs; or no result at all.
    """
    if not path.exists():
        return 0
    try:
        settings = run_settings(read_attributes(path))
    except ResultFileError as error:
        (problem,) = error.problems
        allowed = "a new name, or a result of the same run"
        raise InputError(replace(problem, allowed=allowed, advice=_ANOTHER_PLACE)) from error
    _refuse_other_run(run, str(path), "the result of another run", settings)
    return batches_in(path)


def usable_parts(run: RunFile, parts: Parts, warn: Callable[[str], None]) -> list[int]:
    """Return the finished batches of this run; damaged ones are named, deleted and drawn again.

    Raises
    ------
    InputError
        Where they are another run's, naming the key that differs.
    """
    usable = []
    for batch in parts.finished():
        try:
            _, made = parts.read(batch)
        except DamagedPartError as error:
            warn(f"{parts.path(batch)} is damaged ({error}); the batch is drawn again")
            parts.discard(batch)
            continue
        words = "unfinished batches of another run"
        _refuse_other_run(run, str(parts.folder), words, made["settings"])
        usable.append(batch)
    return usable


def _refuse_other_run(run: RunFile, place: str, words: str, settings: dict[str, Any]) -> None:
    differing = differing_keys(settings, canonical(run))
    if not differing:
        return
    key, theirs, mine = differing[0]
    others = len(differing) - 1
    more = f" (and {others} more {'key differs' if others == 1 else 'keys differ'})"
    raise InputError(
        Problem(
            place,
            f"{words}: {key} is {theirs} there and {mine} here{more if others else ''}",
            "",
            _ANOTHER_PLACE,
        )
    )
