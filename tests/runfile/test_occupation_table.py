"""The table of filled orbitals: its forms, every refusal, and what is the same state."""

from __future__ import annotations

import json
import tomllib
from collections.abc import Mapping
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pairmc.physics.axes.periodic import Periodic
from pairmc.runfile.occupation import ChangedSpec, ListedSpec, OccupationSpec, PairSpec, occupation
from pairmc.runfile.occupation_checks import canonical_occupation, check_occupation, filled_orbitals
from pairmc.runfile.problems import Finding, Refusal, RefusedError

TABLE = "one entry per component, or one singlet or triplet of two particles"
COMPONENT = (
    "a list of all filled orbitals, such as [[0, 0], [1, 0]], or changes to the ground state, such "
    "as { emptied = [[0, 0]], filled = [[3, 0]] }"
)
LIST = "a list of orbitals, such as [[0, 0], [1, 0]]"
VECTOR = "one whole number per axis, from -1000 to 1000, such as [1, 0]"
KEYS = "displaced, emptied, filled"
AXES_ALIKE = "as many quantum numbers in each"
BRACKETS = "put each orbital into brackets of its own"
SHARED = "no two particles of a component share an orbital"

SQUARE = (Periodic(1.0), Periodic(1.0))
UP_DOWN = {"up": 5, "down": 9}


def table(text: str) -> Any:
    """Return the table of a text in TOML."""
    return tomllib.loads(f"[occupation]\n{text}")["occupation"]


def read(text: str) -> OccupationSpec:
    return occupation(table(text))


def refusals(value: Any) -> tuple[Refusal, ...]:
    with pytest.raises(RefusedError) as caught:
        occupation(value)
    return caught.value.refusals


def refused(text: str) -> tuple[Refusal, ...]:
    return refusals(table(text))


def check(
    text: str, particles: Mapping[str, int] | None = None, dimension: int | None = 2, **more: Any
) -> list[Finding]:
    return list(check_occupation(read(text), dimension, particles or UP_DOWN, **more))


def in_box(text: str, axes=SQUARE, particles: Mapping[str, int] | None = None) -> list[Finding]:
    return check(text, particles, len(axes), axes=axes)


class TestForms:
    def test_listed_and_changed(self) -> None:
        spec = read(
            "up = [[0, 0], [1, 0], [0, 1]]\n"
            "down = { displaced = [1, 0], emptied = [[0, 0]], filled = [[3, 0]] }"
        )
        up = ListedSpec(((0, 0), (1, 0), (0, 1)))
        down = ChangedSpec((1, 0), ((0, 0),), ((3, 0),))
        assert spec == OccupationSpec((("up", up), ("down", down)))
        assert hash(spec) == hash(OccupationSpec((("up", up), ("down", down))))

    @pytest.mark.parametrize(
        ("text", "spec"),
        [
            ("{ displaced = [-2] }", ChangedSpec((-2,))),
            ("{ emptied = [[0]], filled = [[5]] }", ChangedSpec((), ((0,),), ((5,),))),
            ("{ filled = [[5]] }", ChangedSpec((), (), ((5,),))),
            ("[[1000]]", ListedSpec(((1000,),))),
            ("[[-1000], [0]]", ListedSpec(((-1000,), (0,)))),
        ],
    )
    def test_parts_left_out(self, text: str, spec: ListedSpec | ChangedSpec) -> None:
        assert read(f"down = {text}").components == (("down", spec),)

    def test_a_table_of_its_own(self) -> None:
        text = "[occupation.up]\ndisplaced = [1, 0]\n"
        assert occupation(tomllib.loads(text)["occupation"]) == read("up = { displaced = [1, 0] }")

    @pytest.mark.parametrize(
        ("text", "pair"),
        [
            ("singlet = [[0, 0], [1, 0]]", PairSpec("singlet", ((0, 0), (1, 0)))),
            ("singlet = [[2], [2]]", PairSpec("singlet", ((2,), (2,)))),
            ("triplet = [[1, 2, 3], [0, 0, 0]]", PairSpec("triplet", ((1, 2, 3), (0, 0, 0)))),
        ],
    )
    def test_pairs(self, text: str, pair: PairSpec) -> None:
        assert read(text) == OccupationSpec((), pair)


