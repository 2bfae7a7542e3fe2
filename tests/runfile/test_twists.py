"""The twist in a run file: its spellings, what is refused, and what is the same run."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from pairmc.errors import InputError, Problem
from pairmc.physics.system import System
from pairmc.runfile.digest import canonical, differing_keys, digest
from pairmc.runfile.read import read_run_text
from pairmc.runfile.run import RunFile

Problems = Callable[[str], tuple[Problem, ...]]

TEXT = """
[gas]
dimension = {dimension}
particles = {{ up = {up}, down = {down} }}
{more}
[confinement]
{lines}
"""


def read(
    twist: str | None, dimension: int = 2, up: int = 7, down: int = 4, more: str = ""
) -> RunFile:
    lines = "" if twist is None else f"twist = {twist}"
    return read_run_text(TEXT.format(dimension=dimension, up=up, down=down, more=more, lines=lines))


def axis_twists(system: System) -> tuple[float, ...]:
    return tuple(axis.twist for axis in system.axes)


class TestForms:
    @pytest.mark.parametrize("twist", [None, '"none"', "[0.0, 0.0]", "[0, 0]", "[-0.0, 0]"])
    def test_no_twist(self, twist: str | None) -> None:
        run = read(twist)
        assert run.twist == (0.0, 0.0)
        assert axis_twists(run.system()) == (0.0, 0.0)
        assert not run.system().averaged
        assert digest(run) == digest(read(None))

    @pytest.mark.parametrize(
        ("twist", "read_as"),
        [
            ("[0.25, -0.1]", (0.25, -0.1)),
            ("[0, 0.25]", (0.0, 0.25)),
            ("[-0.5, 0.4999]", (-0.5, 0.4999)),
            ("[0.5, 0.5]", (-0.5, -0.5)),
            ("[5e-1, +0.25]", (-0.5, 0.25)),
        ],
    )
    def test_one_number_an_axis(self, twist: str, read_as: tuple[float, ...]) -> None:
        run = read(twist)
        assert run.twist == read_as
        assert axis_twists(run.system()) == read_as
        assert not run.system().averaged

    @pytest.mark.parametrize("dimension", [1, 2, 3])
    def test_averaged(self, dimension: int) -> None:
        run = read('"averaged"', dimension)
        assert run.twist == "averaged"
        assert run.system().averaged
        fixed = run.system().at(np.full(dimension, 0.125))
        assert axis_twists(fixed) == (0.125,) * dimension
        assert fixed.sides == run.system().sides == read(None, dimension).system().sides
        assert [state.mean().sum() for state in fixed.occupations] == pytest.approx([7, 4])


class TestRefusals:
    FORMS = '"none", "averaged", or a list of numbers from -0.5 to 0.5, one per axis'

    @pytest.mark.parametrize(
        ("twist", "got"),
        [
            ("0.25", "0.25"),
            ("[]", "[]"),
            ("true", "true"),
            ("[true, false]", "[true, false]"),
            ('["0.25", 0.1]', '["0.25", 0.1]'),
            ("[[0.25, 0.1]]", "a list of lists"),
            ("[0.25, nan]", "[0.25, nan]"),
            ("[inf, 0.1]", "[inf, 0.1]"),
            ("[0.51, 0.1]", "[0.51, 0.1]"),
            ("[0.1, -0.500001]", "[0.1, -0.500001]"),
            ("[1, 0]", "[1, 0]"),
            ('"random"', '"random"'),
            ('""', '""'),
            ("1979-05-27", "1979-05-27"),
        ],
    )
    def test_other_forms(self, twist: str, got: str, gas: str, problems: Problems) -> None:
        (problem,) = problems(f"{gas}[confinement]\ntwist = {twist}")
        assert problem.key == "[confinement] twist"
        assert problem.got == got
        assert problem.allowed == self.FORMS
        assert problem.line == 5
        assert "did you mean" not in problem.advice

    @pytest.mark.parametrize(
        ("twist", "meant"),
        [('"avreged"', "averaged"), ('"Averaged"', "averaged"), ('"non"', "none")],
    )
    def test_misspelt(self, twist: str, meant: str, gas: str, problems: Problems) -> None:
        (problem,) = problems(f"{gas}[confinement]\ntwist = {twist}")
        assert problem.got == twist
        assert problem.advice == f"did you mean {meant}?"

    @pytest.mark.parametrize(
        ("dimension", "twist", "wanted"),
        [
            (1, "[0.25, 0.1]", "a list of 1 entry, as dimension = 1"),
            (2, "[0.25]", "a list of 2 entries, as dimension = 2"),
            (2, "[0.25, 0, 0]", "a list of 2 entries, as dimension = 2"),
            (3, "[0.25, 0]", "a list of 3 entries, as dimension = 3"),
        ],
    )
    def test_wrong_lengths(
        self, dimension: int, twist: str, wanted: str, gas: str, problems: Problems
    ) -> None:
        text = gas.replace("dimension = 2", f"dimension = {dimension}")
        (problem,) = problems(f"{text}[confinement]\ntwist = {twist}")
        assert problem.key == "[confinement] twist"
        assert problem.got == f"a list of {len(twist.split(','))}"
        assert problem.allowed == wanted
        assert problem.line == 5


class TestShells:
    """Fluctuating numbers at T = 0 need closed shells at one twist, and none for all twists."""

    FREE = 'ensemble = "grand-canonical"'

    @pytest.mark.parametrize(
        ("twist", "up", "down"), [("[0.5]", 8, 4), ("[-0.5]", 2, 50), ('"none"', 7, 5)]
    )
    def test_closed_on_a_ring(self, twist: str, up: int, down: int) -> None:
        run = read(twist, 1, up, down, self.FREE)
        assert all(state.closed for state in run.system().occupations)

    @pytest.mark.parametrize(
        ("twist", "up", "down"), [("[0.5]", 8, 5), ('"none"', 7, 4), ("[0.5]", 3, 4)]
    )
    def test_open_on_a_ring(self, twist: str, up: int, down: int) -> None:
        with pytest.raises(InputError, match="open shell"):
            read(twist, 1, up, down, self.FREE)

    @pytest.mark.parametrize("twist", ["[0.3]", "[-0.01]"])
    def test_any_population_of_a_ring_between(self, twist: str) -> None:
        assert read(twist, 1, 8, 5, self.FREE).system().occupations

    def test_open_in_the_plane(self) -> None:
        """A square at (½, ½) closes at 4, 12, 16; at a twist of no symmetry everywhere."""
        assert read("[0.5, 0.5]", 2, 12, 4, self.FREE).system().occupations
        with pytest.raises(InputError, match=r"open shell of 5 .* 4 or 12"):
            read("[0.5, 0.5]", 2, 12, 5, self.FREE)
        assert read("[0.3, 0.21]", 2, 11, 5, self.FREE).system().occupations

    def test_averaged_needs_none(self) -> None:
        run = read('"averaged"', 2, 11, 6, self.FREE)
        assert run.twist == "averaged"
        with pytest.raises(InputError, match='twist = "averaged"'):
            read(None, 2, 11, 6, self.FREE)


class TestDigest:
    def test_each_twist_is_another_run(self) -> None:
        texts = ["[0.25, -0.1]", "[-0.1, 0.25]", "[0.25, 0.1]", "[0.25, 0.0]", '"averaged"', None]
        runs = [read(twist) for twist in texts]
        assert len({digest(run) for run in runs}) == len(runs)
        for run in runs[1:]:
            keys = [key for key, _, _ in differing_keys(canonical(runs[0]), canonical(run))]
            assert keys == ["confinement.twist"]

    def test_one_twist_has_one_digest(self) -> None:
        assert digest(read("[0.5]", 1)) == digest(read("[-0.5]", 1))
        assert digest(read("[0.25]", 1)) == digest(read("[2.5e-1]", 1)) != digest(read(None, 1))
        assert digest(read("[0]", 1)) == digest(read('"none"', 1)) == digest(read(None, 1))

    def test_ensembles_of_averaged_runs_differ(self) -> None:
        assert digest(read('"averaged"')) != digest(
            read('"averaged"', more='ensemble = "grand-canonical"')
        )
