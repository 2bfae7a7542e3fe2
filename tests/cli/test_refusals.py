"""Every refusal as a user meets it: code 2, one message that says what to do, nothing written.

Mistakes inside a run file are tested in tests/runfile; here one of each kind goes through the
command.
"""

from __future__ import annotations

import json
import os
import resource
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import netCDF4
import pytest

from tests.conftest import SMALL
from tests.faults.harness import obey_permissions

PAIRMC = [sys.executable, "-m", "pairmc"]


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    (tmp_path / "run.toml").write_text(SMALL)
    return tmp_path


def pairmc(folder: Path, *arguments: str, **options) -> subprocess.CompletedProcess:
    return subprocess.run(
        [*PAIRMC, *arguments], cwd=folder, capture_output=True, text=True, check=False, **options
    )


def refused(outcome: subprocess.CompletedProcess, *texts: str, lines: int = 1) -> None:
    """Check the form of a refusal and what it says."""
    assert outcome.returncode == 2, outcome.stderr
    assert outcome.stdout == ""
    assert "Traceback" not in outcome.stderr
    said = outcome.stderr.strip().splitlines()
    assert len(said) == lines, outcome.stderr
    for text in texts:
        assert text in outcome.stderr


CHANGES = {
    "unknown key": (("bins = 20", "bin = 20"), ["bin", "bins"]),
    "negative population": (("down = 5", "down = -5"), ["particles.down", "-5", "from 1 to"]),
    "no particles": (
        ("up = 9, down = 5", "up = 0, down = 0"),
        ["particles.up", "0", "from 1 to"],
    ),
    "wrong power of length": (("um^2", "um^3"), ["total_density", "1.1 / um^3", "per area"]),
    "no bins": (("bins = 20", "bins = 0"), ["bins", "from 1 to"]),
    "too many bins": (("bins = 20", "bins = 1000000000000"), ["bins", "10000"]),
    "sides": (("[sampling]", "[confinement]\nsides = [1, 2, 3]\n[sampling]"), ["sides", "2"]),
    "batches": (("batches = 8", "batches = 9"), ["batches", "9", "8", "10"]),
    "seed": (("seed = 11", 'seed = "x"'), ["seed", "whole number"]),
    "a billion particles": (("up = 9", "up = 1000000000"), ["particles.up", "20000"]),
}


@pytest.mark.parametrize("kind", CHANGES)
def test_a_mistake_in_the_run_file(folder: Path, kind: str) -> None:
    (old, new), texts = CHANGES[kind]
    assert old in SMALL
    (folder / "run.toml").write_text(SMALL.replace(old, new))
    start = time.monotonic()
    outcome = pairmc(folder, "sample", "run.toml")
    assert time.monotonic() - start < 30  # under a second on an idle machine
    refused(outcome, "run.toml:", *texts)
    assert [path.name for path in folder.iterdir()] == ["run.toml"]


def test_no_run_file_and_no_toml(folder: Path) -> None:
    refused(pairmc(folder, "sample", "none.toml"), "none.toml", "no such file")
    (folder / "run.toml").write_text("[gas\n")
    refused(pairmc(folder, "sample", "run.toml"), "run.toml:1", "TOML")


def test_an_output_folder_that_is_missing(folder: Path) -> None:
    outcome = pairmc(folder, "sample", "run.toml", "--into", "none/run.nc")
    refused(outcome, "folder none does not exist", "make it")
    outcome = pairmc(folder, "sample", "run.toml", "--into", ".")
    refused(outcome, "a folder")


@pytest.fixture
def read_only(folder: Path) -> Iterator[Path]:
    """Return a folder that an unprivileged process may not write into."""
    where = folder / "locked"
    where.mkdir()
    where.chmod(0o555)
    yield where
    where.chmod(0o755)


def test_an_output_folder_that_is_not_writable(folder: Path, read_only: Path) -> None:
    outcome = pairmc(
        folder, "sample", "run.toml", "--into", f"{read_only}/run.nc", preexec_fn=obey_permissions
    )
    refused(outcome, "is not writable")


def test_damaged_and_foreign_results(folder: Path, small_result: Path) -> None:
    whole = small_result.read_bytes()
    for name, contents in {"cut.nc": whole[:5000], "text.nc": b"nothing", "empty.nc": b""}.items():
        (folder / name).write_bytes(contents)
        refused(pairmc(folder, "describe", name), name, "cannot be read")
        outcome = pairmc(folder, "sample", "run.toml", "--into", name)
        refused(outcome, name, "cannot be read", "name another file with --into, or move that")
        assert "Errno" not in outcome.stderr
        assert "sample again" not in outcome.stderr
        assert (folder / name).read_bytes() == contents
    (folder / "new.nc").write_bytes(whole)
    with netCDF4.Dataset(folder / "new.nc", "a") as file:
        file.setncattr("pairmc_schema", "9.0")
    refused(pairmc(folder, "describe", "new.nc"), "schema 9.0", "update pairmc")
    refused(pairmc(folder, "sample", "run.toml", "--into", "new.nc"), "schema 9.0", "--into")


