"""Every kind of refusal, with each of its parts."""

from collections.abc import Callable
from pathlib import Path

import pytest

from pairmc.errors import InputError, Problem
from pairmc.runfile.read import read_run_file, read_run_text

Problems = Callable[[str], tuple[Problem, ...]]

COUNT = "a whole number from 1 to 20000"
TEMPERATURE = '0, or a temperature with its unit, such as "0.2 T_F", "40 nK" or "0.01 hartree"'
GAS_KEYS = "dimension, particles, total_density, r_s, fermi_wavenumber, temperature, mass, ensemble"
LATER = "is not yet available in this release"
ONE_SCALE = "only one of total_density, r_s, fermi_wavenumber"
DENSITY = 'a positive number of particles per length^dimension, such as "1.1 / um^2" in 2D'
MASS = 'a positive mass with its unit, such as "6.015 u" or "1 m_e"'
FORM = "write one number and its unit: no brackets, no second number"
MATRIX = (
    "the orbitals of N particles of one component fill a matrix of about 16 N² bytes, "
    "6.4 GB at this limit"
)
EQUAL = "a number of snapshots that batches divides, so that all batches are of one size"

# One line added as line 4, below [gas]: key, got, allowed, advice.
IN_GAS = {
    'total_density = "1.1 / um^3"': (
        "total_density",
        '"1.1 / um^3" (a number per volume)',
        'a number per area such as "1.1 / um^2", as dimension = 2',
        "correct the power of the length, or the dimension",
    ),
    'total_density = "1.1 um"': ("total_density", '"1.1 um" (a length)', DENSITY, ""),
    'total_density = "1.1 / (um^2)"': ("total_density", '"1.1 / (um^2)"', DENSITY, FORM),
    "total_density = 0": (
        "total_density",
        "0",
        f"{DENSITY}, the number from 1e-30 to 1e+30",
        "",
    ),
    "total_density = -1.5": (
        "total_density",
        "-1.5",
        f"{DENSITY}, the number from 1e-30 to 1e+30",
        "",
    ),
    "total_density = nan": ("total_density", "nan", DENSITY, ""),
    "total_density = inf": ("total_density", "inf", DENSITY, ""),
    "total_density = true": ("total_density", "true", DENSITY, ""),
    "total_density = 1979-05-27": ("total_density", "1979-05-27", DENSITY, ""),
    'r_s = "2 um"': ("r_s", '"2 um"', 'a positive number, in bohr, such as 2 or "2 bohr"', ""),
    'r_s = "2 / bohr"': (
        "r_s",
        '"2 / bohr" (a number per length)',
        'a positive number, in bohr, such as 2 or "2 bohr"',
        "",
    ),
    'fermi_wavenumber = "3 um"': (
        "fermi_wavenumber",
        '"3 um" (a length)',
        'a positive number per length, such as "3.7 / um"',
        "",
    ),
    "mass = 6.015": ("mass", "6.015 (a plain number)", MASS, ""),
    'mass = "6.015 nK"': ("mass", '"6.015 nK" (a temperature)', MASS, ""),
    'mass = "6.015 u"': (
        "mass",
        '"6.015 u"',
        "a mass only where the density has a unit",
        'write total_density = "1.1 / um^2", with a unit, or leave out the mass',
    ),
    "temperature = 0.2": (
        "temperature",
        "0.2",
        TEMPERATURE,
        'write "0.2 T_F" for a multiple of the majority\'s T_F',
    ),
    'temperature = "-3 nK"': ("temperature", '"-3 nK"', TEMPERATURE, "temperatures are absolute"),
    'temperature = "0 um"': ("temperature", '"0 um" (a length)', TEMPERATURE, ""),
    'temperature = "40 nK"': (
        "temperature",
        '"40 nK"',
        "kelvin or an energy only where density has a unit and the mass is given",
        'give both, or write a multiple of T_F, such as "0.2 T_F"',
    ),
    'temperature = "0.0001 T_F"': (
        "temperature",
        "0.0001 T_F of the majority component",
        "0, or from 0.001 T_F to 100 T_F",
        "a colder gas is in its ground state, a hotter one is classical",
    ),
    'ensemble = "cannonical"': (
        "ensemble",
        '"cannonical"',
        '"canonical" or "grand-canonical"',
        "did you mean canonical?",
    ),
    "ensemble = 3": ("ensemble", "3", '"canonical" or "grand-canonical"', ""),
    "total_densty = 1.0": (
        "total_densty",
        "an unknown key",
        GAS_KEYS,
        "did you mean total_density?",
    ),
    "Total-Density = 1.0": (
        "Total-Density",
        "an unknown key",
        GAS_KEYS,
        "did you mean total_density?",
    ),
    "seed = 3": ("seed", "an unknown key", GAS_KEYS, "seed belongs in [sampling]"),
    "bins = 3": (
        "bins",
        "an unknown key",
        GAS_KEYS,
        "bins belongs in [observables.pair_correlation]",
    ),
    "title = 'x'": ("title", "an unknown key", GAS_KEYS, "title belongs above all tables"),
    '"ü ü" = 3': ('"ü ü"', "an unknown key", GAS_KEYS, ""),
}