class TestRefusedAlone:
    """What is wrong whatever the gas."""

    @pytest.mark.parametrize(
        ("value", "got", "advice"),
        [
            ({}, "an empty table", "leave it out for the ground state"),
            ([[0, 0]], "a list of lists", ""),
            ("ground", '"ground"', ""),
            (3, "3", ""),
            (True, "true", ""),
        ],
    )
    def test_the_table(self, value: Any, got: str, advice: str) -> None:
        assert refusals(value) == (Refusal(got, TABLE, advice),)

    @pytest.mark.parametrize(
        ("text", "refusal"),
        [
            ("3", Refusal("3", COMPONENT)),
            ('"all"', Refusal('"all"', COMPONENT)),
            ("{}", Refusal("an empty table", COMPONENT)),
            ("[]", Refusal("[]", LIST)),
            ("[0, 1]", Refusal("[0, 1]", LIST, BRACKETS)),
            ("[[0, 0], 1]", Refusal("1", VECTOR)),
            ("[[0, 0], []]", Refusal("[]", VECTOR)),
            ("[[0, 0], [0.5, 1]]", Refusal("[0.5, 1]", VECTOR)),
            ("[[1.0, 0]]", Refusal("[1.0, 0]", VECTOR, "write 1, without a decimal point")),
            ("[[1e300, 0]]", Refusal("[1e+300, 0]", VECTOR)),
            ("[[nan, 0]]", Refusal("[nan, 0]", VECTOR)),
            ("[[true, 0]]", Refusal("[true, 0]", VECTOR)),
            ('["0, 0"]', Refusal('"0, 0"', VECTOR)),
            ("[[[0, 0]]]", Refusal("a list of lists", VECTOR)),
            ("[[0, 1001]]", Refusal("[0, 1001]", VECTOR)),
            ("[[-1001, 0]]", Refusal("[-1001, 0]", VECTOR)),
            ("[[0, 0], [1]]", Refusal("[0, 0] and [1]", AXES_ALIKE)),
            (
                "[[0, 0], [1, 0], [0, 0]]",
                Refusal("[0, 0] more than once", "each orbital once", SHARED),
            ),
        ],
    )
    def test_a_component(self, text: str, refusal: Refusal) -> None:
        below = Refusal(refusal.got, refusal.allowed, refusal.advice, ("down",))
        assert refused(f"down = {text}") == (below,)

    @pytest.mark.parametrize(
        ("text", "refusal"),
        [
            ("displacd = [1, 0]", Refusal("an unknown key", KEYS, "did you mean displaced?")),
            ("seed = 3", Refusal("an unknown key", KEYS)),
            ("displaced = 1", Refusal("1", VECTOR)),
            ("displaced = [[1, 0]]", Refusal("a list of lists", VECTOR)),
            ("displaced = [1.5, 0]", Refusal("[1.5, 0]", VECTOR)),
            ("emptied = []", Refusal("[]", LIST)),
            ("filled = [0, 3]", Refusal("[0, 3]", LIST, BRACKETS)),
            ("filled = [[0, 3], [0]]", Refusal("[0, 3] and [0]", AXES_ALIKE)),
            (
                "filled = [[3, 0], [3, 0]]",
                Refusal("[3, 0] more than once", "each orbital once", SHARED),
            ),
        ],
    )
    def test_one_key_of_changes(self, text: str, refusal: Refusal) -> None:
        key = text.split(" ")[0]
        below = Refusal(refusal.got, refusal.allowed, refusal.advice, ("down", key))
        assert refused(f"down = {{ {text} }}") == (below,)

    def test_changes_that_contradict_one_another(self) -> None:
        uneven = Refusal("[1, 0] and [2]", AXES_ALIKE, "", ("up",))
        assert refused("up = { displaced = [1, 0], emptied = [[2]] }") == (uneven,)
        both = Refusal(
            "[0, 0], which is emptied too",
            "each orbital in one of the two",
            "leave it out of both",
            ("up", "filled"),
        )
        assert refused("up = { emptied = [[0, 0], [1, 0]], filled = [[4, 0], [0, 0]] }") == (both,)

    @pytest.mark.parametrize(
        ("text", "refusal"),
        [
            (
                "singlet = [[0, 0]]",
                Refusal(
                    "1 orbital",
                    "the 2 orbitals of two particles",
                    "write one orbital twice for both particles in it",
                ),
            ),
            (
                "triplet = [[0, 0], [1, 0], [2, 0]]",
                Refusal("3 orbitals", "the 2 orbitals of two particles"),
            ),
            (
                "triplet = [[1, 0], [1, 0]]",
                Refusal(
                    "[1, 0] twice",
                    "two different orbitals",
                    "two particles in one orbital are a singlet",
                ),
            ),
            ("singlet = { filled = [[0, 0], [1, 0]] }", Refusal("a table", LIST)),
            ("singlet = [[0, 0], [1]]", Refusal("[0, 0] and [1]", AXES_ALIKE)),
        ],
    )
    def test_pairs(self, text: str, refusal: Refusal) -> None:
        kind = text.split(" ")[0]
        assert refused(text) == (Refusal(refusal.got, refusal.allowed, refusal.advice, (kind,)),)

    @pytest.mark.parametrize("other", ["up", "triplet"])
    def test_a_pair_beside_anything(self, other: str) -> None:
        (refusal,) = refused(f"singlet = [[0], [1]]\n{other} = [[0], [2]]")
        advice = "a singlet or triplet says all about both particles"
        assert refusal == Refusal(f"singlet and {other}", TABLE, advice)

    def test_all_mistakes_at_once(self) -> None:
        found = refused("up = [[0.5]]\ndown = { emptid = [[0]], filled = [] }\nodd = 1")
        assert [refusal.at for refusal in found] == [
            ("up",),
            ("down", "emptid"),
            ("down", "filled"),
            ("odd",),
        ]

    @given(
        st.recursive(
            st.none()
            | st.booleans()
            | st.integers()
            | st.floats()
            | st.text(max_size=5)
            | st.dates(),
            lambda part: (
                st.lists(part, max_size=4)
                | st.dictionaries(
                    st.sampled_from(["up", "singlet", "triplet", "displaced", "filled", "x y"]),
                    part,
                    max_size=3,
                )
            ),
            max_leaves=12,
        )
    )
    def test_nothing_but_a_refusal_comes_of_any_value(self, value: Any) -> None:
        try:
            spec = occupation(value)
        except RefusedError:
            return
        assert isinstance(hash(spec), int)


