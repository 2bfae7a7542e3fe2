"""What a good run file means: defaults, units, the gas that comes out."""

import json
import math
import pickle
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
import scipy.constants as codata
from hypothesis import given, settings
from hypothesis import strategies as st

from pairmc.errors import InputError
from pairmc.physics.observables.pair_correlation_settings import Settings
from pairmc.runfile.read import RunFile, read_run_file, read_run_text
from pairmc.units import Units

RUNS = Path(__file__).parents[2] / "runs"
BOHR = codata.physical_constants["Bohr radius"][0]


def test_defaults(gas: str) -> None:
    run = read_run_text(gas)
    assert run.title == "Free Fermi gas in 2D, up = 49, down = 37"
    assert (run.path, run.text) == ("run file", gas)
    assert run.gas.components == ("up", "down")
    assert run.gas.populations == (49, 37)
    assert run.gas.total_density == 1.0
    assert run.gas.units == Units()
    assert run.sides == (1.0, 1.0)
    assert (run.sampler, run.snapshots, run.batches, run.batch_size) == ("direct", 20000, 40, 500)
    assert (run.seed, run.keep_snapshots) == (20261201, 0)
    assert run.observables == {"pair_correlation": Settings(bins=80)}
    assert run.mass_kilogram is None


def test_every_key_that_is_served_is_taken() -> None:
    run = read_run_text(
        """
title = "  All of it "
gas.dimension = 3
gas.particles = { a = 7, b_2 = 19, C = 1 }
gas.total_density = "2 nm^-3"
gas.temperature = "0 nK"
gas.mass = "1e-26 kg"
gas.ensemble = "canonical"
[spin]
rotation = "0 rad"
[confinement]
axes = ["periodic", "periodic", "periodic"]
sides = [1, 2.5, 0.5]
twist = "none"
[sampling]
sampler = "direct"
snapshots = 90
batches = 9
seed = 340282366920938463463374607431768211455
keep_snapshots = "all"
[observables.pair_correlation]
bins = 7
"""
    )
    assert run.title == "All of it"
    assert run.gas.components == ("a", "b_2", "C")
    assert run.gas.populations == (7, 19, 1)
    assert run.gas.total_density == 2.0
    assert (run.gas.units.length, run.gas.units.metres) == ("nm", 1e-9)
    assert run.sides == (1.0, 2.5, 0.5)
    assert (run.batch_size, run.seed, run.keep_snapshots) == (10, 2**128 - 1, None)
    assert run.observables["pair_correlation"].bins == 7
    assert run.mass_kilogram == pytest.approx(1e-26)
    assert run.system().sides == pytest.approx(run.gas.box((1.0, 2.5, 0.5)))
    assert np.prod(run.system().sides) == pytest.approx(27 / 2.0)


@pytest.mark.parametrize("zero", ["0", "0.0", "'0'", "'0 T_F'", "'0 nK'", "'0.0 K'"])
def test_zero_temperature_has_many_spellings(zero: str, gas: str) -> None:
    assert read_run_text(f"{gas}temperature = {zero}").understood()["temperature"] == "0"


def test_atoms_in_micrometres(gas: str) -> None:
    run = read_run_text(gas + 'total_density = "1.1 / um^2"\nmass = "6.015 u"')
    mass = 6.015 * codata.atomic_mass
    assert run.mass_kilogram == pytest.approx(mass, rel=1e-12)
    assert run.gas.units.length == "um"
    assert run.gas.units.energy == "J"
    # E_F = hbar^2 k_F^2/2m with k_F^2 = 4 pi n_up, n_up = 49/86 of the total
    k_squared = 4 * math.pi * 1.1e12 * 49 / 86
    energy = codata.hbar**2 * k_squared / (2 * mass)
    assert run.gas.fermi_energies is not None
    assert run.gas.fermi_energies[0] == pytest.approx(energy, rel=1e-12)
    assert run.gas.fermi_temperatures is not None
    assert run.gas.fermi_temperatures[0] == pytest.approx(energy / codata.k, rel=1e-12)
    assert run.understood() == {
        "total_density": "1.1 um^-2",
        "r_s": "0.537933661 um",
        "fermi_wavenumber": "2.80640334 um^-1",
        "temperature": "0",
        "mass": "6.015 u",
    }


def test_a_length_without_a_mass_knows_no_energy(gas: str) -> None:
    run = read_run_text(gas + 'total_density = "1.1 / um^2"')
    assert run.gas.units.kinetic is None
    assert run.gas.fermi_energies is None
    assert "mass" not in run.understood()