@pytest.mark.parametrize("line", IN_GAS)
def test_refusals_in_gas(line: str, gas: str, problems: Problems) -> None:
    key, got, allowed, advice = IN_GAS[line]
    assert problems(gas + line) == (Problem(f"[gas] {key}", got, allowed, advice, 4),)


# Two lines added as lines 4 and 5, a table and a key in it: name, got, allowed, advice.
IN_TABLES = {
    "[spin]\nrotation = '0 um'": (
        "[spin] rotation",
        '"0 um" (a length)',
        '0, or an angle with its unit, such as "60 deg" or "1.2 rad"',
        "",
    ),
    "[confinement]\naxes = 'hard-wall'": (
        "[confinement] axes",
        '"hard-wall"',
        f'"periodic" ("hard-wall" {LATER})',
        "a periodic box has no walls; choose it large where walls do not matter",
    ),
    "[confinement]\naxes = ['periodic', 'lattice']": (
        "[confinement] axes",
        '"lattice"',
        f'"periodic" ("lattice" {LATER})',
        "a periodic box has no walls; choose it large where walls do not matter",
    ),
    "[confinement]\naxes = 'periodical'": (
        "[confinement] axes",
        '"periodical"',
        '"periodic"',
        "did you mean periodic?",
    ),
    "[confinement]\naxes = ['periodic']": (
        "[confinement] axes",
        "a list of 1",
        "a list of 2 entries, as dimension = 2",
        "give one entry per axis, or leave it out",
    ),
    "[confinement]\nsides = [1, 2, 3]": (
        "[confinement] sides",
        "a list of 3",
        "a list of 2 entries, as dimension = 2",
        "give one entry per axis, or leave it out",
    ),
    "[confinement]\nsides = [1, 0]": (
        "[confinement] sides",
        "[1, 0]",
        "a list of positive numbers, one per axis, such as [1.0, 2.0]",
        "",
    ),
    "[confinement]\nsides = [1, nan]": (
        "[confinement] sides",
        "[1, nan]",
        "a list of positive numbers, one per axis, such as [1.0, 2.0]",
        "",
    ),
    "[confinement]\nsides = 1": (
        "[confinement] sides",
        "1",
        "a list of positive numbers, one per axis, such as [1.0, 2.0]",
        "",
    ),
    "[confinement]\nsides = [1, 1001]": (
        "[confinement] sides",
        "[1, 1001]",
        "sides of which none is more than 1000 times another",
        "",
    ),
    "[confinement]\ntwist = 'random'": (
        "[confinement] twist",
        '"random"',
        '"none", "averaged", or a list of numbers from -0.5 to 0.5, one per axis',
        "",
    ),
    "[sampling]\nsampler = 'metropolis'": (
        "[sampling] sampler",
        '"metropolis"',
        f'"direct" ("metropolis" {LATER})',
        'set sampler = "direct", which follows the same law',
    ),
    "[sampling]\nsampler = 'metropolise'": (
        "[sampling] sampler",
        '"metropolise"',
        '"direct"',
        "did you mean metropolis?",
    ),
    "[sampling]\nsnapshots = 20010": (
        "[sampling] snapshots",
        "20010 snapshots in 40 batches (the default)",
        EQUAL,
        "set snapshots = 20000 or 20040, or batches = 30 or 46",
    ),
    "[sampling]\nbatches = 41": (
        "[sampling] batches",
        "20000 snapshots in 41 batches",
        EQUAL,
        "set snapshots = 19967 or 20008, or batches = 40 or 50",
    ),
    "[sampling]\nsnapshots = 17": (
        "[sampling] snapshots",
        "17 snapshots in 40 batches (the default)",
        EQUAL,
        "set snapshots = 40, or batches = 17",
    ),
    "[sampling]\nsnapshots = 999999937": (  # a prime number
        "[sampling] snapshots",
        "999999937 snapshots in 40 batches (the default)",
        EQUAL,
        "set snapshots = 999999920 or 999999960",
    ),
    "[sampling]\nbatches = 4": (
        "[sampling] batches",
        "4",
        "a whole number from 8 to 1000000",
        "",
    ),
    "[sampling]\nbatches = 2000000": (
        "[sampling] batches",
        "2000000",
        "a whole number from 8 to 1000000",
        "no run of this size would end; ask for fewer",
    ),
    "[sampling]\nsnapshots = 2e4": (
        "[sampling] snapshots",
        "20000.0",
        "a whole number from 8 to 1000000000",
        "write 20000, without a decimal point",
    ),
    "[sampling]\nsnapshots = 1_000_000_040": (
        "[sampling] snapshots",
        "1000000040",
        "a whole number from 8 to 1000000000",
        "no run of this size would end; ask for fewer",
    ),
    "[sampling]\nsnapshots = true": (
        "[sampling] snapshots",
        "true",
        "a whole number from 8 to 1000000000",
        "",
    ),
    "[sampling]\nseed = -1": (
        "[sampling] seed",
        "-1",
        "a whole number, at least 0 and below 2^128",
        "",
    ),
    f"[sampling]\nseed = {2**128}": (
        "[sampling] seed",
        str(2**128),
        "a whole number, at least 0 and below 2^128",
        "",
    ),
    "[sampling]\nkeep_snapshots = 'al'": (
        "[sampling] keep_snapshots",
        '"al"',
        '"all" or a whole number from 0 to 1000000000',
        "did you mean all?",
    ),
    "[observables.pair_correlation]\nbins = 0": (
        "[observables.pair_correlation] bins",
        "0",
        "a whole number from 1 to 10000",
        "",
    ),
    "[observables.pair_correlation]\nbin = 10": (
        "[observables.pair_correlation] bin",
        "an unknown key",
        "bins",
        "did you mean bins?",
    ),
    "[observables]\npair_correlation = 80": (
        "[observables.pair_correlation]",
        "80",
        "a table of keys and values",
        "",
    ),
}


