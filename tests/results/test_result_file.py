"""The result file: names, units, CF conventions, and refusals to read what is none."""

from __future__ import annotations

import json
import subprocess
from pathlib import Path

import netCDF4
import numpy as np
import pytest
import xarray as xr
from compliance_checker.runner import CheckSuite, ComplianceChecker

import pairmc
from pairmc.errors import PairmcError, ResultFileError
from pairmc.results import schema
from pairmc.results.collect import Collected
from pairmc.results.load import load
from pairmc.runfile.digest import digest
from pairmc.runfile.run import RunFile
from tests.conftest import SMALL


def test_the_names_and_dimensions_that_notebooks_rely_on(small_result: Path) -> None:
    result = load(small_result)
    rows = ("pair", "separation")
    expected = {
        "pair_count": ("batch", *rows),
        "snapshot_count": ("batch",),
        "separation_bounds": ("separation", "bound"),
        "scaled_separation": ("separation",),
        "position": ("snapshot", "particle", "axis"),
        "component": ("snapshot", "particle"),
        "particle_count": ("snapshot",),
        "snapshot_batch": ("snapshot",),
    }
    for name in ("pair_correlation", "exchange_hole"):
        for suffix in ("", "_error", "_expected", "_bulk"):
            expected[name + suffix] = rows
    assert {name: result[name].dims for name in expected} == expected
    assert result["pair_count"].dtype == np.int64
    assert list(result["pair"].values) == ["up-up", "up-down", "down-down"]
    assert list(result["spin"].values) == ["up", "down"]


def test_plain_xarray_opens_it_and_every_variable_says_what_it_is(small_result: Path) -> None:
    with xr.open_dataset(small_result) as result:
        for name, variable in result.variables.items():
            assert variable.attrs.get("long_name"), name
            if name not in ("pair", "spin", "component"):
                assert variable.attrs.get("units"), name
        assert result["separation"].attrs["units"] == "um"
        assert result["exchange_hole"].attrs["units"] == "um^-2"


def test_attributes_tell_where_it_came_from(small_result: Path, small_run: RunFile) -> None:
    attributes = load(small_result).attrs
    assert attributes["run_file"] == SMALL
    assert attributes["run_digest"] == digest(small_run)
    assert attributes["seed"] == "11"
    assert attributes["Conventions"] == "CF-1.11"
    assert attributes[schema.SCHEMA_ATTRIBUTE] == "1.1"
    assert json.loads(attributes["made_with"])[0]["pairmc"] == pairmc.__version__
    assert str(Path.home()) not in json.dumps(dict(attributes), default=str)


def test_values_follow_from_the_counts(small_result: Path, small_run: RunFile) -> None:
    result = load(small_result)
    edges = result["separation_bounds"].values
    shells = np.pi * (edges[:, 1] ** 2 - edges[:, 0] ** 2)
    volume = np.prod(result["side"].values)
    up, down = (population / volume for population in (9, 5))
    weights = np.array([0.5 * up * up, up * down, 0.5 * down * down]) * volume
    g = result["pair_count"].sum("batch").values / (400 * weights[:, None] * shells)
    np.testing.assert_allclose(result["pair_correlation"], g, rtol=1e-13)
    hole = np.array([up, down, down])[:, None] * (g - 1)
    np.testing.assert_allclose(result["exchange_hole"], hole, rtol=1e-12, atol=1e-15)
    majority = result["fermi_wavenumber"].values[0]
    np.testing.assert_allclose(
        result["scaled_separation"], majority * result["separation"], rtol=1e-13
    )
    assert volume == pytest.approx(14 / 1.1, rel=1e-13)


def test_no_error_bar_is_zero(small_result: Path) -> None:
    result = load(small_result)
    assert (result["pair_count"].sum("batch") == 0).any(), "the case is not tested otherwise"
    for name in ("pair_correlation", "exchange_hole"):
        assert (result[f"{name}_error"] > 0).all()
        interval = result[f"{name}_interval"]
        assert (interval[..., 0] <= result[name]).all()
        assert (interval[..., 1] > result[name]).all()


def test_kept_snapshots_are_the_runs_first(small_result: Path, small_run: RunFile) -> None:
    result = load(small_result)
    drawn = pairmc.draw_snapshots(small_run, 70)
    np.testing.assert_allclose(result["position"], drawn["position"], rtol=0, atol=1e-6)
    np.testing.assert_array_equal(result["component"], drawn["component"])
    assert (result["position"] >= 0).all()
    assert (result["position"] < result["side"].astype(np.float32)).all()
    assert list(result["snapshot_batch"].values) == [0] * 50 + [1] * 20
    assert (result["particle_count"] == 14).all()


