"""What all tests share: small runs, one thread for linear algebra, no deadlines on examples."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import hypothesis
import pytest
import xarray as xr

from pairmc.results.sample import sample_into
from pairmc.runfile.read import read_run_text
from pairmc.runfile.run import RunFile
from pairmc.running.batch import limit_blas_threads

hypothesis.settings.register_profile("pairmc", deadline=None)
hypothesis.settings.load_profile("pairmc")

# Two unequal components in an uneven box, both shells closed.
SMALL = """
title = "Small sheet"

[gas]
dimension = 2
particles = { up = 9, down = 5 }
total_density = "1.1 / um^2"
mass = "6.015 u"

[sampling]
snapshots = 400
batches = 8
seed = 11
keep_snapshots = 70

[observables.pair_correlation]
bins = 20
"""


@pytest.fixture(scope="session", autouse=True)
def one_thread() -> None:
    """Linear algebra with one thread, as in a run."""
    limit_blas_threads()


@pytest.fixture(scope="session")
def small_run() -> RunFile:
    """Return the small run."""
    return read_run_text(SMALL)


@pytest.fixture(scope="session")
def variant() -> Callable[..., RunFile]:
    """Return a function that reads the small run with some texts replaced."""

    def change(*replacements: tuple[str, str]) -> RunFile:
        text = SMALL
        for old, new in replacements:
            assert old in text
            text = text.replace(old, new)
        return read_run_text(text)

    return change


@pytest.fixture(scope="session")
def small_result(small_run: RunFile, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return the result file of the small run."""
    path = tmp_path_factory.mktemp("small") / "small.nc"
    sample_into(small_run, path)
    return path


def same_data(one: xr.Dataset, other: xr.Dataset) -> list[str]:
    """Return the variables in which two results differ, to the bit."""
    assert set(one.variables) == set(other.variables)
    return [
        str(name)
        for name in one.variables
        if one[name].values.tobytes() != other[name].values.tobytes()
    ]