class TestRefusedAcrossTables:
    FITTING = "up = [[0, 0], [1, 0], [-1, 0], [0, 1], [2, 2]]"

    def test_what_fits_is_not_refused(self) -> None:
        text = f"{self.FITTING}\ndown = {{ displaced = [1, 0], emptied = [[0, 0]], "
        text += "filled = [[3, 0]] }"
        assert in_box(text) == []
        assert check("singlet = [[0, 0], [0, 0]]", {"a": 1, "b": 1}) == []

    def test_nothing_is_said_about_what_is_not_known(self) -> None:
        assert list(check_occupation(read("odd = [[0]]"), None, None, axes=SQUARE)) == []

    @pytest.mark.parametrize(
        ("more", "got", "allowed"),
        [
            ({"warm": True}, "a temperature", "temperature = 0"),
            (
                {"ensemble": "grand-canonical"},
                'ensemble = "grand-canonical"',
                'ensemble = "canonical"',
            ),
            (
                {"twist": "averaged"},
                'twist = "averaged"',
                'twist = "none" or one number per axis',
            ),
        ],
    )
    def test_the_filled_orbitals_must_be_certain(
        self, more: dict[str, Any], got: str, allowed: str
    ) -> None:
        (finding,) = check(self.FITTING, **more)
        assert finding.path == ("occupation",)
        assert finding.table
        assert finding.refusal == Refusal(
            f"filled orbitals together with {got}", allowed, "leave out one or the other"
        )
        assert check(self.FITTING, twist=(0.25, 0.0)) == []

    @pytest.mark.parametrize(
        ("dimension", "text", "key", "got", "allowed"),
        [
            (2, "up = [[0]]", "up", "[0]", "2 whole numbers per orbital, as dimension = 2"),
            (1, "up = [[0, 1]]", "up", "[0, 1]", "1 whole number per orbital, as dimension = 1"),
            (
                3,
                "up = { displaced = [1, 0] }",
                "up",
                "[1, 0]",
                "3 whole numbers per orbital, as dimension = 3",
            ),
            (
                3,
                "singlet = [[1, 0], [0, 0]]",
                "singlet",
                "[1, 0]",
                "3 whole numbers per orbital, as dimension = 3",
            ),
        ],
    )
    def test_lengths(self, dimension: int, text: str, key: str, got: str, allowed: str) -> None:
        axes = (Periodic(1.0),) * dimension
        particles = {"up": 1, "down": 1}
        (finding,) = check(text, particles, dimension, axes=axes)
        assert finding == Finding(("occupation", key), Refusal(got, allowed))

    @pytest.mark.parametrize(
        ("name", "advice"),
        [
            ("upp", "did you mean up?"),
            ("Down", "did you mean down?"),
            ("singelt", "did you mean singlet?"),
            ("strange", ""),
        ],
    )
    def test_unknown_components(self, name: str, advice: str) -> None:
        (finding,) = in_box(f"{name} = [[0, 0]]")
        assert finding.path == ("occupation", name)
        assert finding.refusal == Refusal(
            "an unknown component", "up, down, singlet, triplet", advice
        )

    @pytest.mark.parametrize(
        ("text", "particles", "refusal"),
        [
            (
                "[[0, 0], [1, 0]]",
                5,
                Refusal(
                    "2 orbitals for 5 particles",
                    "one orbital per particle",
                    "list 5, or set up = 2 in particles",
                ),
            ),
            (
                "[[0, 0]]",
                2,
                Refusal(
                    "1 orbital for 2 particles",
                    "one orbital per particle",
                    "list 2, or set up = 1 in particles",
                ),
            ),
            (
                "{ emptied = [[0, 0]] }",
                5,
                Refusal(
                    "1 emptied and 0 filled", "as many emptied as filled, for 5 particles in all"
                ),
            ),
            (
                "{ emptied = [[0, 0]], filled = [[2, 0], [3, 0]] }",
                1,
                Refusal(
                    "1 emptied and 2 filled", "as many emptied as filled, for 1 particle in all"
                ),
            ),
            (
                "{ displaced = [0, 1] }",
                0,
                Refusal("orbitals for no particle", "a component with particles", "leave it out"),
            ),
        ],
    )
    def test_populations(self, text: str, particles: int, refusal: Refusal) -> None:
        (finding,) = in_box(f"up = {text}", particles={"up": particles, "down": 5})
        assert finding == Finding(("occupation", "up"), refusal)

    @pytest.mark.parametrize(
        "particles", [{"up": 1}, {"up": 2, "down": 1}, {"up": 1, "down": 1, "odd": 1}]
    )
    def test_pairs_of_other_gases(self, particles: dict[str, int]) -> None:
        (finding,) = check("triplet = [[0, 0], [1, 0]]", particles)
        given = ", ".join(f"{name} = {number}" for name, number in particles.items())
        assert finding.path == ("occupation", "triplet")
        assert finding.refusal == Refusal(
            f"a triplet with particles = {{ {given} }}",
            "two components of one particle each",
            "set particles = { up = 1, down = 1 }, or list the orbitals of each component",
        )

    def test_a_component_with_the_name_of_a_pair(self) -> None:
        (finding,) = check("singlet = [[0, 0], [1, 0]]", {"singlet": 1, "other": 1})
        assert finding.path == ("gas", "particles", "singlet")
        assert finding.refusal == Refusal(
            "a component called singlet", "another name", "here it means a state of two particles"
        )

    @pytest.mark.parametrize(
        ("axes", "population", "near"),
        [
            (SQUARE, 8, "5 or 9"),
            (SQUARE, 2, "1 or 5"),
            ((Periodic(1.0), Periodic(1.5)), 4, "3 or 5"),
            ((Periodic(1.0, -0.5), Periodic(1.0, -0.5)), 5, "4 or 12"),
        ],
    )
    def test_open_shells(self, axes: Any, population: int, near: str) -> None:
        (finding,) = in_box("down = { displaced = [1, 0] }", axes, {"down": population})
        assert finding.path == ("occupation", "down")
        assert finding.refusal == Refusal(
            f"changes to the open shell of {population}",
            f"a closed shell there, such as {near}",
            "close the shell, or list all filled orbitals",
        )
        listed = ", ".join(f"[{m}, 0]" for m in range(population))
        assert in_box(f"down = [{listed}]", axes, {"down": population}) == []
        assert in_box("down = { displaced = [1, 0] }", axes, {"down": int(near[0])}) == []

    def test_changes_of_orbitals_that_are_not_as_said(self) -> None:
        found = in_box("up = { emptied = [[2, 0], [0, 0]], filled = [[1, 0], [3, 0]] }")
        assert found == [
            Finding(
                ("occupation", "up", "emptied"),
                Refusal("[2, 0], which is empty", "a filled orbital"),
            ),
            Finding(
                ("occupation", "up", "filled"),
                Refusal("[1, 0], which is filled already", "an empty orbital"),
            ),
        ]

    def test_changes_count_after_the_displacement(self) -> None:
        advice = "quantum numbers are those after the displacement [1, 0]"
        text = "up = { displaced = [1, 0], emptied = [[-1, 0]], filled = [[2, 0]] }"
        emptied, filled = in_box(text)
        assert emptied.refusal == Refusal("[-1, 0], which is empty", "a filled orbital", advice)
        assert filled.refusal == Refusal(
            "[2, 0], which is filled already", "an empty orbital", advice
        )
        assert in_box(text.replace("[-1, 0]", "[1, 1]").replace("[2, 0]", "[-1, 0]")) == []

    def test_orbitals_far_apart(self) -> None:
        cube = (Periodic(1.0),) * 3
        (finding,) = in_box("up = [[1000, 0, 3], [0, 300, 0]]", cube, {"up": 2})
        assert finding.path == ("occupation", "up")
        assert finding.refusal == Refusal(
            "orbitals spread over 1001 × 301 × 4 quantum numbers",
            "differences that fit a grid of 5000000 points",
            "fill orbitals that are nearer to one another",
        )
        assert in_box("up = [[1000, 0, 3], [0, 100, 0]]", cube, {"up": 2}) == []
        assert in_box("up = [[1000, 7, 3], [1000, 8, 3]]", cube, {"up": 2}) == []

    def test_a_problem_has_the_line_of_its_key(self) -> None:
        (finding,) = in_box("up = { emptied = [[2, 0]], filled = [[3, 0]] }")
        lines = {("occupation", "up"): 8, ("occupation", "up", "emptied"): 9}
        problem = finding.problem(lines)
        assert problem.line == 9
        assert problem.key.endswith("up.emptied")


