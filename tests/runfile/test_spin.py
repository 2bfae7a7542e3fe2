"""The rotation of spins in a run file: its spellings, what is refused, and what is the same run."""

from __future__ import annotations

from collections.abc import Callable
from math import pi, radians

import numpy as np
import pytest

import pairmc
from pairmc.errors import Problem
from pairmc.physics.grids import separation_grid
from pairmc.physics.theory.pair_correlation import expected
from pairmc.runfile.digest import canonical, differing_keys, digest
from pairmc.runfile.read import read_run_text
from pairmc.runfile.run import RunFile

Problems = Callable[[str], tuple[Problem, ...]]

TEXT = """\
[gas]
dimension = 2
particles = {{ {particles} }}
{spin}
"""
ALLOWED = '0, or an angle with its unit, such as "60 deg" or "1.2 rad"'


def text(rotation: str | None, particles: str = "up = 7, down = 4") -> str:
    spin = "" if rotation is None else f"[spin]\nrotation = {rotation}"
    return TEXT.format(particles=particles, spin=spin)


def read(rotation: str | None, particles: str = "up = 7, down = 4") -> RunFile:
    return read_run_text(text(rotation, particles))


class TestForms:
    @pytest.mark.parametrize(
        "rotation",
        ["0", "0.0", "-0", '"0"', '"0 deg"', '"0 rad"', '"360 deg"', '"-360 deg"', '"720 deg"',
         f'"{2 * pi!r} rad"', f'"{-4 * pi!r} rad"', '"-1e-13 deg"'],
    )  # fmt: skip
    def test_no_rotation(self, rotation: str) -> None:
        run, plain = read(rotation), read(None)
        assert str(run.rotation) == "0.0"
        assert str(run.system().rotation) == "0.0"
        assert canonical(run) == canonical(plain)
        assert digest(run) == digest(plain)
        one, other = (pairmc.draw_snapshots(each, 5) for each in (run, plain))
        for name in ("position", "component"):
            assert one[name].values.tobytes() == other[name].values.tobytes()

    @pytest.mark.parametrize(
        ("rotation", "degrees"),
        [
            ('"60 deg"', 60),
            ('"6e1 deg"', 60),
            ('"-300 deg"', 60),
            ('"-60 deg"', 300),
            ('"660 deg"', 300),
            ('"1.5707963267948966 rad"', 90),
            ('"-1.5707963267948966 rad"', 270),
            ('"3.141592653589793 rad"', 180),
            ('"0.25 deg"', 0.25),
            ('"359.75 deg"', 359.75),
        ],
    )
    def test_degrees_and_radians(self, rotation: str, degrees: float) -> None:
        run, same = read(rotation), read(f'"{degrees} deg"')
        assert run.rotation == degrees
        assert run.system().rotation == radians(degrees)
        assert run.system() is same.system()
        assert digest(run) == digest(same) != digest(read(None))

    @pytest.mark.parametrize("particles", ["up = 7, down = 0", "up = 0, down = 7"])
    def test_one_component_may_be_empty(self, particles: str) -> None:
        run = read('"60 deg"', particles)
        assert sorted(run.gas.populations) == [0, 7]
        assert sorted(run.system().detected_populations) == pytest.approx([1.75, 5.25])
        assert np.all(pairmc.draw_snapshots(run, 3)["component"] >= 0)

    def test_half_a_turn_of_two_components(self) -> None:
        run = read('"180 deg"')
        assert run.system().detected_populations == (4, 7)
        component = pairmc.draw_snapshots(run, 9)["component"].values
        assert np.array_equal(component, np.tile(np.repeat([0, 1], [4, 7]), (9, 1)))


