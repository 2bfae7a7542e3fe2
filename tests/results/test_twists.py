"""Results of runs with twisted boundaries: what they store, and that they grow to the bit.

The p-values are those of fixed seeds, each held against an equal share of FAMILY_ALPHA.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

import pairmc
from pairmc.physics.grids import separation_grid
from pairmc.physics.theory import energy
from pairmc.physics.theory.pair_correlation import at_twists
from pairmc.results.load import load
from pairmc.results.sample import Progress, sample_into
from pairmc.runfile.run import RunFile
from tests.conftest import same_data
from tests.oracles import twists

Variant = Callable[..., RunFile]

FAMILY_ALPHA = 1e-4
STATISTICAL_CHECKS = 5
ALPHA = FAMILY_ALPHA / STATISTICAL_CHECKS

# Ensemble and temperature.
STATES = (
    ("canonical", "0"),
    ("grand-canonical", "0"),
    ("canonical", '"0.4 T_F"'),
    ("grand-canonical", '"0.4 T_F"'),
)
SIDES = "[1.0, 1.5]"


class PlannedStopError(Exception):
    """Raised where a test interrupts a run."""


def run_of(
    variant: Variant,
    state: tuple[str, str],
    twist: str = '"averaged"',
    kept: str = '"all"',
    batches: int = 8,
) -> RunFile:
    """Return the small run, of open shells in an uneven box, with 50 snapshots a batch."""
    ensemble, temperature = state
    gas = f'temperature = {temperature}\nensemble = "{ensemble}"\n'
    box = f"[confinement]\nsides = {SIDES}\ntwist = {twist}\n"
    return variant(
        ("up = 9, down = 5", "up = 8, down = 4"),
        ("\n[sampling]\n", f"{gas}\n{box}\n[sampling]\n"),
        ("snapshots = 400", f"snapshots = {50 * batches}"),
        ("batches = 8", f"batches = {batches}"),
        ("keep_snapshots = 70", f"keep_snapshots = {kept}"),
    )


@pytest.fixture(scope="module", params=STATES, ids="-".join)
def averaged(
    request: pytest.FixtureRequest, variant: Variant, tmp_path_factory: pytest.TempPathFactory
) -> tuple[RunFile, Path]:
    """Return a run of every state and its result."""
    run = run_of(variant, request.param)
    path = tmp_path_factory.mktemp("averaged") / "run.nc"
    sample_into(run, path)
    return run, path


class TestWhatIsStored:
    def test_the_twists_drawn(self, averaged: tuple[RunFile, Path]) -> None:
        run, path = averaged
        result = load(path)
        stored = result["snapshot_twist"]
        assert stored.dims == ("snapshot", "axis")
        assert stored.shape == (400, 2)
        assert stored.attrs["units"] == "1"
        assert stored.attrs["long_name"]
        drawn = pairmc.draw_snapshots(run, 130)
        assert drawn["snapshot_twist"].dims == ("snapshot", "axis")
        np.testing.assert_array_equal(stored[:130], drawn["snapshot_twist"])
        assert np.all((stored >= -0.5) & (stored < 0.5))
        assert len(np.unique(stored)) == 800
        other = pairmc.draw_snapshots(run, 3, seed=5)
        assert not np.isin(other["snapshot_twist"], stored).any()

    def test_expectations_are_means_over_the_twists_drawn(
        self, averaged: tuple[RunFile, Path]
    ) -> None:
        run, path = averaged
        result, system = load(path), run.system()
        grid = separation_grid(system, 20)
        mean = at_twists(system, grid, result["snapshot_twist"].values)
        exact = result["pair_correlation_expected"]
        np.testing.assert_allclose(exact, mean.mean(axis=0), rtol=1e-10, atol=1e-12)
        counts = result["pair_count_expected"]
        assert counts.dims == ("batch", "pair", "separation")
        batches = mean.reshape(8, 50, *mean.shape[1:]).sum(axis=1) * grid.ideal
        np.testing.assert_allclose(counts, batches, rtol=1e-10, atol=1e-12)
        assert np.ptp(counts.sel(pair="up-up").values, axis=0).max() > 0
        totals = energy.at_twists(system, result["snapshot_twist"].values).mean(axis=0)
        bulk = energy.bulk_per_particle(run.gas)
        found = result["energy_per_particle"] / result["energy_per_particle_bulk"]
        np.testing.assert_allclose(found, totals / run.gas.populations / bulk, rtol=1e-10)

    def test_expectations_against_the_oracle(self, averaged: tuple[RunFile, Path]) -> None:
        """Up-up and up-down in the outermost bins, at the twists of the first batch."""
        run, path = averaged
        result, gas = load(path), run.gas
        law = "fixed" if gas.ensemble == "canonical" else "following"
        sides, T = run.system().sides, gas.thermal_energy
        edges = 0.5 * min(sides) * np.array([0.9, 0.95, 1.0])
        some = result["snapshot_twist"].values[: 50 if T == 0 else 5]
        up, down = (
            [twists.filled(sides, twist, n, T, law) for twist in some] for n in gas.populations
        )
        exact = np.array([filling.pair_correlation(edges, 8) for filling in up])
        unlike = np.array([a.population * b.population / 32 for a, b in zip(up, down, strict=True)])
        grid = separation_grid(run.system(), 20)
        if T:  # two many-body sums a twist: compared at a few twists, not through the file
            found = at_twists(run.system(), grid, some)
            assert found[:, 0, -2:] == pytest.approx(exact, abs=1e-5)
            assert found[:, 1, -1] == pytest.approx(unlike, abs=1e-5)
            return
        counts = result["pair_count_expected"].values[0] / grid.ideal
        assert counts[0, -2:] == pytest.approx(exact.sum(axis=0), abs=1e-8)
        assert counts[1, -2:] == pytest.approx(np.full(2, unlike.sum()), abs=1e-8)

    def test_populations(self, averaged: tuple[RunFile, Path]) -> None:
        run, path = averaged
        result, gas = load(path), run.gas
        mean = result["mean_population"].values
        if gas.ensemble == "canonical":
            assert np.all(mean == gas.populations)
        elif gas.thermal_energy == 0:
            sides = run.system().sides
            listed = [
                [twists.filled(sides, twist, n, 0.0, "following").population for n in (8, 4)]
                for twist in result["snapshot_twist"].values
            ]
            assert mean == pytest.approx(np.reshape(listed, (8, 50, 2)).mean(axis=1), abs=1e-12)
            assert np.ptp(mean[:, 0]) > 0
        else:
            assert np.ptp(mean[:, 0]) > 0
        assert result["population"].values.tolist() == [8, 4]

    def test_sample_and_expectation_agree(self, averaged: tuple[RunFile, Path]) -> None:
        result = load(averaged[1])
        p_value = float(result["pair_correlation_p_value"])
        assert ALPHA < p_value <= 1.0
        assert int(result["pair_correlation_p_value"].attrs["dimensions_tested"]) > 20
        difference = result["pair_correlation_difference"].values
        assert np.isfinite(difference).any()
        assert "twist" not in result

    def test_one_twist(self, variant: Variant) -> None:
        run = run_of(variant, STATES[0], "[0.5, -0.1]")
        result = pairmc.sample(run)
        assert result["twist"].dims == ("axis",)
        assert result["twist"].values.tolist() == [-0.5, -0.1]
        for absent in ("snapshot_twist", "pair_count_expected"):
            assert absent not in result
        assert "snapshot_twist" not in pairmc.draw_snapshots(run, 3)
        assert float(result["pair_correlation_p_value"]) > ALPHA
        sides = run.system().sides
        edges = 0.5 * min(sides) * np.linspace(0, 1, 21)
        ratio = result["energy_per_particle"] / result["energy_per_particle_bulk"]
        for part, (spin, n) in enumerate((("up", 8), ("down", 4))):
            filling = twists.ground(sides, (-0.5, -0.1), n)
            found = result["pair_correlation_expected"].sel(pair=f"{spin}-{spin}").values
            assert found == pytest.approx(filling.pair_correlation(edges, n), abs=1e-9)
            bulk = energy.bulk_per_particle(run.gas)[part]
            assert float(ratio.sel(spin=spin)) == pytest.approx(filling.energy / n / bulk)

    def test_no_twist_is_not_mentioned(self, small_result: Path) -> None:
        result = load(small_result)
        for absent in ("twist", "snapshot_twist", "pair_count_expected"):
            assert absent not in result


class TestGrowth:
    @pytest.mark.parametrize("state", STATES)
    @pytest.mark.parametrize("kept", ['"all"', "70"])
    def test_more_equals_one_longer_run(
        self, variant: Variant, tmp_path: Path, state: tuple[str, str], kept: str
    ) -> None:
        run = run_of(variant, state, kept=kept)
        sample_into(run, tmp_path / "run.nc")
        first = load(tmp_path / "run.nc")
        sample_into(run, tmp_path / "run.nc", more=200)
        sample_into(run_of(variant, state, kept=kept, batches=12), tmp_path / "whole.nc")
        grown, whole = load(tmp_path / "run.nc"), load(tmp_path / "whole.nc")
        assert same_data(grown, whole) == []
        assert grown.sizes["batch"] == 12
        np.testing.assert_array_equal(
            grown["pair_count_expected"][:8], first["pair_count_expected"]
        )

    def test_resumed_and_with_more_workers(self, variant: Variant, tmp_path: Path) -> None:
        run = run_of(variant, STATES[1])

        def stop(progress: Progress) -> None:
            if progress.drawn == 3:
                raise PlannedStopError

        with pytest.raises(PlannedStopError):
            sample_into(run, tmp_path / "run.nc", report=stop)
        sample_into(run, tmp_path / "run.nc")
        sample_into(run, tmp_path / "whole.nc", 2)
        assert same_data(load(tmp_path / "run.nc"), load(tmp_path / "whole.nc")) == []

    def test_another_twist_is_another_run(self, variant: Variant, tmp_path: Path) -> None:
        path = tmp_path / "run.nc"
        sample_into(run_of(variant, STATES[0], kept="0"), path)
        before = path.read_bytes()
        with pytest.raises(pairmc.errors.InputError, match=r"confinement\.twist"):
            sample_into(run_of(variant, STATES[0], "[0.25, 0.0]", kept="0"), path)
        assert path.read_bytes() == before


def test_plain_files_explain_themselves(averaged: tuple[RunFile, Path]) -> None:
    with xr.open_dataset(averaged[1]) as plain:
        for name in ("snapshot_twist", "pair_count_expected", "pair_correlation_expected"):
            assert plain[name].attrs["units"] == "1"
            assert plain[name].attrs["long_name"]