@pytest.mark.parametrize("lines", IN_TABLES)
def test_refusals_in_other_tables(lines: str, gas: str, problems: Problems) -> None:
    key, got, allowed, advice = IN_TABLES[lines]
    assert problems(gas + lines) == (Problem(key, got, allowed, advice, 5),)


# One line added as line 4, a table by itself.
TABLES = {
    "[scan]": (
        "[scan]",
        "a table not yet available in this release",
        "",
        "write one run file for each point of the scan",
    ),
    "[detection]": (
        "[detection]",
        "a table not yet available in this release",
        "",
        "leave it out: every particle is then seen where it is",
    ),
    "[observables.exchange_hole]": (
        "[observables.exchange_hole]",
        "an observable not yet available in this release",
        "",
        "it is the density times (pair_correlation − 1)",
    ),
    "[observables.pair_corelation]": (
        "[observables.pair_corelation]",
        "an unknown table",
        "pair_correlation, structure_factor, number_statistics, neighbours, exchange_hole, "
        "pair_map, momentum_occupation, three_body",
        "did you mean pair_correlation?",
    ),
    "[observables]": (
        "[observables]",
        "an empty table",
        "at least one observable: [observables.pair_correlation]",
        "leave [observables] out to tally the pair correlation with its defaults",
    ),
    "[samplings]": (
        "[samplings]",
        "an unknown table",
        "title, gas, spin, confinement, occupation, sampling, observables, detection, scan",
        "did you mean sampling?",
    ),
    "[pair_correlation]": (
        "[pair_correlation]",
        "an unknown table",
        "title, gas, spin, confinement, occupation, sampling, observables, detection, scan",
        "pair_correlation belongs in [observables]",
    ),
    "[[sampling]]": (
        "[sampling]",
        "a list of tables",
        "a table of keys and values",
        "write [sampling] in single brackets, once",
    ),
}


