"""What must be given in a run file, and what must fit together."""

from __future__ import annotations

from bisect import bisect_left
from collections.abc import Iterator
from math import isqrt

from pairmc.physics.orbitals import nearest_closed
from pairmc.physics.system import build_axes
from pairmc.runfile.fields import LARGEST_COMPONENT
from pairmc.runfile.lines import Path
from pairmc.runfile.models import (
    LARGEST_BATCHES,
    LARGEST_SNAPSHOTS,
    SMALLEST_BATCHES,
    Document,
    GasTable,
    SamplingTable,
)
from pairmc.runfile.occupation import OccupationSpec
from pairmc.runfile.occupation_checks import check_occupation
from pairmc.runfile.problems import Finding, Refusal
from pairmc.runfile.run import RunFile
from pairmc.runfile.scale import check_scale, check_temperature

# Temperatures in T_F of the majority between which sums over orbitals are tested.
COLDEST, HOTTEST = 1e-3, 100.0

# Particles times orbitals of one component: the table that filled orbitals are drawn from.
LARGEST_TABLE = 1e8

# Orbitals of one component with a twist: the grid of their differences, some 15 times as many
# values, cannot be folded.
LARGEST_TWISTED = 5e5


def check(document: Document, refused: set[Path]) -> Iterator[Finding]:
    """Yield what is missing and what contradicts itself, all of it.

    Parameters
    ----------
    document
        The tables, each value read on its own.
    refused
        Paths of what was given and refused already; nothing more is said about those.
    """
    if ("gas",) not in refused:
        in_gas = {str(path[1]) for path in refused if path[0] == "gas"}
        yield from _check_required(document.gas, in_gas)
        yield from check_scale(document.gas, in_gas)
        yield from check_temperature(document.gas, in_gas)
    yield from _check_axes(document)
    if not {("gas", "particles"), ("spin", "rotation")} & {path[:2] for path in refused}:
        yield from _check_spin(document)
    if document.occupation is not None:
        yield from _check_occupation(document, document.occupation, refused)
    if not {("sampling", "snapshots"), ("sampling", "batches")} & refused:
        yield from _check_batches(document.sampling)
    observables = document.observables
    if observables is not None and not any(path[0] == "observables" for path in refused):
        yield from _check_observables(observables.pair_correlation is not None)


def check_run(run: RunFile) -> Iterator[Finding]:
    """Yield what shows only once the gas is in its box: ranges of temperature, open shells.

    Parameters
    ----------
    run
        A run whose tables have passed all checks.
    """
    if run.occupation is not None:
        yield from check_occupation(
            run.occupation,
            run.gas.dimension,
            run.particles,
            twist=run.twist,
            axes=build_axes(run.gas, run.sides, run.twist),
        )
    if run.gas.thermal_energy > 0:
        yield from _check_warm(run)
    elif run.gas.ensemble == "grand-canonical" and run.twist != "averaged":
        yield from _check_cold_grand_canonical(run)


def _check_warm(run: RunFile) -> Iterator[Finding]:
    gas, ratio = run.gas, run.gas.reduced_temperature
    if not COLDEST * (1 - 1e-9) <= ratio <= HOTTEST * (1 + 1e-9):
        yield Finding(
            ("gas", "temperature"),
            Refusal(
                f"{ratio:.3g} T_F of the majority component",
                f"0, or from {COLDEST:g} T_F to {HOTTEST:g} T_F",
                "a colder gas is in its ground state, a hotter one is classical",
            ),
        )
        return
    from pairmc.physics.axes.periodic import Periodic
    from pairmc.physics.occupation.cutoff import orbital_bound

    axes = tuple(Periodic(side) for side in gas.box(run.sides))
    for name, population in zip(gas.components, gas.populations, strict=True):
        if population == 0:
            continue
        orbitals = orbital_bound(axes, population, gas.thermal_energy)
        if orbitals * population > LARGEST_TABLE:
            yield Finding(
                ("gas", "particles", name),
                Refusal(
                    f"{population} particles that need about {orbitals:.2g} orbitals at "
                    f"{ratio:.3g} T_F",
                    f"particles times orbitals up to {LARGEST_TABLE:g}",
                    "fewer particles or a lower temperature",
                ),
            )
        elif any(run.twist) and orbitals > LARGEST_TWISTED:
            yield Finding(
                ("confinement", "twist"),
                Refusal(
                    f"a twist of a gas that needs about {orbitals:.2g} orbitals at {ratio:.3g} T_F",
                    f"up to {LARGEST_TWISTED:g} orbitals of a component with a twist, whose "
                    "expectation needs memory for all their differences",
                    'twist = "none" (a hot gas hardly feels its boundary), or fewer particles',
                ),
            )


