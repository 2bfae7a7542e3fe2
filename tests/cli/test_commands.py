"""The commands as a user meets them: output, exit codes, messages."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import NamedTuple

import numpy as np
import pytest
import xarray as xr
from scipy import constants

import pairmc
from pairmc.cli.describe import _test, _wide_ranges, summary_text
from pairmc.cli.main import run
from pairmc.results.load import load
from pairmc.results.summary import summarise
from tests.conftest import SMALL, same_data
from tests.faults.harness import heed_interrupts

PAIRMC = [sys.executable, "-m", "pairmc"]


class Outcome(NamedTuple):
    code: int
    out: str
    err: str


@pytest.fixture
def call(capfd: pytest.CaptureFixture[str]) -> Callable[..., Outcome]:
    """Return a function that runs a command line and returns what it gave."""

    def call_it(*arguments: object) -> Outcome:
        code = run([str(argument) for argument in arguments])
        return Outcome(code, *capfd.readouterr())

    return call_it


@pytest.fixture
def run_file(tmp_path: Path) -> Path:
    path = tmp_path / "small.toml"
    path.write_text(SMALL)
    return path


Call = Callable[..., Outcome]


def test_help_names_every_command(call: Call) -> None:
    outcome = call("--help")
    assert outcome.code == 0
    for name in ("check", "sample", "describe", "plot"):
        assert f"\n  {name} " in outcome.out
        assert call(name, "--help").code == 0


def test_version(call: Call) -> None:
    assert call("--version") == (0, f"pairmc {pairmc.__version__}\n", "")


def test_check_tells_the_scales_and_draws_nothing(call: Call, run_file: Path) -> None:
    outcome = call("check", run_file)
    assert outcome.code == 0
    # k_F = √(4π n), E_F = ħ²k_F²/2m, T_F = E_F/k_B with the constants of CODATA
    wavenumber = np.sqrt(4 * np.pi * 1.1e12 * 9 / 14)
    energy = (constants.hbar * wavenumber) ** 2 / (2 * 6.015 * constants.atomic_mass)
    for text in (
        "1.1 um^-2",
        f"{wavenumber / 1e6:.5g} um^-1",
        f"{energy:.5g} J",
        f"{1e9 * energy / constants.k:.5g} nK",
        "closed shell",
        "400 snapshots in 8 batches",
    ):
        assert text in outcome.out, text
    assert [path.name for path in run_file.parent.iterdir()] == ["small.toml"]


def test_check_names_an_open_shell_and_the_closed_ones_beside_it(
    call: Call, run_file: Path
) -> None:
    run_file.write_text(SMALL.replace("up = 9", "up = 11"))
    outcome = call("check", run_file)
    assert "up: open shell, 2 of 4 orbitals" in outcome.out
    assert "Nearest closed shells: 9 and 13" in outcome.out


def test_sample_writes_beside_the_run_file_and_describes(
    call: Call, run_file: Path, small_result: Path
) -> None:
    outcome = call("sample", run_file)
    assert outcome.code == 0
    assert "hole" in outcome.out
    assert "global p-value" in outcome.out
    assert sorted(path.name for path in run_file.parent.iterdir()) == ["small.nc", "small.toml"]
    assert same_data(load(run_file.with_suffix(".nc")), load(small_result)) == []
    again = call("sample", run_file)
    assert again.code == 0
    assert "holds all 8 batches already" in again.err
    assert again.out == outcome.out


def test_sample_says_that_a_shell_is_open(call: Call, run_file: Path) -> None:
    run_file.write_text(SMALL.replace("down = 5", "down = 6"))
    outcome = call("sample", run_file, "--into", run_file.parent / "open.nc")
    assert outcome.code == 0
    assert "down: open shell, 1 of 4" in outcome.err


def test_describe_prints_text_and_json(call: Call, small_result: Path) -> None:
    text = call("describe", small_result, small_result)
    assert text.code == 0
    assert text.out.count("Small sheet") == 2
    summaries = json.loads(call("describe", "--json", small_result).out)
    assert len(summaries) == 1
    summary = summaries[0]
    assert summary["components"]["up"]["population"] == {"value": 9, "unit": "1"}
    audit = summary["observables"]["pair_correlation"]
    result = load(small_result)
    assert audit["p_value"] == float(result["pair_correlation_p_value"])
    depth = audit["headline"]["values"]["up-up"]
    assert depth["unit"] == "um^-2"
    assert abs(depth["value"] - depth["expected"]) < 10 * depth["error"]


def innermost(result: xr.Dataset, label: str) -> tuple[float, float]:
    """Return the range of the innermost merged bin of a pair, straight from the file."""
    part = result.sel(pair=label)
    inside = part["pair_correlation_merge"].values == part["pair_correlation_merge"].values[0]
    edges = result["separation_bounds"].values[inside]
    return edges.min(), edges.max()


def test_the_depth_stands_beside_the_range_it_is_averaged_over(
    call: Call, small_result: Path
) -> None:
    result = load(small_result)
    (summary,) = json.loads(call("describe", "--json", small_result).out)
    headline = summary["observables"]["pair_correlation"]["headline"]
    shown = call("describe", small_result).out
    # √(4π n) of the majority
    wavenumber = np.sqrt(4 * np.pi * 1.1 * 9 / 14)
    for label, entry in headline["values"].items():
        start, stop = innermost(result, label)
        reach = entry["range"]
        assert (reach["from"], reach["to"], reach["unit"]) == (start, stop, "um")
        np.testing.assert_allclose(
            [reach["scaled_from"], reach["scaled_to"]], wavenumber * np.array([start, stop])
        )
        assert reach["scaled_by"] == "k_F of up"
        assert reach["wide"] == (wavenumber * stop > headline["wide_beyond"] == 0.5)
        (line,) = (row for row in shown.splitlines() if row.startswith(f"  {label} "))
        assert f"0 to {stop:.4g} um" in line
        assert f"0 to {wavenumber * stop:.3g}" in line
    assert "all pairs: averaged over a range that reaches beyond k_F r = 0.5" in shown
    assert "not the value at contact" in shown


def test_a_narrow_innermost_bin_carries_no_remark(small_result: Path) -> None:
    headline = summarise(load(small_result))["observables"]["pair_correlation"]["headline"]
    for entry in headline["values"].values():
        entry["range"]["wide"] = False
    assert _wide_ranges(headline) == []
    headline["values"]["up-down"]["range"]["wide"] = True
    (line,) = _wide_ranges(headline)
    assert line.startswith("  up-down: averaged over")


@pytest.mark.parametrize(
    ("p", "shown"),
    [
        (1.0, "no sign of disagreement, global p-value > 0.999 ("),
        (0.9994, "global p-value 0.999 ("),
        (0.998, "no sign of disagreement, global p-value 0.998 ("),
        (2e-3, "a sign of disagreement, rarely chance, global p-value 0.002 ("),
        (2e-7, "sample and exact values disagree, global p-value 2.0e-07 ("),
        (0.0, "sample and exact values disagree, global p-value < 1e-300 ("),
    ],
)
def test_the_test_is_told_in_words_and_never_as_agreement(
    small_result: Path, p: float, shown: str
) -> None:
    result = load(small_result)
    attributes = result["pair_correlation_p_value"].attrs
    result["pair_correlation_p_value"] = ((), p, attributes)
    told = summary_text({"file": "small.nc"} | summarise(result))
    assert shown in told
    assert "agrees" not in told


def test_one_merged_bin_and_differences_without_bound(small_result: Path) -> None:
    audit = summarise(load(small_result))["observables"]["pair_correlation"]
    said = _test(audit | {"merged_bins": 1, "dimensions_tested": 1})
    assert "(1 merged bin);" in said
    assert "(48 merged bins, 47 of them independent);" in _test(audit | {"dimensions_tested": 47})
    assert "beyond the limit" in _test(audit | {"largest_difference": 1e3})
    assert _test(audit | {"largest_difference": None}).endswith("where none is possible")


def test_energies_without_units_say_what_they_are_counted_in(call: Call, tmp_path: Path) -> None:
    path = tmp_path / "plain.toml"
    path.write_text(SMALL.replace('"1.1 / um^2"', "1.1").replace('mass = "6.015 u"', ""))
    told = call("sample", path, "--quiet").out
    wavenumber = np.sqrt(4 * np.pi * 1.1 * 9 / 14)
    assert f"{wavenumber**2 / 2:.5g} ħ²/(m·length²)" in told
    (summary,) = json.loads(call("describe", "--json", tmp_path / "plain.nc").out)
    energy = summary["components"]["up"]["fermi_energy"]
    assert energy["comment"] == "in units of hbar^2 / (mass * length unit^2)"


def test_more_of_no_result_is_said(call: Call, run_file: Path) -> None:
    outcome = call("sample", run_file, "--more", "50")
    assert outcome.code == 0
    assert "no result yet: the run's own 400 snapshots and 50 more are drawn" in outcome.err


def test_plot_writes_the_picture(call: Call, small_result: Path, tmp_path: Path) -> None:
    outcome = call("plot", small_result, "--into", tmp_path / "hole.png")
    assert outcome.code == 0
    assert (tmp_path / "hole.png").read_bytes().startswith(b"\x89PNG")
    assert call("plot", small_result, "--into", tmp_path / "hole.png").code == 0


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["check", "nowhere.toml"], "no such file"),
        (["sample", "nowhere.toml"], "no such file"),
        (["describe", "nowhere.nc"], "no such file"),
        (["plot", "nowhere.nc", "--into", "a.png"], "no such file"),
        (["describe"], "FILE"),
        (["plot", "a.nc"], "--into"),
        (["sample", "a.toml", "--workers", "0"], "--workers"),
        (["smaple", "a.toml"], "no command 'smaple'"),
        (["--frobnicate"], "--frobnicate"),
    ],
)
def test_wrong_input_is_refused_with_code_2(
    call: Call, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, arguments: list[str], message: str
) -> None:
    monkeypatch.chdir(tmp_path)
    outcome = call(*arguments)
    assert outcome.code == 2
    assert message in outcome.err
    assert outcome.out == ""
    assert "Traceback" not in outcome.err
    assert list(tmp_path.iterdir()) == []


def test_all_mistakes_of_a_run_file_are_named_at_once(call: Call, run_file: Path) -> None:
    run_file.write_text(SMALL.replace("up = 9", "up = -9").replace("bins = 20", "binns = 20"))
    outcome = call("sample", run_file)
    assert outcome.code == 2
    lines = outcome.err.splitlines()
    assert len(lines) == 2
    assert f"{run_file}:6: [gas] particles.up" in lines[0]
    assert "bins" in lines[1]
    assert [path.name for path in run_file.parent.iterdir()] == ["small.toml"]


@pytest.mark.parametrize(("number", "code"), [(signal.SIGINT, 130), (signal.SIGTERM, 143)])
@pytest.mark.usefixtures("small_result")  # so that kernels are compiled before
def test_a_signal_stops_at_once_and_the_same_command_goes_on(
    tmp_path: Path, number: signal.Signals, code: int
) -> None:
    long = SMALL.replace("up = 9", "up = 49")
    long = long.replace("snapshots = 400", "snapshots = 400000").replace("= 8", "= 800")
    (tmp_path / "long.toml").write_text(long)
    process = subprocess.Popen(
        [*PAIRMC, "sample", "long.toml", "--workers", "2"],
        cwd=tmp_path,
        stderr=subprocess.PIPE,
        text=True,
        preexec_fn=heed_interrupts,  # noqa: PLW1509  no threads here
    )
    while not list(tmp_path.glob("long.nc.parts/batch-*.npz")):
        assert process.poll() is None
        time.sleep(0.1)
    asked = time.monotonic()
    process.send_signal(number)
    try:
        _, message = process.communicate(timeout=60)
    finally:
        process.kill()
    assert time.monotonic() - asked < 20
    assert process.returncode == code
    assert "To go on: pairmc sample long.toml" in message
    assert "Traceback" not in message
    assert not (tmp_path / "long.nc").exists()
    assert list(tmp_path.glob("long.nc.parts/batch-*.npz"))


def test_a_reader_that_goes_away_is_no_accident(small_result: Path) -> None:
    read, write = os.pipe()
    os.close(read)
    process = subprocess.run(
        [*PAIRMC, "describe", small_result], stdout=write, stderr=subprocess.PIPE, check=False
    )
    os.close(write)
    assert b"Traceback" not in process.stderr


INTERRUPTED_IMPORT = """
import sys
from importlib.abc import MetaPathFinder

