"""``pairmc check``: what a run is and what it costs, without drawing anything."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click
import numpy as np

from pairmc.cli import text

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pairmc.physics.gas import Gas
    from pairmc.physics.two_particles import TwoParticleState
    from pairmc.runfile.run import RunFile

# Twists over which `check` averages; those of the snapshots are many more.
_COLD_TWISTS, _WARM_TWISTS = 500, 12

# Differences that are rounding.
_ROUNDING = 1e-12

# k_F r within which the exchange hole lies, in any dimension.
_SHORT_REACH = 4.0

_WORDS = {
    "total_density": "total density",
    "r_s": "r_s",
    "fermi_wavenumber": "k_F of the majority component",
}


@click.command()
@click.argument("run_file", metavar="RUN.toml", type=click.Path())
def check(run_file: str) -> None:
    """Read a run file and say what it means: scales, shells, time, memory, file size.

    Nothing is drawn and nothing is written. A run file with mistakes is refused, all of them at
    once.
    """
    from pairmc.runfile.read import read_run_file
    from pairmc.running.cost import FIRST_COMPILATION, estimate

    run = read_run_file(run_file)
    gas, system = run.gas, run.system()
    lines = [run.title, ""]
    lines += [f"  {_WORDS.get(key, key)}: {value}" for key, value in run.understood().items()]
    length = gas.units.length
    sides = " × ".join(f"{side:.5g}" for side in system.sides)
    lines.append(f"  box: {sides} {length}".rstrip() + f", periodic; {_twist(run)}")
    if gas.polarisation is not None:
        lines.append(f"  polarisation: {gas.polarisation:.5g}")
    if run.rotation:
        means = ", ".join(
            f"{name} {number:.6g}"
            for name, number in zip(gas.components, system.detected_populations, strict=True)
        )
        lines.append(f"  all spins rotated by {run.rotation:g} deg; detected on average: {means}")
    lines += ["", _components(run), ""]
    lines += _closed_shells(run) + open_shell_messages(run) + _warm_lines(run)
    lines += _ranges(run) + (_state(run) if run.occupation else _finite_size(run))
    lines += _units(run)
    cost = estimate(run)
    lines.append(
        f"cost: {run.snapshots} snapshots in {run.batches} batches, "
        f"{text.duration(cost.seconds)} on one core (the very first run compiles for "
        f"{text.duration(FIRST_COMPILATION)} more), memory about {text.size(cost.memory)}, "
        f"file about {text.size(cost.file)}"
    )
    click.echo("\n".join(lines))


def _components(run: RunFile) -> str:
    """Return the table of components."""
    gas = run.gas
    head = ["component", "particles", "density", "k_F", "1/k_F"]
    energies = gas.fermi_energies
    if energies is not None:
        head += ["E_F"] + (["T_F"] if gas.units.joules is not None else [])
    rows = [head]
    for index, name in enumerate(gas.components):
        wavenumber = gas.fermi_wavenumbers[index]
        row = [
            name,
            str(gas.populations[index]),
            text.with_unit(gas.densities[index], gas.units.length, -gas.dimension),
            text.with_unit(wavenumber, gas.units.length, -1),
            text.with_unit(1 / wavenumber, gas.units.length) if wavenumber else "",
        ]
        if energies is not None:
            row.append(text.energy(energies[index], gas.units))
            warmth = text.energy_as_temperature(energies[index], gas.units)
            if warmth is not None:
                row.append(warmth)
        rows.append(row)
    return text.table(rows)


def _warm_lines(run: RunFile) -> list[str]:
    """Return what a temperature adds: ensemble, λ_T, μ, S(q → 0), the orbitals kept."""
    gas = run.gas
    if gas.thermal_wavelength is None:
        return []
    from pairmc.physics import thermal
    from pairmc.physics.occupation.cutoff import TAIL

    wavelength = text.with_unit(gas.thermal_wavelength, gas.units.length)
    fixed = "fixed populations" if gas.ensemble == "canonical" else "populations are means"
    lines = [f"{gas.ensemble}: {fixed}; thermal wavelength {wavelength}"]
    for index, (name, occupation) in enumerate(
        zip(gas.components, run.system().components, strict=True)
    ):
        if not occupation.population:
            continue
        scale = (gas.dimension, gas.densities[index], gas.thermal_energy)
        fermi_energy = 0.5 * gas.fermi_wavenumbers[index] ** 2
        lines.append(
            f"{name}: {gas.thermal_energy / fermi_energy:.4g} of its T_F; infinite gas: μ = "
            f"{thermal.chemical_potential(*scale) / fermi_energy:.5g} E_F, energy per particle "
            f"{thermal.energy_per_particle(*scale) / fermi_energy:.5g} E_F, S(q → 0) = "
            f"{thermal.long_wavelength_structure_factor(*scale):.4g}; "
            f"{len(occupation.orbitals)} orbitals kept (all but {TAIL:g} of a particle)"
        )
    return lines


def _twist(run: RunFile) -> str:
    """Return the twist of the boundary conditions, and what follows it."""
    if run.twist == "averaged":
        if run.gas.ensemble == "canonical":
            return "every snapshot has a twist of its own, at fixed populations"
        return (
            "every snapshot has a twist of its own, and populations follow it (fixed k_F; given "
            "populations are means)"
        )
    if any(run.twist):
        return f"twist {', '.join(f'{part:g}' for part in run.twist)} (in units of 2π)"
    return "no twist"


def _ranges(run: RunFile) -> list[str]:
    """Return how far separations reach, how fine they are, and whether the box is too slim."""
    system, gas = run.system(), run.gas
    wavenumber, reach = gas.fermi_wavenumbers[gas.majority], 0.5 * min(system.sides)
    bins = run.observables["pair_correlation"].bins
    width = reach / bins
    length = gas.units.length
    lines = [
        f"separations: up to {text.with_unit(reach, length)} (k_F r = {reach * wavenumber:.4g}), "
        f"half the shortest side, in {bins} bins of {text.with_unit(width, length)} "
        f"(k_F r = {width * wavenumber:.3g})"
    ]
    if reach * wavenumber < _SHORT_REACH and system.pair is None:
        lines.append(
            f"warning: the exchange hole reaches to about k_F r = {_SHORT_REACH:g}; take more "
            "particles, or sides that differ less"
        )
    return lines


def _state(run: RunFile) -> list[str]:
    """Return what the named orbitals amount to: energy, wave vector, degeneracy."""
    from pairmc.physics.listed_states import state_of

    gas, summary = run.gas, state_of(run.system())
    if summary is None:
        return ["orbitals: a component whose shell is open has no state of its own"]
    energy = _energy(gas, summary.energy)
    above = _energy(gas, summary.excitation_energy)
    ways = "not counted" if summary.degeneracy is None else f"{summary.degeneracy}"
    wave = ", ".join(
        text.with_unit(part, gas.units.length, -1) for part in summary.wave_vector + 0.0
    )
    state = run.system().pair
    return [
        *([] if state is None else [_pair(state)]),
        f"orbitals as named: energy {energy}, {above} above the ground state; total wave vector "
        f"({wave}); states of this energy and these populations: {ways}",
    ]


def _energy(gas: Gas, value: float) -> str:
    """Return an energy in ħ²/(m · length²) in the run's unit; over ħ²/m where no mass is known."""
    if gas.units.kinetic is None:
        return f"{text.with_unit(value, gas.units.length, -2)} × ħ²/m"
    return text.energy(gas.units.kinetic * value, gas.units)