@pytest.mark.parametrize("line", TABLES)
def test_refused_tables(line: str, gas: str, problems: Problems) -> None:
    assert problems(gas + line) == (Problem(*TABLES[line], 4),)


@pytest.mark.parametrize(
    "name",
    [
        "structure_factor",
        "number_statistics",
        "neighbours",
        "exchange_hole",
        "pair_map",
        "momentum_occupation",
        "three_body",
    ],
)
def test_observables_of_later_releases_are_known(name: str, gas: str, problems: Problems) -> None:
    (problem,) = problems(f"{gas}[observables.{name}]\nbins = 3")
    assert problem.key == f"[observables.{name}]"
    assert problem.got == "an observable not yet available in this release"
    assert problem.advice


@pytest.mark.parametrize(
    ("particles", "parts"),
    [
        (
            "{}",
            ("", "an empty table", "one entry per spin component, such as { up = 49, down = 37 }"),
        ),
        ("49", ("", "49", "one entry per spin component, such as { up = 49, down = 37 }")),
        (
            "{ up = 0 }",
            (
                ".up",
                "0",
                f"{COUNT}, or 0 in one of two components",
                "give it particles, or leave it out",
            ),
        ),
        ("{ up = -1 }", (".up", "-1", COUNT)),
        ("{ up = true }", (".up", "true", COUNT)),
        ("{ up = 3.0 }", (".up", "3.0", COUNT, "write 3, without a decimal point")),
        ("{ up = 3.5 }", (".up", "3.5", COUNT)),
        ("{ up = '3' }", (".up", '"3"', COUNT)),
        ("{ up = 20001 }", (".up", "20001", COUNT, MATRIX)),
        (f"{{ up = 0x{'f' * 9000} }}", (".up", "an integer of more than 60 digits", COUNT, MATRIX)),
        (
            "{ up-a = 3 }",
            (
                ".up-a",
                '"up-a"',
                "a component name of letters, digits and underscores, a letter first, at most 16 "
                "characters",
                "pairs of components are labelled with a hyphen, as in up-down",
            ),
        ),
        (
            "{ " + ", ".join(f"c{k} = 3" for k in range(21)) + " }",
            ("", "21 components", "at most 20"),
        ),
    ],
)
def test_refused_particles(particles: str, parts: tuple[str, ...], problems: Problems) -> None:
    below, got, allowed, advice = (*parts, "")[:4]
    expected = Problem(f"[gas] particles{below}", got, allowed, advice, 3)
    assert problems(f"[gas]\ndimension = 2\nparticles = {particles}") == (expected,)


@pytest.mark.parametrize("name", ["_up", "1up", "a" * 17, "ü", "up down", "", "up.a"])
def test_refused_component_names(name: str, problems: Problems) -> None:
    (problem,) = problems(f'[gas]\ndimension = 2\nparticles = {{ "{name}" = 3 }}')
    assert problem.allowed.startswith("a component name of letters")


@pytest.mark.parametrize("dimension", ["0", "4", "2.0", "true", "'2'", "[2]"])
def test_refused_dimensions(dimension: str, problems: Problems) -> None:
    (problem,) = problems(f"[gas]\ndimension = {dimension}\nparticles = {{ up = 3 }}")
    assert (problem.key, problem.allowed, problem.line) == ("[gas] dimension", "1, 2 or 3", 2)


def test_what_is_needed_is_said() -> None:
    with pytest.raises(InputError) as caught:
        read_run_text("title = 'nothing'\n[gas]", "run.toml")
    assert str(caught.value).splitlines() == [
        "run.toml:2: [gas] dimension: got nothing, and it is needed; allowed: 1, 2 or 3; "
        "add dimension = 2",
        "run.toml:2: [gas] particles: got nothing, and it is needed; allowed: one entry per spin "
        "component; add particles = { up = 49, down = 37 }",
    ]


