"""Named orbitals and pairs, from the run file to the result: what is stored, how it is drawn."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

import pairmc
from pairmc.errors import InputError
from pairmc.runfile.digest import digest
from pairmc.runfile.read import read_run_text
from tests.oracles import spinors

GAS = """
[gas]
dimension = 2
particles = {{ up = 5, down = 9 }}
total_density = "1.1 / um^2"
mass = "6.015 u"
{rest}

[sampling]
snapshots = 4000
batches = 40
seed = 31

[observables.pair_correlation]
bins = 20
"""

EXCITED = "[occupation]\nup = { displaced = [1, 0], emptied = [[1, 1]], filled = [[-1, 2]] }"


def result_of(rest: str) -> xr.Dataset:
    return pairmc.sample(read_run_text(GAS.format(rest=rest)))


def test_an_excited_determinant_follows_its_own_law_and_no_other() -> None:
    result = result_of(EXCITED)
    # one seed, chosen before looking
    assert float(result["pair_correlation_p_value"]) > 1e-4
    ground = result_of("")
    expected = result["pair_correlation_expected"] - ground["pair_correlation_expected"]
    # only up is excited, and unlike components stay independent
    assert np.abs(expected.sel(pair="up-up")).max() > 0.05
    assert np.abs(expected.sel(pair=["up-down", "down-down"])).max() == 0.0
    # the ground state's expectation does not fit the excited state's sample
    far = (result - ground)["pair_correlation"].sel(pair="up-up")
    assert np.abs(far / result["pair_correlation_error"].sel(pair="up-up")).max() > 8


def test_state_in_numbers_is_that_of_the_oracle() -> None:
    result = result_of(EXCITED)
    up = np.array([[0, 0], [1, -1], [1, 0], [2, 0], [-1, 2]])
    run = read_run_text(GAS.format(rest=""))
    down = run.system().occupations[1].orbitals.numbers
    state = spinors.listed_state((up, down), run.system().sides)
    scale = run.gas.units.kinetic
    assert float(result["total_energy"]) == pytest.approx(scale * state.energy, rel=1e-12)
    assert result["total_wave_vector"].values == pytest.approx(state.wave_vector, abs=1e-12)
    assert int(result["degeneracy"]) == state.same_energy
    assert float(result["excitation_energy"]) > 0
    assert float(result_of("")["excitation_energy"]) == pytest.approx(0.0, abs=1e-40)
    assert int(result_of("")["degeneracy"]) == 1


def test_naming_the_ground_state_changes_nothing() -> None:
    named = (
        "[occupation]\nup = [[0, 0], [1, 0], [-1, 0], [0, 1], [0, -1]]\n"
        "down = { emptied = [], filled = [] }"
    )
    with pytest.raises(InputError):
        read_run_text(GAS.format(rest=named))
    named = named.replace("down = { emptied = [], filled = [] }", "")
    one, other = read_run_text(GAS.format(rest=named)), read_run_text(GAS.format(rest=""))
    assert digest(one) == digest(other)
    left, right = pairmc.draw_snapshots(one, 5), pairmc.draw_snapshots(other, 5)
    assert np.array_equal(left["position"], right["position"])
    excited = read_run_text(GAS.format(rest=EXCITED))
    assert digest(excited) != digest(other)


PAIR = """
[gas]
dimension = 2
particles = { up = 1, down = 1 }
[spin]
rotation = "60 deg"
[confinement]
sides = [1.0, 1.5]
[occupation]
KIND = [[0, 0], [1, 1]]
[sampling]
snapshots = 8000
seed = 32
[observables.pair_correlation]
bins = 10
"""


@pytest.mark.parametrize(("kind", "fraction"), [("singlet", 1.0), ("triplet", 0.0)])
def test_pairs_follow_their_law(kind: str, fraction: float) -> None:
    result = pairmc.sample(read_run_text(PAIR.replace("KIND", kind)))
    assert float(result["pair_correlation_p_value"]) > 1e-4
    assert (result["singlet_fraction_expected"] == fraction).all()
    same = float(result["pair_count"].sel(pair=["up-up", "down-down"]).sum())
    every = float(result["pair_count"].sum())
    # of a triplet sin² 60° = 3/4 are seen in one component, of a singlet none; five standard errors
    assert same / every == pytest.approx(
        0.75 * (1 - fraction), abs=5 * 0.5 / np.sqrt(every) + 1e-12
    )
    other = pairmc.sample(read_run_text(PAIR.replace("KIND", "triplet" if fraction else "singlet")))
    assert not np.allclose(
        result["pair_correlation_expected"], other["pair_correlation_expected"], atol=0.2
    )
