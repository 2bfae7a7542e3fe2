"""The lines of keys: whatever way TOML lets them be written."""

import tomllib
from collections.abc import Iterator
from pathlib import Path

import pytest

from pairmc.runfile.lines import key_lines

RUNS = Path(__file__).parents[2] / "runs"


def test_keys_in_all_their_forms() -> None:
    text = '''\
title = """
[gas]
dimension = 1  # inside a text
""" # outside
other = 'a # b = c'

[ gas ] # a comment with = and [x]
dimension = 1.5e-3
"quoted key" = "a \\" b = [" # = ]
'single' = 1979-05-27 07:32:00
particles = { up = 1, down = { x = [1, { y = 2 }], z = 3 } }
list = [
  1,
  # a = 3
  { inner = 4 },
  "]",
]
sub.total = "x"
[[rows]]
a = 1
[[rows]]
b = 2
[observables . "pair_correlation"]
bins = 80'''
    tomllib.loads(text)
    assert key_lines(text) == {
        ("title",): 1,
        ("other",): 5,
        ("gas",): 7,
        ("gas", "dimension"): 8,
        ("gas", "quoted key"): 9,
        ("gas", "single"): 10,
        ("gas", "particles"): 11,
        ("gas", "particles", "up"): 11,
        ("gas", "particles", "down"): 11,
        ("gas", "particles", "down", "x"): 11,
        ("gas", "particles", "down", "z"): 11,
        ("gas", "list"): 12,
        ("gas", "list", 1, "inner"): 15,
        ("gas", "sub"): 18,
        ("gas", "sub", "total"): 18,
        ("rows",): 19,
        ("rows", "a"): 20,
        ("rows", "b"): 22,
        ("observables",): 23,
        ("observables", "pair_correlation"): 23,
        ("observables", "pair_correlation", "bins"): 24,
    }


@pytest.mark.parametrize("ends", ["\n", "\r\n"])
def test_line_ends(ends: str) -> None:
    assert key_lines(ends.join(["a = 1", "", "[b]", "c = 2"]))[("b", "c")] == 4


@pytest.mark.parametrize("text", ["", "\n\n", "# only this", "a = ''", 'a = """"b"""""'])
def test_short_texts(text: str) -> None:
    assert set(key_lines(text)) == {(key,) for key in tomllib.loads(text)}


def paths(table: dict[str, object], above: tuple[str, ...] = ()) -> Iterator[tuple[str, ...]]:
    for key, value in table.items():
        yield (*above, key)
        if isinstance(value, dict):
            yield from paths(value, (*above, key))


@pytest.mark.parametrize("file", sorted(RUNS.glob("*.toml")), ids=lambda file: file.stem)
def test_every_key_of_the_committed_runs_is_found(file: Path) -> None:
    text = file.read_text()
    lines = key_lines(text)
    found = list(paths(tomllib.loads(text)))
    assert set(lines) == set(found)
    for path in found:
        assert path[-1] in text.split("\n")[lines[path] - 1]