def test_all_problems_come_at_once_in_the_order_of_the_file(problems: Problems) -> None:
    found = problems(
        """
[sampling]
batches = 7
seed = "x"

[observables.pair_correlation]
bins = 1e9

[confinement]
sides = [1.0]

[gas]
r_s = 2
dimension = 3
total_density = "1 / um^2"
fermi_wavenumber = "1 um"
particles = { up = -1, down = 3, "a b" = 4 }
scan = 1
"""
    )
    assert [(problem.line, problem.key) for problem in found] == [
        (3, "[sampling] batches"),
        (4, "[sampling] seed"),
        (7, "[observables.pair_correlation] bins"),
        (10, "[confinement] sides"),
        (13, "[gas] r_s"),
        (15, "[gas] total_density"),
        (16, "[gas] fermi_wavenumber"),
        (16, "[gas] fermi_wavenumber"),
        (17, "[gas] particles.up"),
        (17, '[gas] particles."a b"'),
        (18, "[gas] scan"),
    ]
    assert found[4].got == "both total_density and r_s"
    assert found[4].allowed == ONE_SCALE
    assert found[7].got == "both total_density and fermi_wavenumber"


def test_a_misspelt_key_is_not_also_called_missing(problems: Problems) -> None:
    (problem,) = problems("[gas]\ndimensions = 2\nparticles = { up = 5 }")
    assert problem.advice == "did you mean dimension?"
    (problem,) = problems("[gaz]\ndimension = 2\nparticles = { up = 5 }")
    assert problem.advice == "did you mean gas?"
    (problem,) = problems("dimension = 2\n[gas]\nparticles = { up = 5 }")
    assert problem.advice == "dimension belongs in [gas]"


def test_a_refused_density_says_nothing_about_the_mass(gas: str, problems: Problems) -> None:
    (problem,) = problems(gas + "total_density = '1.1 / umm^2'\nmass = '6 u'")
    assert problem.key == "[gas] total_density"


@pytest.mark.parametrize(
    ("text", "got", "advice", "line"),
    [
        (
            "total_density = 1.1 / um^2  # thin",
            '"total_density = 1.1 / um^2  # thin"',
            'put a number with a unit in quotes: "1.1 / um^2"',
            4,
        ),
        ("dimension = 3", '"dimension = 3"', "the key is given twice; keep one", 4),
        ("\nensemble", '"ensemble"', "write key = value", 5),
        ("mass = canonical", '"mass = canonical"', "invalid value", 4),
        ("mass = '6 u", '"mass = \'6 u"', 'expected "\'"', 4),
    ],
)
def test_what_is_not_toml(
    text: str, got: str, advice: str, line: int, gas: str, problems: Problems
) -> None:
    (problem,) = problems(gas + text)
    assert problem == Problem("TOML", got, "key = value, text in quotes", advice, line)


@pytest.mark.parametrize(
    ("text", "got"),
    [
        ("a = " + "[" * 3000 + "]" * 3000, "brackets nested too deeply"),
        ("a = " + "9" * 5000, "an integer of thousands of digits"),
    ],
)
def test_toml_that_no_reader_survives(text: str, got: str, problems: Problems) -> None:
    (problem,) = problems(text)
    assert (problem.key, problem.got) == ("TOML", got)


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    def refused(path: Path | str) -> Problem:
        with pytest.raises(InputError) as caught:
            read_run_file(path)
        (problem,) = caught.value.problems
        assert str(caught.value).startswith(problem.key + ": got ")
        return problem

    missing = tmp_path / "missing.toml"
    allowed = "a run file in TOML"
    assert refused(missing) == Problem(str(missing), "no such file", allowed, "check the name")
    assert refused(tmp_path).got == "a folder"
    assert refused("run\0.toml").got == "an impossible file name"
    latin = tmp_path / "latin.toml"
    latin.write_bytes("title = 'x'\n# Größe\n".encode("latin-1"))
    problem = refused(latin)
    assert problem.got == "bytes on line 2 that are not UTF-8"
    assert problem.line == 2
    large = tmp_path / "large.toml"
    large.write_bytes(b"#" * 1_000_001)
    assert refused(large).got == "more than 1000000 bytes"


def test_a_file_that_may_not_be_read(monkeypatch: pytest.MonkeyPatch) -> None:
    def deny(*_: object) -> None:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr("builtins.open", deny)
    with pytest.raises(InputError, match="a file that may not be read"):
        read_run_file("secret.toml")


def test_the_path_and_line_stand_in_front(tmp_path: Path, gas: str) -> None:
    path = tmp_path / "run.toml"
    path.write_text(gas + "tempratur = 0\n")
    with pytest.raises(InputError) as caught:
        read_run_file(path)
    assert str(caught.value) == (
        f"{path}:4: [gas] tempratur: got an unknown key; allowed: {GAS_KEYS}; "
        "did you mean temperature?"
    )
