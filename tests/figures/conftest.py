"""Small results of every kind that is drawn."""

from __future__ import annotations

from pathlib import Path

import pytest
import xarray as xr
from matplotlib.figure import Figure

from pairmc.figures.draw import draw
from pairmc.results.load import load
from pairmc.results.sample import sample_into
from pairmc.runfile.read import read_run_text

# Tables of run files: populations are uneven, so that a swap of components shows.
GASES = {
    "sheet": """
        title = "Thin sheet"
        gas = { dimension = 2, particles = { up = 9, down = 5 }, total_density = "1.1 / um^2" }
        sampling = { snapshots = 800, batches = 8 }
        observables.pair_correlation.bins = 20
    """,
    "electrons": """
        title = "Free electrons of a metal, drawn with a title that is so long that it takes more \
than one line of a journal's page, or even more than two"
        gas = { dimension = 3, particles = { up = 7, down = 7 }, r_s = 2 }
        sampling = { snapshots = 400, batches = 8 }
        observables.pair_correlation.bins = 30
    """,
    "ring": """
        title = "One component on a ring, drawn with a title that takes more than one line"
        gas = { dimension = 1, particles = { up = 7 } }
        sampling = { snapshots = 800, batches = 8 }
        observables.pair_correlation.bins = 25
    """,
    "polarised": """
        title = "Costs $5, or 50 % of $10 \\\\alpha_x^"
        gas = { dimension = 3, particles = { up = 7 }, fermi_wavenumber = "5.2 / um" }
        sampling = { snapshots = 400, batches = 8 }
        observables.pair_correlation.bins = 30
    """,
    "three": """
        title = "Three components"
        gas = { dimension = 2, particles = { nearest = 9, the_second_state = 5, \
the_third_states = 5 }, total_density = "2.5e12 / m^2" }
        sampling = { snapshots = 800, batches = 8 }
        observables.pair_correlation.bins = 20
    """,
    "open shell": """
        title = "An open shell"
        gas = { dimension = 2, particles = { up = 7, down = 3 }, total_density = "1.1 / um^2" }
        sampling = { snapshots = 400, batches = 8 }
        observables.pair_correlation.bins = 20
    """,
    "sparse": """
        title = "Next to nothing counted"
        gas = { dimension = 3, particles = { up = 7, down = 2 } }
        sampling = { snapshots = 16, batches = 8 }
        observables.pair_correlation.bins = 40
    """,
}


@pytest.fixture(scope="session")
def results(tmp_path_factory: pytest.TempPathFactory) -> dict[str, xr.Dataset]:
    """Return a small result of every kind, by name."""
    folder: Path = tmp_path_factory.mktemp("results")
    for name, text in GASES.items():
        sample_into(read_run_text(text), folder / f"{name}.nc")
    return {name: load(folder / f"{name}.nc") for name in GASES}


@pytest.fixture(scope="session", params=GASES)
def result(request: pytest.FixtureRequest, results: dict[str, xr.Dataset]) -> xr.Dataset:
    """Return each of the small results in turn."""
    return results[request.param]


@pytest.fixture(scope="session")
def figure(result: xr.Dataset) -> Figure:
    """Return the picture of each of the small results; a test only looks at it."""
    return draw([result])