class Interrupt(MetaPathFinder):
    def find_spec(self, name, path, target=None):
        if name == {name!r}:
            raise KeyboardInterrupt

from pairmc.cli.main import main
assert "click" not in sys.modules
sys.meta_path.insert(0, Interrupt())
main(["describe", "a.nc"])
"""


@pytest.mark.parametrize("name", ["click", "pairmc.cli.describe", "xarray"])
def test_an_interrupt_while_libraries_are_loaded_ends_quietly(tmp_path: Path, name: str) -> None:
    outcome = subprocess.run(
        [sys.executable, "-c", INTERRUPTED_IMPORT.format(name=name)],
        cwd=tmp_path,
        capture_output=True,
        text=True,
        check=False,
    )
    assert outcome.returncode == 130
    assert outcome.stderr.strip() == ""


def test_describe_says_the_ensemble_and_the_temperature(
    call: Callable[..., Outcome], tmp_path: Path
) -> None:
    warm = SMALL.replace("mass = ", 'temperature = "0.4 T_F"\nmass = ')
    (tmp_path / "warm.toml").write_text(warm)
    outcome = call("sample", "--quiet", tmp_path / "warm.toml")
    lines = outcome.out.splitlines()
    assert lines[2] == "  canonical: fixed populations at a temperature"
    assert lines[3].startswith("  temperature 0.4 T_F of the majority component = ")
    assert lines[3].endswith("nK")
    described = json.loads(call("describe", "--json", tmp_path / "warm.nc").out)
    assert described[0]["conditions"]["reduced_temperature"]["value"] == pytest.approx(0.4)
