"""What the tests of run files share."""

from collections.abc import Callable

import pytest

from pairmc.errors import InputError, Problem
from pairmc.runfile.read import read_run_text

GAS = """\
[gas]
dimension = 2
particles = { up = 49, down = 37 }
"""


@pytest.fixture
def gas() -> str:
    """The shortest run file, three lines."""
    return GAS


@pytest.fixture
def problems() -> Callable[[str], tuple[Problem, ...]]:
    """Return a function that reads a text which must be refused, and gives the problems."""

    def read(text: str) -> tuple[Problem, ...]:
        with pytest.raises(InputError) as caught:
            read_run_text(text, "run.toml")
        assert caught.value.path == "run.toml"
        assert caught.value.exit_code == 2
        return caught.value.problems

    return read
