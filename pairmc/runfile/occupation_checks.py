"""What must fit together about orbitals that are named, and what is filled in the end."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from math import prod

from pairmc.physics.axes.periodic import Periodic
from pairmc.physics.occupation.listed import changed_numbers
from pairmc.physics.orbitals import nearest_closed
from pairmc.runfile.lines import Path
from pairmc.runfile.occupation import (
    PAIRS,
    ChangedSpec,
    ListedSpec,
    Numbers,
    OccupationSpec,
)
from pairmc.runfile.problems import Finding, Refusal, counted, did_you_mean, numbers_in_words

# Points of the grid of differences of quantum numbers on which expectations are worked out.
LARGEST_GRID = 5_000_000


def check_occupation(
    spec: OccupationSpec,
    dimension: int | None,
    particles: Mapping[str, int] | None,
    *,
    warm: bool = False,
    ensemble: str = "canonical",
    twist: str | tuple[float, ...] = "none",
    axes: Sequence[Periodic] | None = None,
) -> Iterator[Finding]:
    """Yield what does not fit the gas: names, numbers, shells.

    Parameters
    ----------
    spec
        What was read.
    dimension, particles
        Of the gas; None where not known.
    warm, ensemble, twist
        As the tables say: temperature above 0, ensemble, twist.
    axes
        One axis per dimension, with its twist, sides in any unit; None leaves out what depends on
        the ground state.
    """
    yield from _check_setting(warm, ensemble, twist)
    for path, waves in _vectors(spec):
        if dimension is not None and waves and len(waves[0]) != dimension:
            allowed = f"{counted(dimension, 'whole number')} per orbital, as dimension = "
            yield Finding(path, Refusal(numbers_in_words(waves[0]), f"{allowed}{dimension}"))
            axes = None
    if particles is None:
        return
    if spec.pair is not None:
        yield from _check_pair(spec.pair.kind, particles)
    for name, part in spec.components:
        if name not in particles:
            near = did_you_mean(name, (*particles, *PAIRS))
            refusal = Refusal("an unknown component", ", ".join((*particles, *PAIRS)), near)
            yield Finding(("occupation", name), refusal)
        else:
            findings = list(_check_numbers(name, part, particles[name]))
            if not findings and axes is not None:
                findings += _check_shells(name, part, particles[name], axes)
            yield from findings


def _vectors(spec: OccupationSpec) -> Iterator[tuple[Path, tuple[Numbers, ...]]]:
    """Yield all quantum numbers with the path of the key that holds them."""
    if spec.pair is not None:
        yield ("occupation", spec.pair.kind), spec.pair.filled
    for name, part in spec.components:
        waves = part.filled if isinstance(part, ListedSpec) else part.vectors
        yield ("occupation", name), waves


def _check_setting(warm: bool, ensemble: str, twist: str | tuple[float, ...]) -> Iterator[Finding]:
    """Yield what leaves open which orbitals are filled."""
    wrong = (
        (warm, "a temperature", "temperature = 0"),
        (ensemble != "canonical", f'ensemble = "{ensemble}"', 'ensemble = "canonical"'),
        (twist == "averaged", 'twist = "averaged"', 'twist = "none" or one number per axis'),
    )
    for found, got, allowed in wrong:
        if found:
            advice = "leave out one or the other"
            refusal = Refusal(f"filled orbitals together with {got}", allowed, advice)
            yield Finding(("occupation",), refusal, table=True)


def _check_pair(kind: str, particles: Mapping[str, int]) -> Iterator[Finding]:
    if kind in particles:
        refusal = Refusal(
            f"a component called {kind}", "another name", "here it means a state of two particles"
        )
        yield Finding(("gas", "particles", kind), refusal)
    elif tuple(particles.values()) != (1, 1):
        given = ", ".join(f"{name} = {number}" for name, number in particles.items())
        refusal = Refusal(
            f"a {kind} with particles = {{ {given} }}",
            "two components of one particle each",
            "set particles = { up = 1, down = 1 }, or list the orbitals of each component",
        )
        yield Finding(("occupation", kind), refusal)


def _check_numbers(name: str, part: ListedSpec | ChangedSpec, population: int) -> Iterator[Finding]:
    """Yield what contradicts the population."""
    filled, path = len(part.filled), ("occupation", name)
    if population == 0:
        refusal = Refusal("orbitals for no particle", "a component with particles", "leave it out")
        yield Finding(path, refusal)
    elif isinstance(part, ListedSpec):
        if filled != population:
            got = f"{counted(filled, 'orbital')} for {counted(population, 'particle')}"
            advice = f"list {population}, or set {name} = {filled} in particles"
            yield Finding(path, Refusal(got, "one orbital per particle", advice))
    elif len(part.emptied) != filled:
        got = f"{len(part.emptied)} emptied and {filled} filled"
        allowed = f"as many emptied as filled, for {counted(population, 'particle')} in all"
        yield Finding(path, Refusal(got, allowed))


def _check_shells(
    name: str, part: ListedSpec | ChangedSpec, population: int, axes: Sequence[Periodic]
) -> Iterator[Finding]:
    """Yield what contradicts the ground state, or makes the grid of differences too large."""
    path = ("occupation", name)
    if isinstance(part, ChangedSpec):
        near = nearest_closed(axes, population)
        if near != (population,):
            refusal = Refusal(
                f"changes to the open shell of {population}",
                f"a closed shell there, such as {' or '.join(map(str, near))}",
                "close the shell, or list all filled orbitals",
            )
            yield Finding(path, refusal)
            return
        yield from _check_changes(path, part, _ground(axes, population, part.displaced))
    waves = _filled(part, axes, population)
    extents = [max(axis) - min(axis) + 1 for axis in zip(*waves, strict=True)]
    if prod(2 * extent - 1 for extent in extents) > LARGEST_GRID:
        refusal = Refusal(
            f"orbitals spread over {' × '.join(map(str, extents))} quantum numbers",
            f"differences that fit a grid of {LARGEST_GRID} points",
            "fill orbitals that are nearer to one another",
        )
        yield Finding(path, refusal)


def _check_changes(path: Path, part: ChangedSpec, base: set[Numbers]) -> Iterator[Finding]:
    """Yield orbitals that are emptied though not filled, or filled though not empty."""
    advice = ""
    if part.displaced:
        advice = (
            f"quantum numbers are those after the displacement {numbers_in_words(part.displaced)}"
        )
    for numbers in part.emptied:
        if numbers not in base:
            refusal = Refusal(
                f"{numbers_in_words(numbers)}, which is empty", "a filled orbital", advice
            )
            yield Finding((*path, "emptied"), refusal)
    for numbers in part.filled:
        if numbers in base:
            got = f"{numbers_in_words(numbers)}, which is filled already"
            yield Finding((*path, "filled"), Refusal(got, "an empty orbital", advice))


def filled_orbitals(
    spec: OccupationSpec, axes: Sequence[Periodic], particles: Mapping[str, int]
) -> tuple[tuple[Numbers, ...] | None, ...]:
    """Return the filled orbitals of each component, sorted; None for the ground state.

    Parameters
    ----------
    spec
        What was read, free of findings; `pair` is not looked at.
    axes
        One axis per dimension, with its twist, sides in any unit.
    particles
        Populations by component.
    """
    given = dict(spec.components)
    return tuple(
        _filled(given[name], axes, population) if name in given else None
        for name, population in particles.items()
    )


def canonical_occupation(
    spec: OccupationSpec | None, axes: Sequence[Periodic], particles: Mapping[str, int]
) -> dict[str, list[list[int]]] | None:
    """Return what is filled in one spelling, ready for JSON; None for the ground state.

    A component that fills the orbitals of its ground state is left out, however it is written.

    Parameters
    ----------
    spec, axes, particles
        As in `filled_orbitals`; a spec of None is the ground state.
    """
    if spec is None:
        return None
    if spec.pair is not None:
        return {spec.pair.kind: [list(numbers) for numbers in sorted(spec.pair.filled)]}
    found = {}
    every = filled_orbitals(spec, axes, particles)
    for (name, population), waves in zip(particles.items(), every, strict=True):
        if waves is not None and not (
            nearest_closed(axes, population) == (population,)
            and set(waves) == _ground(axes, population)
        ):
            found[name] = [list(numbers) for numbers in waves]
    return found or None


def _filled(
    part: ListedSpec | ChangedSpec, axes: Sequence[Periodic], population: int
) -> tuple[Numbers, ...]:
    """Return the filled orbitals of a component, sorted."""
    if isinstance(part, ListedSpec):
        return tuple(sorted(part.filled))
    rows = changed_numbers(axes, population, part.displaced, part.emptied, part.filled)
    return tuple(tuple(row) for row in rows.tolist())


def _ground(axes: Sequence[Periodic], population: int, displaced: Numbers = ()) -> set[Numbers]:
    """Return the orbitals of a closed shell, displaced."""
    return set(_filled(ChangedSpec(displaced), axes, population))
