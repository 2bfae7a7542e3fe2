"""The rules that tools check: format, lint, types. They are tests so that one command runs all."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent

TOOLS = {
    "format": ("ruff", "format", "--check", "."),
    "lint": ("ruff", "check", "."),
    "types": ("mypy",),
}


@pytest.mark.parametrize("name", TOOLS)
def test_the_tool_has_no_complaint(name: str) -> None:
    outcome = subprocess.run(
        [sys.executable, "-m", *TOOLS[name]], cwd=ROOT, capture_output=True, text=True, check=False
    )
    assert outcome.returncode == 0, outcome.stdout + outcome.stderr


def test_lint_and_types_can_fail(tmp_path: Path) -> None:
    (tmp_path / "bad.py").write_text("import os\n\n\ndef f(x: int) -> str:\n    return x\n")
    for tool in (("ruff", "check"), ("mypy", "--strict", "--config-file=")):
        outcome = subprocess.run(
            [sys.executable, "-m", *tool, "bad.py"], cwd=tmp_path, capture_output=True, check=False
        )
        assert outcome.returncode != 0


@pytest.mark.parametrize(
    "arguments", [["--help"], ["--version"], ["check", "runs/quickstart.toml"]]
)
def test_a_light_command_imports_neither_compiler_nor_file_library(arguments: list[str]) -> None:
    script = (
        "import sys\n"
        "from pairmc.cli.main import run\n"
        f"code = run({arguments!r})\n"
        "heavy = {'numba', 'xarray', 'matplotlib', 'netCDF4', 'llvmlite'} & set(sys.modules)\n"
        "sys.exit(f'{heavy}' if heavy or code else 0)\n"
    )
    outcome = subprocess.run(
        [sys.executable, "-c", script], cwd=ROOT, capture_output=True, text=True, check=False
    )
    assert outcome.returncode == 0, outcome.stderr