class TestRefusals:
    @pytest.mark.parametrize(
        ("rotation", "got", "advice"),
        [
            ("60", "60", 'write "60 deg" for degrees'),
            ("1.5", "1.5", 'write "1.5 deg" for degrees'),
            ('"60"', '"60"', 'write "60 deg" for degrees'),
            ('"60 um"', '"60 um" (a length)', ""),
            ('"0 um"', '"0 um" (a length)', ""),
            ('"60 deg^2"', '"60 deg^2" (of the kind angle^2)', ""),
            ('"60 / deg"', '"60 / deg" (of the kind angle^-1)', ""),
            ("true", "true", ""),
            ("[60]", "[60]", ""),
            ("nan", "nan", ""),
            ("inf", "inf", ""),
            ("1979-05-27", "1979-05-27", ""),
        ],
    )
    def test_other_forms(self, rotation: str, got: str, advice: str, problems: Problems) -> None:
        (problem,) = problems(text(rotation))
        assert problem.key == "[spin] rotation"
        assert (problem.got, problem.allowed) == (got, ALLOWED)
        assert problem.advice == advice
        assert problem.line == 5

    def test_unknown_units_name_the_nearest(self, problems: Problems) -> None:
        (problem,) = problems(text('"60 degree"'))
        assert problem.key == "[spin] rotation"
        assert "did you mean deg?" in problem.advice
        (problem,) = problems(text('"60 Rad"'))
        assert "did you mean rad?" in problem.advice

    @pytest.mark.parametrize(
        ("particles", "got"),
        [
            ("up = 7", "a rotation of 1 component"),
            ("up = 7, down = 4, other = 3", "a rotation of 3 components"),
            ("up = 7, down = 4, other = 0", "a rotation of 3 components"),
        ],
    )
    def test_two_components_are_needed(self, particles: str, got: str, problems: Problems) -> None:
        (problem,) = problems(text('"60 deg"', particles))
        assert problem.key == "[spin] rotation"
        assert problem.got == got
        assert problem.allowed == "two components, of which one may have no particles"
        assert problem.advice == (
            "name a second component, such as particles = { up = 49, down = 0 }"
            if got.endswith("1 component")
            else "leave the rotation out, or all components but two"
        )
        assert problem.line == 5

    @pytest.mark.parametrize(
        ("particles", "name"),
        [("up = 0", "up"), ("up = 7, down = 4, other = 0", "other"), ("up = 0, down = 0", "up")],
    )
    @pytest.mark.parametrize("rotation", [None, "0"])
    def test_no_particles(
        self, rotation: str | None, particles: str, name: str, problems: Problems
    ) -> None:
        (problem,) = problems(text(rotation, particles))
        assert problem.key == f"[gas] particles.{name}"
        assert problem.got == "0"
        assert problem.allowed == "a whole number from 1 to 20000, or 0 in one of two components"
        assert problem.advice == "give it particles, or leave it out"
        assert problem.line == 3

    @pytest.mark.parametrize(
        ("rotation", "particles", "labels"),
        [
            (None, "up = 7, down = 0", ["up-up"]),
            ('"360 deg"', "up = 0, down = 7", ["down-down"]),
            ('"180 deg"', "up = 7, down = 0", ["down-down"]),
            ('"-180 deg"', "up = 0, down = 7", ["up-up"]),
            ('"1e-6 deg"', "up = 7, down = 0", ["up-up", "up-down", "down-down"]),
        ],
    )
    def test_pairs_of_a_polarised_gas(
        self, rotation: str | None, particles: str, labels: list[str]
    ) -> None:
        system = read(rotation, particles).system()
        grid = separation_grid(system, 5)
        assert [label for label, *_ in grid.pairs] == labels
        assert np.isfinite(expected(system, grid)["pair_correlation"]).all()

    def test_unknown_keys(self, problems: Problems) -> None:
        (problem,) = problems(text(None) + '[spin]\nrotate = "60 deg"\n')
        assert problem.key == "[spin] rotate"
        assert "rotation" in problem.advice


class TestDigest:
    def test_each_angle_is_another_run(self) -> None:
        angles = [None, '"60 deg"', '"300 deg"', '"120 deg"', '"180 deg"', '"60.001 deg"']
        runs = [read(angle) for angle in angles]
        assert len({digest(run) for run in runs}) == len(runs)
        for run in runs[1:]:
            keys = [key for key, _, _ in differing_keys(canonical(runs[0]), canonical(run))]
            assert keys == ["spin.rotation"]

    def test_opposite_angles_have_one_law_in_two_streams(self) -> None:
        one, other = read('"60 deg"'), read('"-60 deg"')
        assert one.system().detected_populations == pytest.approx(
            other.system().detected_populations
        )
        assert digest(one) != digest(other) == digest(read('"300 deg"'))