def _pair(state: TwoParticleState) -> str:
    """Return what state two particles are in."""
    one, other = (list(map(int, row)) for row in state.numbers)
    where = f"both in orbital {one}" if one == other else f"in orbitals {one} and {other}"
    return f"one spin {state.kind} of two particles, {where}"


def _finite_size(run: RunFile) -> list[str]:
    """Return by how much this box differs from the infinite system, exactly, in g and in S(q)."""
    from pairmc.physics.grids import separation_grid
    from pairmc.physics.theory import pair_correlation, structure_factor

    system, gas = run.system(), run.gas
    grid = separation_grid(system, run.observables["pair_correlation"].bins)
    bulk = pair_correlation.bulk(system, grid)["pair_correlation"]
    longest = system.sides.index(max(system.sides))
    step = tuple(int(a == longest) for a in range(gas.dimension))
    twists = _example_twists(run)
    if len(twists):
        own = pair_correlation.at_twists(system, grid, twists).mean(axis=0)
    else:
        own = pair_correlation.expected(system, grid)["pair_correlation"]
    q = system.axes[longest].steps(np.array(1)).item()
    lines = []
    for row, (label, i, j) in enumerate(grid.pairs):
        if not run.rotation and i != j:
            continue
        wavenumber = gas.fermi_wavenumbers[i if gas.populations[i] else gas.majority]
        if np.abs(own[row] - bulk[row]).max() < _ROUNDING:
            lines.append(f"{label}: g of this box is that of the infinite system")
            continue
        place = int(np.abs(own[row] - bulk[row]).argmax())
        separation = 0.5 * (grid.edges[place] + grid.edges[place + 1])
        line = (
            f"{label}: this box less the infinite system: g differs by up to "
            f"{own[row, place] - bulk[row, place]:+.2g} (at k_F r = {wavenumber * separation:.3g})"
        )
        if not run.rotation:
            if len(twists):
                factor = float(structure_factor.at_twists(system, i, step, twists).mean())
            else:
                factor = structure_factor.expected(system, i, step)
            line += (
                f"; S at the smallest wave number, q = {q / wavenumber:.3g} k_F, is {factor:.4f} "
                f"against {structure_factor.bulk(gas, i, q):.4f}"
            )
        lines.append(line + (f", mean over {len(twists)} twists" if len(twists) else ""))
    return lines