def _check_cold_grand_canonical(run: RunFile) -> Iterator[Finding]:
    system = run.system()
    for name, occupation in zip(run.gas.components, system.occupations, strict=True):
        if not occupation.closed:
            near = " or ".join(map(str, nearest_closed(system.axes, occupation.population)))
            yield Finding(
                ("gas", "particles", name),
                Refusal(
                    f"an open shell of {occupation.population} at temperature 0 with "
                    'ensemble = "grand-canonical"',
                    f"a closed shell there, such as {near}",
                    'close the shell, set a temperature, set ensemble = "canonical", or let '
                    'populations follow the twist with twist = "averaged"',
                ),
            )


def _check_required(gas: GasTable, refused: set[str]) -> Iterator[Finding]:
    examples = {
        "dimension": ("1, 2 or 3", "add dimension = 2"),
        "particles": (
            "one entry per spin component",
            "add particles = { up = 49, down = 37 }",
        ),
    }
    for key, (allowed, advice) in examples.items():
        if getattr(gas, key) is None and key not in refused:
            yield Finding(("gas", key), Refusal("nothing, and it is needed", allowed, advice))


def _check_axes(document: Document) -> Iterator[Finding]:
    """Yield complaints about lists that have not one entry per axis."""
    dimension, box = document.gas.dimension, document.confinement
    for key, given in (("axes", box.axes), ("sides", box.sides), ("twist", box.twist)):
        if dimension is not None and isinstance(given, tuple) and len(given) != dimension:
            wanted = "1 entry" if dimension == 1 else f"{dimension} entries"
            yield Finding(
                ("confinement", key),
                Refusal(
                    f"a list of {len(given)}",
                    f"a list of {wanted}, as dimension = {dimension}",
                    "give one entry per axis, or leave it out",
                ),
            )


def _check_occupation(
    document: Document, occupation: OccupationSpec, refused: set[Path]
) -> Iterator[Finding]:
    """Yield what contradicts the other tables about orbitals that are named."""
    gas = document.gas
    places = {path[:2] for path in refused}
    yield from check_occupation(
        occupation,
        None if ("gas", "dimension") in places else gas.dimension,
        None if ("gas", "particles") in places else gas.particles,
        warm=gas.temperature.number > 0,
        ensemble=gas.ensemble,
        twist=document.confinement.twist,
    )


def _check_spin(document: Document) -> Iterator[Finding]:
    """Yield complaints about rotated spins, and about components without particles."""
    particles, rotation = document.gas.particles or {}, document.spin.rotation
    empty = [name for name, population in particles.items() if population == 0]
    if rotation != 0 and particles and len(particles) != 2:
        yield Finding(
            ("spin", "rotation"),
            Refusal(
                f"a rotation of {len(particles)} component{'s' * (len(particles) != 1)}",
                "two components, of which one may have no particles",
                "name a second component, such as particles = { up = 49, down = 0 }"
                if len(particles) == 1
                else "leave the rotation out, or all components but two",
            ),
        )
    elif empty and (len(particles) != 2 or len(empty) == 2):
        yield Finding(
            ("gas", "particles", empty[0]),
            Refusal(
                "0",
                f"a whole number from 1 to {LARGEST_COMPONENT}, or 0 in one of two components",
                "give it particles, or leave it out",
            ),
        )


def _check_batches(sampling: SamplingTable) -> Iterator[Finding]:
    """Yield the complaint about snapshots that do not divide into equal batches."""
    snapshots, batches = sampling.snapshots, sampling.batches
    if snapshots % batches == 0:
        return
    key = "snapshots" if "snapshots" in sampling.model_fields_set else "batches"
    near = [str(number) for number in near_multiples(snapshots, batches)]
    ways = [f"snapshots = {' or '.join(near)}"]
    counts = [str(number) for number in near_divisors(snapshots, batches)]
    if counts:
        ways.append(f"batches = {' or '.join(counts)}")
    by_default = "" if "batches" in sampling.model_fields_set else " (the default)"
    yield Finding(
        ("sampling", key),
        Refusal(
            f"{snapshots} snapshots in {batches} batches{by_default}",
            "a number of snapshots that batches divides, so that all batches are of one size",
            f"set {', or '.join(ways)}",
        ),
    )


def _check_observables(any_given: bool) -> Iterator[Finding]:
    if not any_given:
        refusal = Refusal(
            "an empty table",
            "at least one observable: [observables.pair_correlation]",
            "leave [observables] out to tally the pair correlation with its defaults",
        )
        yield Finding(("observables",), refusal, table=True)


def near_multiples(snapshots: int, batches: int) -> list[int]:
    """Return the multiples of `batches` next below and above `snapshots`, within the limits."""
    below = snapshots // batches * batches
    return [n for n in (below, below + batches) if batches <= n <= LARGEST_SNAPSHOTS]


def near_divisors(snapshots: int, batches: int) -> list[int]:
    """Return the divisors of `snapshots` next below and above `batches`, within the limits."""
    small = [n for n in range(1, isqrt(snapshots) + 1) if snapshots % n == 0]
    both = sorted({*small, *(snapshots // n for n in small)})
    divisors = [n for n in both if SMALLEST_BATCHES <= n <= LARGEST_BATCHES]
    place = bisect_left(divisors, batches)
    return divisors[max(place - 1, 0) : place + 1]