@pytest.mark.parametrize(
    ("dimension", "density"),
    [  # n = 1/(2 r_s), 1/(pi r_s^2), 3/(4 pi r_s^3): Giuliani & Vignale (2005), ch. 1
        (1, 1 / (2 * 2.5)),
        (2, 1 / (math.pi * 2.5**2)),
        (3, 3 / (4 * math.pi * 2.5**3)),
    ],
)
def test_electrons_in_bohr(dimension: int, density: float) -> None:
    run = read_run_text(f"[gas]\ndimension = {dimension}\nparticles = {{ up = 7 }}\nr_s = 2.5")
    assert run.gas.total_density == pytest.approx(density, rel=1e-14)
    assert run.gas.wigner_seitz_radius == pytest.approx(2.5, rel=1e-14)
    units = run.gas.units
    assert (units.length, units.energy, units.kinetic) == ("bohr", "hartree", 1.0)
    assert units.metres == pytest.approx(BOHR, rel=1e-14)
    assert units.joules == pytest.approx(codata.physical_constants["Hartree energy"][0])
    assert run.mass_kilogram == pytest.approx(codata.electron_mass)
    assert run.understood()["mass"] == "1 m_e"
    spelled = f'[gas]\ndimension = {dimension}\nparticles = {{ up = 7 }}\nr_s = "2.5 bohr"'
    assert read_run_text(spelled).gas == run.gas


def test_the_fermi_wave_number_of_electrons() -> None:
    # k_F r_s = (9 pi/4)^(1/3) = 1.919158..., E_F = 1.841584.../r_s^2 hartree (unpolarised, 3D)
    run = read_run_text("[gas]\ndimension = 3\nparticles = { up = 57, down = 57 }\nr_s = 2")
    assert run.gas.fermi_wavenumbers[0] == pytest.approx((9 * math.pi / 4) ** (1 / 3) / 2)
    assert run.gas.fermi_wavenumbers[0] == pytest.approx(1.919158 / 2, rel=1e-6)
    assert run.gas.fermi_energies is not None
    assert run.gas.fermi_energies[0] == pytest.approx(1.841584 / 4, rel=1e-6)


def test_another_mass_scales_the_energy() -> None:
    text = "[gas]\ndimension = 3\nparticles = { up = 57 }\nr_s = 2\nmass = '2 m_e'"
    assert read_run_text(text).gas.units.kinetic == pytest.approx(0.5, rel=1e-15)
    bohr = text.replace("r_s = 2", "total_density = '0.5 / bohr^3'")
    run = read_run_text(bohr)
    assert (run.gas.units.length, run.gas.units.energy) == ("bohr", "hartree")
    assert run.gas.total_density == 0.5


@pytest.mark.parametrize(
    ("dimension", "density"),
    [  # of one component: k/pi, k^2/(4 pi), k^3/(6 pi^2); of both (19 and 7): times 26/19
        (1, 3.0 / math.pi),
        (2, 3.0**2 / (4 * math.pi)),
        (3, 3.0**3 / (6 * math.pi**2)),
    ],
)
def test_the_wave_number_is_the_majority_component_s(dimension: int, density: float) -> None:
    text = f"[gas]\ndimension = {dimension}\nparticles = {{ a = 7, b = 19 }}\n"
    run = read_run_text(text + 'fermi_wavenumber = "3 / um"')
    assert run.gas.total_density == pytest.approx(density * 26 / 19, rel=1e-13)
    assert run.gas.fermi_wavenumbers[1] == pytest.approx(3.0, rel=1e-13)
    assert run.gas.units.length == "um"
    plain = read_run_text(text + "fermi_wavenumber = 3")
    assert plain.gas.total_density == run.gas.total_density
    assert plain.gas.units == Units()


def test_the_system_is_built_once(gas: str) -> None:
    run = read_run_text(gas)
    assert run.system() is run.system()
    assert run.with_seed(3).system() is run.system()


def test_another_seed(gas: str) -> None:
    run = read_run_text(gas)
    other = run.with_seed(np.int64(7))  # type: ignore[arg-type]
    assert (other.seed, type(other.seed)) == (7, int)
    assert run.seed == 20261201
    for seed in (-1, 2**128, True, "7", 1.0):
        with pytest.raises(InputError, match="at least 0 and below 2"):
            run.with_seed(seed)  # type: ignore[arg-type]


def test_a_run_is_a_value(gas: str) -> None:
    run = read_run_text(gas)
    again = pickle.loads(pickle.dumps(run))
    assert again == run
    assert hash(again) == hash(run)
    with pytest.raises(AttributeError):
        run.seed = 3  # type: ignore[misc]


