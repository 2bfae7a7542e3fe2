"""How a refusal is worded: what was given, the key it stands under, the nearest known word."""

from __future__ import annotations

import json
import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from difflib import get_close_matches

from pairmc.errors import Problem
from pairmc.runfile.lines import Path

_LONGEST = 60  # characters of a value that a message repeats


@dataclass(frozen=True)
class Refusal:
    """Why one value is refused: what was given, what is allowed, what to do.

    Parameters
    ----------
    got, allowed, advice
        As in `pairmc.errors.Problem`.
    at
        Where below the key, for a value that has parts.
    """

    got: str
    allowed: str = ""
    advice: str = ""
    at: Path = ()


class RefusedError(ValueError):
    """A value is refused, for one or more reasons."""

    def __init__(self, *refusals: Refusal) -> None:
        self.refusals = refusals
        super().__init__(*refusals)


@dataclass(frozen=True)
class Finding:
    """A refusal and where in the document it stands.

    Parameters
    ----------
    path
        Path of the key or table.
    refusal
        Why it is refused.
    table
        True where the path names a table.
    meant
        Path of the known key that was probably meant, for an unknown one.
    """

    path: Path
    refusal: Refusal
    table: bool = False
    meant: Path = ()

    def problem(self, lines: dict[Path, int]) -> Problem:
        """Return the problem a user sees; the line is that of the key, or else of its table."""
        refusal = self.refusal
        path = (*self.path, *refusal.at)
        known = (lines[path[:k]] for k in range(len(path), 0, -1) if path[:k] in lines)
        line = next(known, None)
        key = key_in_words(path)
        if self.table and not key.startswith("["):
            key = f"[{key}]"
        return Problem(key, refusal.got, refusal.allowed, refusal.advice, line)


def refuse(got: object, allowed: str, advice: str = "") -> RefusedError:
    """Return the error that refuses the value `got`."""
    return RefusedError(Refusal(value_in_words(got), allowed, advice))


def not_yet(got: object, served: str, advice: str, name: str = "") -> RefusedError:
    """Return the error for a value that is known, and not served by this release.

    Parameters
    ----------
    got
        What was given.
    served
        What this release serves instead.
    advice
        What to do meanwhile.
    name
        What is not yet available; what was given, where empty.
    """
    text = value_in_words(got)
    waiting = f"{name or text} is not yet available in this release"
    return RefusedError(Refusal(text, f"{served} ({waiting})", advice))


def value_in_words(value: object) -> str:
    """Return a value as a run file would spell it, shortened where long."""
    match value:
        case bool():
            return str(value).lower()
        case int() if abs(value) >= 10**_LONGEST:
            return "an integer of more than 60 digits"
        case int() | float():
            return repr(value)
        case str():
            text = json.dumps(value, ensure_ascii=False)
            return text if len(text) <= _LONGEST else f'{text[: _LONGEST - 1]}…"'
        case dict():
            return "a table" if value else "an empty table"
        case list() if any(isinstance(part, list | dict) for part in value):
            return f"a list of {'tables' if isinstance(value[0], dict) else 'lists'}"
        case list():
            text = f"[{', '.join(value_in_words(part) for part in value[:12])}]"
            whole = len(value) <= 12 and len(text) <= _LONGEST
            return text if whole else f"a list of {len(value)} values"
    return str(value)[:_LONGEST]


def key_in_words(path: Path) -> str:
    """Return a key with its table in front: ``[gas] particles.up``, ``[scan]``, ``title``."""
    words = tuple(_spell(str(part)) for part in path)
    if path[:1] == ("observables",) and len(path) > 1:
        return " ".join((f"[{'.'.join(words[:2])}]", ".".join(words[2:]))).rstrip()
    if path[0] in TABLES:
        return " ".join((f"[{words[0]}]", ".".join(words[1:]))).rstrip()
    return ".".join(words)


def nearest(word: str, known: Iterable[str]) -> str:
    """Return the known word nearest to `word`, or nothing."""
    known = tuple(known)
    alike = [name for name in known if _plain(name) == _plain(word)]
    near = alike or get_close_matches(word[:_LONGEST].lower(), known, 1)
    return near[0] if near else ""


def did_you_mean(word: str, known: Iterable[str]) -> str:
    """Return ``did you mean X?`` for the known word nearest to `word`, or nothing."""
    near = nearest(word, known)
    return f"did you mean {near}?" if near else ""


TABLES = (
    "gas",
    "spin",
    "confinement",
    "occupation",
    "sampling",
    "observables",
    "detection",
    "scan",
)


def _plain(word: str) -> str:
    return re.sub(r"[-_ ]", "", word.lower())


def _spell(part: str) -> str:
    """Return one part of a key, in quotes where TOML wants them."""
    if re.fullmatch(r"[A-Za-z0-9_-]{1,60}", part):
        return part
    return value_in_words(part)


def numbers_in_words(numbers: Sequence[int]) -> str:
    """Return quantum numbers as they are written in a run file."""
    return value_in_words(list(numbers))


def counted(number: int, what: str) -> str:
    """Return a number of things: 1 orbital, 2 orbitals."""
    return f"{number} {what}" if number == 1 else f"{number} {what}s"
