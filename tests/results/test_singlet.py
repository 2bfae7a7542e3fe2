"""The singlet fraction in a result: the estimate from detected labels, and where it is refused."""

from __future__ import annotations

import numpy as np
import pytest

import pairmc
from pairmc.physics.grids import separation_grid
from pairmc.results.singlet import estimate
from pairmc.runfile.read import read_run_text
from tests.oracles import spinors

TEXT = """
[gas]
dimension = 2
particles = {{ {particles} }}
ensemble = "{ensemble}"
temperature = {temperature}
[spin]
rotation = "40 deg"
[confinement]
twist = {twist}
[sampling]
snapshots = 4000
batches = 40
seed = 41
[observables.pair_correlation]
bins = 12
"""


def run_of(particles, ensemble="canonical", temperature="0", twist='"none"'):
    return read_run_text(
        TEXT.format(particles=particles, ensemble=ensemble, temperature=temperature, twist=twist)
    )


@pytest.mark.parametrize(
    ("particles", "ensemble", "temperature", "twist", "reason"),
    [
        ("up = 9, down = 9", "canonical", "0", '"none"', ""),
        ("up = 9, down = 9", "canonical", "0", '"averaged"', ""),
        ("up = 9, down = 9", "grand-canonical", "0", '"averaged"', ""),
        ("up = 9, down = 9", "grand-canonical", '"0.5 T_F"', '"none"', ""),
        ("up = 9, down = 5", "canonical", "0", '"none"', "the populations differ"),
        ("up = 8, down = 8", "canonical", "0", '"none"', "more than one set"),
        ("up = 9, down = 9", "canonical", '"0.5 T_F"', '"none"', "more than one set"),
        ("up = 9, down = 9", "canonical", '"0.5 T_F"', '"averaged"', "more than one set"),
    ],
)
def test_an_estimate_is_given_where_rotations_change_nothing(
    particles, ensemble, temperature, twist, reason
):
    result = pairmc.sample(run_of(particles, ensemble, temperature, twist))
    exact = result["singlet_fraction_expected"]
    assert exact.values[0] > 0.85
    if reason:
        assert "singlet_fraction" not in result
        assert reason in exact.attrs["sampled_estimate"]
        return
    assert exact.attrs["sampled_estimate"] == "singlet_fraction"
    t = (result["singlet_fraction"] - exact) / result["singlet_fraction_error"]
    # 12 bins of 4 gases: |t| of 39 degrees of freedom passes 6 with a chance below 1e-4 in all
    assert np.abs(t).max() < 6.0


def test_the_expectation_is_that_of_the_oracle():
    run = run_of("up = 9, down = 5")
    system, grid = run.system(), separation_grid(run.system(), 12)
    sets = tuple(part.orbitals.numbers for part in system.occupations)
    angles = (np.arange(48) + 0.5) * 2 * np.pi / 48
    nodes, weights = np.polynomial.legendre.leggauss(8)
    found = pairmc.sample(run)["singlet_fraction_expected"].values
    for index in (0, 4, 11):
        low, high = grid.edges[index], grid.edges[index + 1]
        r = 0.5 * (low + high) + 0.5 * (high - low) * nodes
        vectors = r[:, None, None] * np.stack([np.cos(angles), np.sin(angles)], axis=-1)
        measure = np.repeat(weights * r, len(angles))
        points = vectors.reshape(-1, 2)
        sides = np.array(system.sides)
        within = spinors.singlet_pair_density(sets, points, sides)
        every = sum(
            spinors.pair_density(sets, 0.0, points, sides, (one, other))
            for one in (0, 1)
            for other in (0, 1)
        )
        assert found[index] == pytest.approx((measure @ within) / (measure @ every), rel=1e-6)


def test_bulk_goes_from_contact_to_a_quarter():
    result = pairmc.sample(run_of("up = 9, down = 9"))
    assert result["singlet_fraction_bulk"].values[0] == pytest.approx(1.0, abs=0.05)
    assert result["singlet_fraction_bulk"].values[-1] == pytest.approx(0.25, abs=0.02)


def test_no_error_is_zero_and_few_pairs_give_none():
    run = run_of("up = 9, down = 9")
    grid = separation_grid(run.system(), 3)
    counts = np.zeros((8, 3, 3), dtype=np.int64)
    counts[:, 1] = [40, 40, 1]
    counts[:, 0, 1] = counts[:, 2, 1] = 40
    value, error = estimate(counts, grid)
    # opposite labels only: a singlet; two in three alike: none
    assert value[:2] == pytest.approx([1.0, 0.0])
    assert error[0] > 0
    assert np.isnan(value[2])
    assert np.isnan(error[2])
