"""The global p-values of right runs are uniform. Minutes long: ``pytest -m slow``.

The seeds, 1 to 20, were chosen before looking. Bounds: Kolmogorov–Smirnov p > 1e-3, smallest
p-value > 5e-6 (a false alarm in one of 10⁴ such sets of 20).
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from scipy import stats

import pairmc

RUNS = Path(__file__).parent.parent.parent / "runs"


@pytest.mark.slow
@pytest.mark.parametrize("name", ["quickstart", "electron_gas", "ring", "polarised_gas"])
def test_global_p_values_of_right_runs_are_uniform(name: str) -> None:
    run = pairmc.read_run_file(RUNS / f"{name}.toml")
    p_values = np.array(
        [
            float(pairmc.sample(run.with_seed(seed))["pair_correlation_p_value"])
            for seed in range(1, 21)
        ]
    )
    print(f"{name}: {np.array2string(np.sort(p_values), precision=3)}")
    uniform = stats.kstest(p_values, "uniform")
    print(f"Kolmogorov–Smirnov p = {uniform.pvalue:.3f}, smallest {p_values.min():.2g}")
    assert uniform.pvalue > 1e-3
    assert p_values.min() > 5e-6
