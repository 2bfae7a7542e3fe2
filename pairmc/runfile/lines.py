"""Which line each key of a TOML text stands on."""

from __future__ import annotations

import re
import tomllib
from bisect import bisect_right
from collections.abc import Iterator
from itertools import count
from typing import NamedTuple

Path = tuple[str | int, ...]

_DEEPEST = 4  # parts of a path that are noted

_TOKEN = re.compile(
    r'(?P<string>"""(?:\\.|[^\\])*?"{3,5}|\'\'\'.*?\'{3,5}|"(?:\\.|[^"\\\n])*"|\'[^\'\n]*\')'
    r"|(?P<skip>[ \t\r]+|#[^\n]*)"
    r"|(?P<mark>[][{}=,.\n])"
    r"|(?P<bare>[^][{}=,.\s#\"']+)",
    re.DOTALL,
)


class _Token(NamedTuple):
    kind: str
    text: str
    start: int


def key_lines(text: str) -> dict[Path, int]:
    """Return the line, from 1, on which each key and table of the text is first named.

    Parameters
    ----------
    text
        Valid TOML. Dotted keys, inline tables, arrays and quoted keys are followed.

    Returns
    -------
    dict
        Line by path: ``("gas", "particles", "up")``; members of arrays by their number from 0.
    """
    return _Scanner(text).lines


class _Scanner:
    """Reads the tokens once; values are stepped over but for the keys of inline tables."""

    def __init__(self, text: str) -> None:
        self.lines: dict[Path, int] = {}
        self._breaks = [match.start() for match in re.finditer("\n", text)]
        self._tokens = _tokens(text)
        self._token = next(self._tokens)
        self._read()

    def _next(self) -> _Token:
        token, self._token = self._token, next(self._tokens)
        return token

    def _at(self, *marks: str) -> bool:
        return self._token.kind in ("mark", "end") and self._token.text in marks

    def _read(self) -> None:
        table: Path = ()
        while not self._at(""):
            if self._at("\n"):
                self._next()
            elif self._at("["):
                while self._at("["):
                    self._next()
                table = self._key(())
                while self._at("]"):
                    self._next()
            else:
                self._pair(table)

    def _key(self, table: Path) -> Path:
        """Read a dotted key below `table` and note its line under each of its parts."""
        line = bisect_right(self._breaks, self._token.start) + 1
        path = table
        while not self._at("=", "]", ""):
            token = self._next()
            if token.text != "." and len(path) <= _DEEPEST:
                path = (*path, _name(token))
                if len(path) <= _DEEPEST:
                    self.lines.setdefault(path, line)
        return path

    def _pair(self, table: Path) -> None:
        path = self._key(table)
        self._next()
        self._value(path)

    def _value(self, path: Path) -> None:
        if self._at("{"):
            self._next()
            while not self._at("}", ""):
                if self._at(",", "\n"):
                    self._next()
                else:
                    self._pair(path)
            self._next()
        elif self._at("["):
            self._next()
            members = count()
            while not self._at("]", ""):
                if self._at(",", "\n"):
                    self._next()
                else:
                    self._value((*path, next(members)))
            self._next()
        else:
            self._next()
            while not self._at("\n", ",", "]", "}", ""):
                self._next()


def _tokens(text: str) -> Iterator[_Token]:
    for match in _TOKEN.finditer(text):
        kind = str(match.lastgroup)
        if kind != "skip":
            yield _Token(kind, match[0], match.start())
    while True:
        yield _Token("end", "", len(text))


def _name(token: _Token) -> str:
    if token.kind == "bare":
        return token.text
    return str(tomllib.loads(f"key = {token.text}")["key"])