class TestStates:
    def test_filled_orbitals(self) -> None:
        spec = read("down = { displaced = [1, 0], emptied = [[1, 0]], filled = [[-1, 0]] }")
        down = tuple(
            sorted({(0, 0), (2, 0), (1, 1), (1, -1), (0, 1), (0, -1), (2, 1), (2, -1), (-1, 0)})
        )
        assert filled_orbitals(spec, SQUARE, UP_DOWN) == (None, down)

    @pytest.mark.parametrize(
        "texts",
        [
            (
                "up = [[0, 0], [1, 0], [0, -1], [0, 1], [3, 0]]",
                "up = [[3, 0], [0, 1], [1, 0], [0, 0], [0, -1]]",
                "up = { emptied = [[-1, 0]], filled = [[3, 0]] }",
                "up = { filled = [[3, 0]], emptied = [[-1, 0]], displaced = [0, 0] }",
            ),
            (
                "up = { displaced = [1, 0] }",
                "up = [[0, 0], [1, 0], [2, 0], [1, 1], [1, -1]]",
                "up = { emptied = [[-1, 0], [0, 1], [0, -1]], filled = [[2, 0], [1, 1], [1, -1]] }",
            ),
            ("singlet = [[0, 0], [1, 0]]", "singlet = [[1, 0], [0, 0]]"),
        ],
    )
    def test_one_state_has_one_canonical_form(self, texts: tuple[str, ...]) -> None:
        particles = UP_DOWN if texts[0].startswith("up") else {"up": 1, "down": 1}
        forms = [canonical_occupation(read(text), SQUARE, particles) for text in texts]
        assert forms[0]
        assert all(form == forms[0] for form in forms)
        assert json.loads(json.dumps(forms[0])) == forms[0]

    def test_different_states_have_different_forms(self) -> None:
        texts = (
            "up = { displaced = [1, 0] }",
            "up = { displaced = [-1, 0] }",
            "up = { displaced = [0, 1] }",
            "up = [[0, 0], [1, 0], [0, -1], [0, 1], [3, 0]]",
            "down = { displaced = [1, 0] }",
            "up = { displaced = [1, 0] }\ndown = { displaced = [1, 0] }",
            "singlet = [[0, 0], [1, 0]]",
            "triplet = [[0, 0], [1, 0]]",
            "singlet = [[0, 0], [0, 0]]",
        )
        forms = [canonical_occupation(read(text), SQUARE, UP_DOWN) for text in texts]
        assert len({json.dumps(form) for form in forms}) == len(texts)

    @pytest.mark.parametrize(
        "text",
        [
            "up = [[0, 0], [1, 0], [0, -1], [0, 1], [-1, 0]]",
            "up = { displaced = [0, 0] }",
            "down = { displaced = [0, 0] }\nup = [[1, 0], [0, 0], [0, -1], [0, 1], [-1, 0]]",
        ],
    )
    def test_the_ground_state_is_no_listed_state(self, text: str) -> None:
        assert canonical_occupation(read(text), SQUARE, UP_DOWN) is None
        assert canonical_occupation(None, SQUARE, UP_DOWN) is None

    def test_one_of_many_ground_states_is_listed(self) -> None:
        """An open shell without the table is a mixture, with it one determinant."""
        particles = {"up": 2}
        form = canonical_occupation(read("up = [[1, 0], [0, 0]]"), SQUARE, particles)
        assert form == {"up": [[0, 0], [1, 0]]}

    def test_the_ground_state_follows_the_twist(self) -> None:
        axes = (Periodic(1.0, -0.5), Periodic(1.0, -0.5))
        spec = read("up = [[0, 0], [1, 0], [0, 1], [1, 1]]")
        assert canonical_occupation(spec, axes, {"up": 4}) is None
        assert canonical_occupation(spec, SQUARE, {"up": 4}) is not None