def cf_complaints(path: Path, tmp_path: Path) -> list[str]:
    """Return what an independent CF checker finds wrong, errors only."""
    CheckSuite.load_all_available_checkers()
    report = tmp_path / "report.json"
    ComplianceChecker.run_checker(
        str(path), ["cf:1.11"], 0, "normal", output_filename=str(report), output_format="json"
    )
    found = json.loads(report.read_text())["cf:1.11"]
    assert found["possible_points"] > 50
    return [message for entry in found["high_priorities"] for message in entry["msgs"]]


@pytest.mark.filterwarnings("ignore")  # of the checker's own libraries
def test_an_independent_cf_checker_finds_no_error(small_result: Path, tmp_path: Path) -> None:
    assert cf_complaints(small_result, tmp_path) == []


@pytest.mark.filterwarnings("ignore")
def test_the_cf_checker_would_find_one(small_result: Path, tmp_path: Path) -> None:
    spoilt = tmp_path / "spoilt.nc"
    spoilt.write_bytes(small_result.read_bytes())
    with netCDF4.Dataset(spoilt, "a") as file:
        file["separation"].units = "furlong per sigh"
    assert cf_complaints(spoilt, tmp_path) != []


@pytest.mark.system_tools
def test_ncdump_reads_the_header(small_result: Path) -> None:
    header = subprocess.run(
        ["ncdump", "-h", small_result], capture_output=True, text=True, check=True
    ).stdout
    for text in (
        "int64 pair_count(batch, pair, separation) ;",
        'separation:units = "um" ;',
        'separation:bounds = "separation_bounds" ;',
        "char pair(pair, pair_characters) ;",
        ':Conventions = "CF-1.11" ;',
    ):
        assert text in header


@pytest.mark.system_tools
def test_ncdump_prints_the_labels(small_result: Path) -> None:
    printed = subprocess.run(
        ["ncdump", "-v", "pair", small_result], capture_output=True, text=True, check=True
    ).stdout
    assert '"up-down"' in printed


def test_a_missing_file_is_refused(tmp_path: Path) -> None:
    with pytest.raises(ResultFileError, match="no such file"):
        load(tmp_path / "none.nc")
    with pytest.raises(ResultFileError, match="a folder"):
        load(tmp_path)


def test_a_truncated_file_is_refused(small_result: Path, tmp_path: Path) -> None:
    whole = small_result.read_bytes()
    for length in (0, 100, len(whole) // 2, len(whole) - 1):
        (tmp_path / "cut.nc").write_bytes(whole[:length])
        with pytest.raises(ResultFileError, match=r"cannot be read|damaged"):
            load(tmp_path / "cut.nc")


def test_a_foreign_netcdf_file_is_refused(tmp_path: Path) -> None:
    xr.Dataset({"x": ("t", [1.0])}).to_netcdf(tmp_path / "foreign.nc")
    with pytest.raises(ResultFileError, match="without pairmc's schema number"):
        load(tmp_path / "foreign.nc")


def with_schema(path: Path, target: Path, number: str) -> Path:
    target.write_bytes(path.read_bytes())
    with netCDF4.Dataset(target, "a") as file:
        file.setncattr(schema.SCHEMA_ATTRIBUTE, number)
    return target


def test_a_newer_major_schema_is_refused_and_a_newer_minor_warned_of(
    small_result: Path, tmp_path: Path
) -> None:
    with pytest.raises(ResultFileError, match=r"schema 2\.0; allowed: up to 1\.1"):
        load(with_schema(small_result, tmp_path / "major.nc", "2.0"))
    with pytest.warns(UserWarning, match="written with schema 1.7"):
        load(with_schema(small_result, tmp_path / "minor.nc", "1.7"))


@pytest.mark.parametrize("number", ["1.0", "1.1"])
def test_the_committed_file_of_each_schema_still_opens(number: str) -> None:
    result = load(Path(__file__).parent.parent / "data" / f"schema-{number}.nc")
    assert result.attrs[schema.SCHEMA_ATTRIBUTE] == number
    assert float(result["pair_correlation_p_value"]) == pytest.approx(0.5, abs=0.4999)
    assert result["pair_count"].sum() > 0
    new = {"snapshot_twist", "pair_count_expected", "rotation", "singlet_fraction_expected"}
    assert (new & set(result)) == (new if number == "1.1" else set())


def test_a_result_that_lacks_what_extending_needs_is_refused() -> None:
    old = load(Path(__file__).parent.parent / "data" / "schema-1.0.nc")
    with pytest.raises(PairmcError, match="written by an earlier version"):
        Collected().add_result(["pair_correlation"], old)