def _example_twists(run: RunFile) -> NDArray[np.float64]:
    """Return a few twists that stand for those of the snapshots; none where there is one for all.

    They step evenly through the cell (the sequence of R. Richtmyer: multiples of square roots).
    """
    if run.twist != "averaged":
        return np.empty((0, run.gas.dimension))
    count = _WARM_TWISTS if run.gas.thermal_energy > 0 else _COLD_TWISTS
    steps = np.sqrt([2.0, 3.0, 5.0])[: run.gas.dimension]
    return np.asarray(np.mod(np.arange(count)[:, None] * steps + 0.5, 1.0) - 0.5)


def _closed_shells(run: RunFile) -> list[str]:
    """Return a line for each component that is one determinant."""
    from pairmc.physics.occupation.listed import Listed

    occupations = zip(run.gas.components, run.system().occupations, strict=False)
    return [
        f"{name}: {'named orbitals' if isinstance(occupation, Listed) else 'closed shell'}, "
        f"one determinant of {occupation.population}"
        for name, occupation in occupations
        if occupation.closed and occupation.population and run.system().pair is None
    ]


def open_shell_messages(run: RunFile) -> list[str]:
    """Return a line for each component whose shell is open, with the numbers that close it."""
    from pairmc.physics.occupation.ground import GroundState
    from pairmc.physics.orbitals import nearest_closed

    system = run.system()
    lines = []
    for name, occupation in zip(run.gas.components, system.components, strict=True):
        if system.pair is None and isinstance(occupation, GroundState) and not occupation.closed:
            near = " and ".join(map(str, nearest_closed(system.axes, occupation.population)))
            lines.append(
                f"{name}: open shell, {occupation.valence} of {occupation.degeneracy} orbitals of "
                f"the last level filled; snapshots are an equal mixture of all fillings. Nearest "
                f"closed shells: {near}"
            )
    return lines


def _units(run: RunFile) -> list[str]:
    """Return what is missing for energies, if anything."""
    if run.gas.units.kinetic is None:
        return ["energies: unknown; give [gas] mass to have E_F and T_F"]
    return []