def test_text_is_verbatim_whatever_the_line_ends(tmp_path: Path, gas: str) -> None:
    path = tmp_path / "windows.toml"
    path.write_bytes(b"\xef\xbb\xbf" + gas.replace("\n", "\r\n").encode())
    run = read_run_file(path)
    assert run.text == gas.replace("\n", "\r\n")
    assert run.path == str(path)


@pytest.mark.parametrize("path", sorted(RUNS.glob("*.toml")), ids=lambda path: path.stem)
def test_committed_runs_are_good(path: Path) -> None:
    run = read_run_file(path)
    # no open shell at zero temperature
    assert run.gas.thermal_energy > 0 or all(part.closed for part in run.system().occupations)
    assert run.title in run.text


def test_there_are_committed_runs() -> None:
    names = {path.stem for path in RUNS.glob("*.toml")}
    assert {"quickstart", "electron_gas", "ring", "polarised_gas"} <= names


# What may stand anywhere in a TOML file.
scalars = (
    st.booleans()
    | st.integers()
    | st.integers(min_value=10**300, max_value=10**310)
    | st.floats()
    | st.text(st.characters(exclude_categories=("Cs", "Cc")), max_size=12)
    | st.sampled_from(["1.1 / um^2", "2 bohr", "6 u", "0.2 T_F", "periodic", "all", "none", "0"])
)
values = st.recursive(
    scalars,
    lambda inner: (
        st.lists(inner, max_size=4)
        | st.dictionaries(st.sampled_from(["up", "bins", "a b", "x"]), inner, max_size=3)
    ),
    max_leaves=8,
)
KEYS = {
    "gas": [
        "dimension",
        "particles",
        "total_density",
        "r_s",
        "fermi_wavenumber",
        "temperature",
        "mass",
        "ensemble",
    ],
    "spin": ["rotation"],
    "confinement": ["axes", "sides", "twist"],
    "occupation": ["up", "singlet", "triplet"],
    "sampling": ["sampler", "snapshots", "batches", "seed", "keep_snapshots"],
    "observables": ["pair_correlation", "three_body"],
}


def toml(value: object) -> str:
    """Write a value as TOML."""
    match value:
        case bool():
            return str(value).lower()
        case str():
            return json.dumps(value, ensure_ascii=False)
        case list():
            return f"[{', '.join(map(toml, value))}]"
        case dict():
            return f"{{ {', '.join(f'{json.dumps(k)} = {toml(v)}' for k, v in value.items())} }}"
    return repr(value)


@st.composite
def documents(draw: st.DrawFn) -> str:
    """Draw a run file of known tables and keys with any values, some of them good."""
    lines = []
    if draw(st.booleans()):
        lines.append(f"title = {toml(draw(values))}")
    for table, keys in KEYS.items():
        if draw(st.booleans()):
            lines.append(f"[{table}]")
            chosen = draw(st.lists(st.sampled_from(keys), unique=True))
            lines += [f"{key} = {toml(draw(values))}" for key in chosen]
            if table == "gas" and "dimension" not in chosen:
                lines.append(f"dimension = {draw(st.integers(1, 3))}")
            if table == "gas" and "particles" not in chosen:
                lines.append("particles = { up = 5 }")
    return "\n".join(lines)


@settings(deadline=None, max_examples=400)
@given(documents() | st.text(max_size=60))
def test_any_text_is_a_run_or_refused(text: str) -> None:
    outcome: RunFile | InputError
    try:
        outcome = read_run_text(text)
    except InputError as error:
        outcome = error
    if isinstance(outcome, InputError):
        assert outcome.problems
        assert all(problem.got for problem in outcome.problems)
        count = text.count("\n") + 1
        assert all(p.line is None or 1 <= p.line <= count for p in outcome.problems)
    else:
        assert math.isfinite(outcome.gas.volume)
        assert outcome.understood()


HEAVY = ("numba", "scipy", "xarray", "matplotlib", "pint")


def heavy_imports(code: str) -> list[str]:
    """Return which heavy packages a fresh interpreter holds after running the code."""
    report = f"\nimport sys\nprint([name for name in {HEAVY} if name in sys.modules])"
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", code + report],
        capture_output=True,
        text=True,
        check=True,
    )
    return list(json.loads(done.stdout.replace("'", '"')))


def test_reading_run_files_imports_nothing_heavy(gas: str) -> None:
    reading = f"from pairmc.runfile.read import read_run_text\nread_run_text('''{gas}''')"
    everything = f"{reading}\nimport pairmc.runfile.digest"
    assert heavy_imports(everything) == []
    with_unit = f"{gas}total_density = '1 / um^2'".replace("'", '"')
    assert heavy_imports(reading.replace(gas, with_unit))[-1:] == ["pint"]
