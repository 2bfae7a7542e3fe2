"""The global p-values of right runs are uniform. Minutes long: ``pytest -m slow``.

The seeds, 1 to 20, were chosen before looking. Bounds: Kolmogorov–Smirnov p > 1e-3, smallest
p-value > 5e-6 (a false alarm in one of 10⁴ such sets of 20).
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from scipy import stats

import pairmc
from pairmc.physics.observables import pair_correlation
from pairmc.physics.theory.pair_correlation import expected
from pairmc.results.audit import audit
from pairmc.runfile.read import read_run_text
from pairmc.runfile.run import RunFile
from pairmc.statistics import Moments

RUNS = Path(__file__).parent.parent.parent / "runs"
SEEDS = range(1, 21)
NAMES = (
    "quickstart",
    "electron_gas",
    "ring",
    "polarised_gas",
    "rotated_gas",
    "singlets",
    "warm_sheet",
    "twisted_sheet",
)


def check_uniform(name: str, p_values: list[float]) -> None:
    """Print the p-values and hold them against the uniform law."""
    print(f"{name}: {np.array2string(np.sort(p_values), precision=3)}")
    uniform = stats.kstest(p_values, "uniform")
    print(f"Kolmogorov–Smirnov p = {uniform.pvalue:.3f}, smallest {min(p_values):.2g}")
    assert uniform.pvalue > 1e-3
    assert min(p_values) > 5e-6


@pytest.mark.slow
@pytest.mark.parametrize("name", NAMES)
def test_global_p_values_of_right_runs_are_uniform(name: str) -> None:
    run = pairmc.read_run_file(RUNS / f"{name}.toml")
    results = (pairmc.sample(run.with_seed(seed)) for seed in SEEDS)
    check_uniform(name, [float(result["pair_correlation_p_value"]) for result in results])


@pytest.mark.slow
def test_the_two_ensembles_are_told_apart() -> None:
    text = (RUNS / "warm_sheet.toml").read_text()
    assert 'ensemble = "canonical"' in text
    canonical = read_run_text(text)
    grand = read_run_text(text.replace('ensemble = "canonical"', 'ensemble = "grand-canonical"'))
    for run, other in ((canonical, grand), (grand, canonical)):
        own, foreign = [], []
        for seed in SEEDS:
            result = pairmc.sample(run.with_seed(seed))
            own.append(float(result["pair_correlation_p_value"]))
            foreign.append(p_value_against(result, other))
        check_uniform(f"{run.gas.ensemble}, 0.5 T_F", own)
        print(f"  against the other ensemble's expectation: largest p-value {max(foreign):.2g}")
        assert max(foreign) < 1e-6


def p_value_against(result: xr.Dataset, run: RunFile) -> float:
    """Return the global p-value of a result's pairs against the expectation of another run."""
    system = run.system()
    grid = pair_correlation.grid(run.observables["pair_correlation"], system)
    counts = run.batch_size * pair_correlation.mean_counts(expected(system, grid), grid)
    moments = Moments(
        run.snapshots,
        result["pair_correlation_moment_sum"].values,
        result["pair_correlation_moment_product"].values,
    )
    return audit(grid, result["pair_count"].values, moments, counts).test.p_value