def test_a_name_that_no_result_may_have(folder: Path) -> None:
    for name in ("a.txt", "run.toml", "a"):
        refused(pairmc(folder, "sample", "run.toml", "--into", name), name, "allowed: .nc")
    assert [path.name for path in folder.iterdir()] == ["run.toml"]


def test_a_picture_replaces_no_other_file(folder: Path, small_result: Path) -> None:
    others = {"text.png": b"a text", "run.png": small_result.read_bytes()}
    for name, contents in others.items():
        (folder / name).write_bytes(contents)
        for result in (str(small_result), "run.png"):
            refused(pairmc(folder, "plot", result, "--into", name), name, "older PNG picture")
        assert (folder / name).read_bytes() == contents
    outcome = pairmc(folder, "plot", "run.png", "--into", "run.png")
    refused(outcome, "a result that is to be drawn", "name another file")
    assert sorted(path.name for path in folder.iterdir()) == ["run.png", "run.toml", "text.png"]


def test_more_of_nothing(folder: Path) -> None:
    for words in (
        ["--more", "0"],
        ["--more", "few"],
        ["--workers", "-1"],
        ["--quiet", "--verbose"],
    ):
        outcome = pairmc(folder, "sample", "run.toml", *words)
        assert outcome.returncode == 2
        assert words[0] in outcome.stderr
        assert "Traceback" not in outcome.stderr


def test_two_processes_on_one_output(folder: Path) -> None:
    long = SMALL.replace("up = 9", "up = 49").replace("= 8", "= 800")
    (folder / "run.toml").write_text(long.replace("snapshots = 400", "snapshots = 400000"))
    first = subprocess.Popen(
        [*PAIRMC, "sample", "run.toml", "--quiet"], cwd=folder, stdout=subprocess.DEVNULL
    )
    while not list(folder.glob("run.nc.parts/batch-*.npz")):
        assert first.poll() is None
        time.sleep(0.05)
    refused(
        pairmc(folder, "sample", "run.toml", "--quiet"), f"process {first.pid} on", "wait for it"
    )
    first.kill()
    first.wait()


def test_a_disk_that_fills_up_ends_with_1_and_keeps_what_is_finished(folder: Path) -> None:
    def starve() -> None:
        resource.setrlimit(resource.RLIMIT_FSIZE, (60_000, resource.RLIM_INFINITY))

    outcome = pairmc(folder, "sample", "run.toml", "--quiet", preexec_fn=starve)
    assert outcome.returncode == 1
    assert outcome.stderr.count("\n") == 1
    assert "finished batches are kept in run.nc.parts" in outcome.stderr
    assert "To go on: pairmc sample run.toml --quiet" in outcome.stderr
    assert len(list(folder.glob("run.nc.parts/batch-*.npz"))) == 8
    assert not (folder / "run.nc").exists()
    assert pairmc(folder, "sample", "run.toml", "--quiet").returncode == 0
    assert sorted(path.name for path in folder.iterdir()) == ["run.nc", "run.toml"]


def test_quiet_says_nothing_and_verbose_more(folder: Path) -> None:
    quiet = pairmc(folder, "sample", "run.toml", "--quiet")
    assert quiet.stderr == ""
    assert "global p-value" in quiet.stdout
    verbose = pairmc(folder, "sample", "run.toml", "--into", "again.nc", "--verbose")
    assert "run digest" in verbose.stderr
    assert "numba" in verbose.stderr
    assert verbose.stderr.count("batch ") >= 8
    plain = pairmc(folder, "sample", "run.toml", "--into", "third.nc")
    assert plain.stderr.count("\n") == 1
    assert "batch 8 of 8" in plain.stderr
    assert "snapshots/s" in plain.stderr


def test_json_is_json_whatever_the_locale(folder: Path, small_result: Path) -> None:
    outcome = pairmc(
        folder, "describe", "--json", str(small_result), env={**os.environ, "LC_ALL": "C"}
    )
    assert json.loads(outcome.stdout)[0]["batches"] == 8


@pytest.mark.parametrize("shell", ["bash", "zsh", "fish"])
def test_completion_is_there(folder: Path, shell: str) -> None:
    script = pairmc(folder, env={**os.environ, "_PAIRMC_COMPLETE": f"{shell}_source"})
    assert "_PAIRMC_COMPLETE" in script.stdout
    words = {"COMP_WORDS": "pairmc sample --w", "COMP_CWORD": "2"}
    if shell == "fish":
        words["COMP_CWORD"] = "--w"
    environment = {**os.environ, **words, "_PAIRMC_COMPLETE": f"{shell}_complete"}
    assert "--workers" in pairmc(folder, env=environment).stdout
