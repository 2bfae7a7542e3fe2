"""``[occupation]``: filled orbitals named by their quantum numbers."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Literal

from pairmc.runfile.problems import (
    Refusal,
    RefusedError,
    counted,
    did_you_mean,
    numbers_in_words,
    refuse,
)

Numbers = tuple[int, ...]

PAIRS = ("singlet", "triplet")
LARGEST_NUMBER = 1000

_CHANGES = ("displaced", "emptied", "filled")
_TABLE = "one entry per component, or one singlet or triplet of two particles"
_COMPONENT = (
    "a list of all filled orbitals, such as [[0, 0], [1, 0]], or changes to the ground state, such "
    "as { emptied = [[0, 0]], filled = [[3, 0]] }"
)
_LIST = "a list of orbitals, such as [[0, 0], [1, 0]]"
_VECTOR = f"one whole number per axis, from -{LARGEST_NUMBER} to {LARGEST_NUMBER}, such as [1, 0]"


@dataclass(frozen=True)
class ListedSpec:
    """Every filled orbital of a component, in the order of the file."""

    filled: tuple[Numbers, ...]


@dataclass(frozen=True)
class ChangedSpec:
    """The ground state of a component, displaced, then emptied and filled in some orbitals.

    `emptied` and `filled` are quantum numbers after the displacement; `displaced` is empty where
    nothing is displaced.
    """

    displaced: Numbers = ()
    emptied: tuple[Numbers, ...] = ()
    filled: tuple[Numbers, ...] = ()

    @property
    def vectors(self) -> tuple[Numbers, ...]:
        """All that is given."""
        return (*([self.displaced] if self.displaced else []), *self.emptied, *self.filled)


@dataclass(frozen=True)
class PairSpec:
    """A ``"singlet"`` or ``"triplet"`` of two particles in two orbitals."""

    kind: Literal["singlet", "triplet"]
    filled: tuple[Numbers, ...]


@dataclass(frozen=True)
class OccupationSpec:
    """What is filled: components by name, those left out in the ground state; or one pair."""

    components: tuple[tuple[str, ListedSpec | ChangedSpec], ...] = ()
    pair: PairSpec | None = None


def occupation(value: Any) -> OccupationSpec:
    """Read the table of filled orbitals."""
    if not isinstance(value, dict) or not value:
        raise refuse(value, _TABLE, "leave it out for the ground state" if value == {} else "")
    refusals: list[Refusal] = []
    components: list[tuple[str, ListedSpec | ChangedSpec]] = []
    pair = None
    for name, part in value.items():
        try:
            if name in PAIRS:
                pair = _pair(name, part)
            else:
                components.append((name, _component(part)))
        except RefusedError as error:
            refusals += _below(name, error)
    if len(value) > 1 and any(name in PAIRS for name in value):
        advice = "a singlet or triplet says all about both particles"
        refusals.append(Refusal(" and ".join(value), _TABLE, advice))
    if refusals:
        raise RefusedError(*refusals)
    return OccupationSpec(tuple(components), pair)


def _component(value: Any) -> ListedSpec | ChangedSpec:
    """Read what one component fills."""
    if isinstance(value, list):
        return ListedSpec(_orbitals(value))
    if not isinstance(value, dict) or not value:
        raise refuse(value, _COMPONENT)
    refusals: list[Refusal] = []
    read: dict[str, Any] = {}
    for key, part in value.items():
        try:
            if key not in _CHANGES:
                near = did_you_mean(key, _CHANGES)
                raise RefusedError(Refusal("an unknown key", ", ".join(_CHANGES), near))
            read[key] = _vector(part) if key == "displaced" else _orbitals(part)
        except RefusedError as error:
            refusals += _below(key, error)
    if refusals:
        raise RefusedError(*refusals)
    spec = ChangedSpec(**read)
    _refuse_uneven(spec.vectors)
    for numbers in sorted(set(spec.emptied) & set(spec.filled)):
        got, allowed = (
            f"{numbers_in_words(numbers)}, which is emptied too",
            "each orbital in one of the two",
        )
        refusals.append(Refusal(got, allowed, "leave it out of both", ("filled",)))
    if refusals:
        raise RefusedError(*refusals)
    return spec


def _pair(kind: Literal["singlet", "triplet"], value: Any) -> PairSpec:
    """Read the two orbitals of a singlet or triplet."""
    waves = _orbitals(value, twice=True)
    if len(waves) != 2:
        advice = "write one orbital twice for both particles in it" if kind == "singlet" else ""
        got = counted(len(waves), "orbital")
        raise RefusedError(Refusal(got, "the 2 orbitals of two particles", advice))
    if waves[0] == waves[1] and kind != "singlet":
        advice = "two particles in one orbital are a singlet"
        raise RefusedError(
            Refusal(f"{numbers_in_words(waves[0])} twice", "two different orbitals", advice)
        )
    return PairSpec(kind, waves)


def _orbitals(value: Any, twice: bool = False) -> tuple[Numbers, ...]:
    """Read a list of orbitals; the same one twice only where that is said."""
    if not isinstance(value, list) or not value:
        raise refuse(value, _LIST)
    if all(isinstance(part, int) and not isinstance(part, bool) for part in value):
        raise refuse(value, _LIST, "put each orbital into brackets of its own")
    waves = tuple(_vector(part) for part in value)
    _refuse_uneven(waves)
    repeated = [numbers for numbers, count in Counter(waves).items() if count > 1]
    if repeated and not twice:
        got = ", ".join(f"{numbers_in_words(numbers)} more than once" for numbers in repeated[:3])
        advice = "no two particles of a component share an orbital"
        raise RefusedError(Refusal(got, "each orbital once", advice))
    return waves


def _vector(value: Any) -> Numbers:
    """Read the quantum numbers of one orbital."""
    if not isinstance(value, list) or not value:
        raise refuse(value, _VECTOR)
    for part in value:
        if isinstance(part, float) and part.is_integer() and abs(part) <= LARGEST_NUMBER:
            raise refuse(value, _VECTOR, f"write {int(part)}, without a decimal point")
        whole = isinstance(part, int) and not isinstance(part, bool)
        if not whole or abs(part) > LARGEST_NUMBER:
            raise refuse(value, _VECTOR)
    return tuple(value)


def _refuse_uneven(waves: Sequence[Numbers]) -> None:
    for numbers in waves:
        if len(numbers) != len(waves[0]):
            got = f"{numbers_in_words(waves[0])} and {numbers_in_words(numbers)}"
            raise RefusedError(Refusal(got, "as many quantum numbers in each"))


def _below(name: str, error: RefusedError) -> list[Refusal]:
    """Return refusals of a value as those of the table that holds it under this name."""
    return [
        Refusal(refusal.got, refusal.allowed, refusal.advice, (name, *refusal.at))
        for refusal in error.refusals
    ]
