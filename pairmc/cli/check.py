"""``pairmc check``: what a run is and what it costs, without drawing anything."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from pairmc.cli import text

if TYPE_CHECKING:
    from pairmc.runfile.run import RunFile


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
    lines.append(f"  box: {sides} {length}".rstrip() + ", periodic")
    if gas.polarisation is not None:
        lines.append(f"  polarisation: {gas.polarisation:.5g}")
    lines += ["", _components(run), ""]
    lines += _closed_shells(run) + open_shell_messages(run) + _warm_lines(run)
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
            text.with_unit(1 / wavenumber, gas.units.length),
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
        zip(gas.components, run.system().occupations, strict=True)
    ):
        scale = (gas.dimension, gas.densities[index], gas.thermal_energy)
        fermi_energy = 0.5 * gas.fermi_wavenumbers[index] ** 2
        lines.append(
            f"{name}: {gas.thermal_energy / fermi_energy:.4g} of its T_F; infinite gas: μ = "
            f"{thermal.chemical_potential(*scale) / fermi_energy:.5g} E_F, energy per particle "
            f"{thermal.energy_per_particle(*scale) / fermi_energy:.5g} E_F, S(q → 0) = "
            f"{thermal.long_wavelength_structure_factor(*scale):.4g}; "
            f"{len(occupation.orbitals.level)} orbitals kept (all but {TAIL:g} of a particle)"
        )
    return lines


def _closed_shells(run: RunFile) -> list[str]:
    """Return a line for each component whose shell is closed."""
    occupations = zip(run.gas.components, run.system().occupations, strict=True)
    return [
        f"{name}: closed shell, one determinant of {occupation.population}"
        for name, occupation in occupations
        if occupation.closed
    ]


def open_shell_messages(run: RunFile) -> list[str]:
    """Return a line for each component whose shell is open, with the numbers that close it."""
    from pairmc.physics.occupation.ground import GroundState
    from pairmc.physics.orbitals import nearest_closed

    system = run.system()
    lines = []
    for name, occupation in zip(run.gas.components, system.occupations, strict=True):
        if isinstance(occupation, GroundState) and not occupation.closed:
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
