"""The run digest: the same for the same snapshots, another for any others."""

import hashlib
import json

import pytest

from pairmc.runfile import digest as digest_module
from pairmc.runfile.digest import canonical, differing_keys, digest
from pairmc.runfile.read import read_run_text

TEXT = """\
title = "A sheet"
[gas]
dimension = 2
particles = { up = 49, down = 37 }
total_density = "1.1 / um^2"
mass = "6 u"
[confinement]
sides = [1.0, 2.0]
[sampling]
snapshots = 2000
batches = 40
seed = 7
keep_snapshots = 20
[observables.pair_correlation]
bins = 80
"""


def of(text: str) -> str:
    return digest(read_run_text(text))


def changed(*replacements: tuple[str, str]) -> str:
    text = TEXT
    for old, new in replacements:
        assert old in text
        text = text.replace(old, new)
    return text


@pytest.mark.parametrize(
    "replacement",
    [
        ('"1.1 / um^2"', '"1.1e12 / m^2"'),
        ('"1.1 / um^2"', '"1.1e-6 nm^-2"'),
        ('"1.1 / um^2"', '"1.1 micrometre**-2"'),
        ('"1.1 / um^2"', '"1.100000000000001 / um^2"'),
        ('"6 u"', '"9.96323441352e-27 kg"'),  # 6 x 1.66053906892e-27
        ('title = "A sheet"', 'title = "Another"'),
        ('title = "A sheet"', "# no title"),
        ("[1.0, 2.0]", "[3, 6]"),
        ("sides", 'axes = "periodic"\nsides'),
        ("sides", 'axes = ["periodic", "periodic"]\nsides'),
        ("sides", 'twist = "none"\nsides'),
        ("mass", 'temperature = "0 nK"\nmass'),
        ("mass", 'ensemble = "canonical"\nmass'),
        ("[confinement]", "[spin]\nrotation = '0 deg'\n[confinement]"),
        ("bins = 80", ""),
        ("snapshots = 2000\nbatches = 40", "snapshots = 6000\nbatches = 120"),
    ],
)
def test_what_leaves_the_digest(replacement: tuple[str, str]) -> None:
    assert of(changed(replacement)) == of(TEXT)


FLIPS = {
    "gas.dimension": ("dimension = 2", "dimension = 3"),
    "gas.components": ("up = 49, down = 37", "left = 49, down = 37"),
    "gas.populations": ("up = 49", "up = 50"),
    "gas.total_density": ("1.1 / um^2", "1.1000000001 / um^2"),
    "gas.mass": ("6 u", "6.0000000001 u"),
    "confinement.sides": ("[1.0, 2.0]", "[1.0, 2.0000000001]"),
    "sampling.batch_size": ("snapshots = 2000", "snapshots = 4000"),
    "sampling.seed": ("seed = 7", "seed = 8"),
    "sampling.keep_snapshots": ("keep_snapshots = 20", "keep_snapshots = 21"),
    "observables.pair_correlation.bins": ("bins = 80", "bins = 81"),
}


@pytest.mark.parametrize("key", FLIPS)
def test_what_flips_the_digest(key: str) -> None:
    replacements = [FLIPS[key]]
    if key == "gas.dimension":
        replacements += [("1.1 / um^2", "1.1 / um^3"), ("[1.0, 2.0]", "[1.0, 2.0, 1.0]")]
    other = read_run_text(changed(*replacements))
    assert digest(other) != of(TEXT)
    differing = [
        name for name, _, _ in differing_keys(canonical(read_run_text(TEXT)), canonical(other))
    ]
    assert key in differing
    if key != "gas.dimension":
        assert differing == [key]


def test_the_order_of_components_matters() -> None:
    swapped = changed(("up = 49, down = 37", "down = 37, up = 49"))
    assert of(swapped) != of(TEXT)


def test_all_snapshots_kept_is_another_run() -> None:
    assert of(changed(("keep_snapshots = 20", 'keep_snapshots = "all"'))) != of(TEXT)


def test_no_unit_is_not_one_metre() -> None:
    plain = changed(('"1.1 / um^2"', "1.1"), ('mass = "6 u"', ""))
    metres = changed(('"1.1 / um^2"', '"1.1 / m^2"'), ('mass = "6 u"', ""))
    assert [
        key
        for key, _, _ in differing_keys(
            canonical(read_run_text(plain)), canonical(read_run_text(metres))
        )
    ] == ["gas.density_unit"]


def test_a_wigner_seitz_radius_and_its_density_are_one_run() -> None:
    electrons = "[gas]\ndimension = 3\nparticles = { up = 57, down = 33 }\n"
    by_radius = of(electrons + "r_s = 2")
    density = 0.029841551829730388  # 3/(32 pi)
    assert of(f'{electrons}total_density = "{density!r} / bohr^3"') == by_radius
    assert of(f'{electrons}r_s = "2 bohr"\nmass = "1 m_e"') == by_radius
    assert of(electrons + 'r_s = 2\nmass = "2 m_e"') != by_radius
    assert of(electrons + "r_s = 2.0000000001") != by_radius


def test_a_wave_number_and_its_density_are_one_run() -> None:
    atoms = "[gas]\ndimension = 1\nparticles = { up = 5, down = 3 }\n"
    # n = (k/pi) 8/5
    by_wavenumber = of(atoms + 'fermi_wavenumber = "2 / um"')
    assert of(atoms + f'total_density = "{2 / 3.141592653589793 * 8 / 5!r} / um"') == by_wavenumber


def test_the_canonical_form_is_what_is_hashed() -> None:
    # Written out by hand: a change here makes every earlier result another run's.
    expected = {
        "stream_version": 1,
        "gas": {
            "dimension": 2,
            "components": ["up", "down"],
            "populations": [49, 37],
            "total_density": "1.10000000000e+12",
            "density_unit": "m^-2",
            "mass": "9.96323441352e-27",
            "temperature": "0",
            "ensemble": "canonical",
        },
        "spin": {"rotation": "0"},
        "confinement": {
            "axes": ["periodic", "periodic"],
            "sides": ["1.00000000000e+00", "2.00000000000e+00"],
            "twist": "none",
        },
        "sampling": {"sampler": "direct", "batch_size": 50, "seed": "7", "keep_snapshots": 20},
        "detection": None,
        "observables": {"pair_correlation": {"bins": 80}},
    }
    run = read_run_text(TEXT)
    assert canonical(run) == expected
    text = json.dumps(expected, sort_keys=True, separators=(",", ":"))
    assert digest(run) == hashlib.sha256(text.encode()).hexdigest()
    assert len(digest(run)) == 64


def test_a_new_use_of_random_numbers_is_another_run(monkeypatch: pytest.MonkeyPatch) -> None:
    before = of(TEXT)
    monkeypatch.setattr(digest_module, "STREAM_VERSION", 2)
    assert of(TEXT) != before


def test_differing_keys_name_both_values() -> None:
    one = {"a": {"b": 1, "c": [1, 2]}, "d": None, "e": 5}
    other = {"a": {"b": 2, "c": [1, 2]}, "d": {"x": 3}, "e": 5}
    assert differing_keys(one, other) == [("a.b", 1, 2), ("d.x", None, 3)]
    assert differing_keys(one, one) == []
