"""How one value of a run file is read: each function takes what TOML holds, or refuses it.

Every reader takes any value at all and raises nothing but `RefusedError`.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from math import isfinite, pi
from typing import Any

from pairmc.runfile.problems import (
    Refusal,
    RefusedError,
    did_you_mean,
    not_yet,
    refuse,
    value_in_words,
)
from pairmc.units import Kind, Quantity, QuantityError, kind_in_words, parse_quantity

LARGEST_COMPONENT = 20_000
MOST_COMPONENTS = 20
# Far beyond any gas, and far from where squares and cubes overflow.
SMALLEST, LARGEST = 1e-30, 1e30

# Digits after the point of an angle in degrees, so that π/2 rad and 90 deg are one angle.
_ANGLE_DIGITS = 10

_COMPONENT_NAME = re.compile(r"[A-Za-z][A-Za-z0-9_]{0,15}")
_AXES = ("periodic", "hard-wall", "harmonic", "lattice")

PLAIN: Kind = ()
MASS: Kind = (("mass", 1),)
ANGLE: Kind = (("angle", 1),)
FERMI_TEMPERATURE: Kind = (("fermi_temperature", 1),)
TEMPERATURE: Kind = (("temperature", 1),)
ENERGY: Kind = (("energy", 1),)


def length_power(power: int) -> Kind:
    """Return the kind length**power."""
    return (("length", power),)


def integer(least: int, most: int, reason: str = "", allowed: str = "") -> Callable[[Any], int]:
    """Return a reader of whole numbers in a range.

    Parameters
    ----------
    least, most
        The range.
    reason
        Why the range ends, for the advice.
    allowed
        The range in words, where the numbers themselves do not read well.
    """
    allowed = allowed or f"a whole number from {least} to {most}"

    def read(value: Any) -> int:
        if isinstance(value, float) and value.is_integer() and least <= value <= most:
            raise refuse(value, allowed, f"write {int(value)}, without a decimal point")
        if isinstance(value, bool) or not isinstance(value, int):
            raise refuse(value, allowed)
        if not least <= value <= most:
            raise refuse(value, allowed, reason if value > most else "")
        return value

    return read


def choice(served: str | tuple[str, ...], later: Mapping[str, str]) -> Callable[[Any], str]:
    """Return a reader of one word; `later` holds the words not yet served, with advice."""
    words = (served,) if isinstance(served, str) else served
    allowed = " or ".join(f'"{word}"' for word in words)

    def read(value: Any) -> str:
        if isinstance(value, str) and value in words:
            return value
        if isinstance(value, str) and value in later:
            raise not_yet(value, allowed, later[value])
        close = did_you_mean(value, (*words, *later)) if isinstance(value, str) else ""
        raise refuse(value, allowed, close)

    return read


def later(what: str, advice: str) -> Callable[[Any], None]:
    """Return a reader that refuses a table that is known, and not served by this release."""

    def read(value: Any) -> None:
        raise RefusedError(Refusal(f"{what} not yet available in this release", "", advice))

    return read


def title(value: Any) -> str:
    """Read the title: one printable line."""
    if not isinstance(value, str) or not value.isprintable() or len(value) > 200:
        raise refuse(value, "one line of text in quotes, at most 200 characters")
    return value.strip()


def particles(value: Any) -> dict[str, int]:
    """Read the populations, one entry per spin component."""
    allowed = "one entry per spin component, such as { up = 49, down = 37 }"
    if not isinstance(value, dict) or not value:
        raise refuse(value, allowed)
    refusals: list[Refusal] = []
    if len(value) > MOST_COMPONENTS:
        refusals.append(Refusal(f"{len(value)} components", f"at most {MOST_COMPONENTS}"))
    gigabytes = 16 * LARGEST_COMPONENT**2 / 1e9
    population = integer(
        0,
        LARGEST_COMPONENT,
        "the orbitals of N particles of one component fill a matrix of about 16 N² bytes, "
        f"{gigabytes:.1f} GB at this limit",
        f"a whole number from 1 to {LARGEST_COMPONENT}",
    )
    for name, number in value.items():
        if not _COMPONENT_NAME.fullmatch(name):
            names = "letters, digits and underscores, a letter first, at most 16 characters"
            refusals.append(
                Refusal(
                    value_in_words(name),
                    f"a component name of {names}",
                    "pairs of components are labelled with a hyphen, as in up-down",
                    (name,),
                )
            )
        try:
            population(number)
        except RefusedError as error:
            first = error.refusals[0]
            refusals.append(Refusal(first.got, first.allowed, first.advice, (name,)))
    if refusals:
        raise RefusedError(*refusals)
    return dict(value)


def scale(*kinds: Kind, allowed: str, length: str = "") -> Callable[[Any], Quantity]:
    """Return a reader of a positive quantity of one of the kinds.

    Parameters
    ----------
    kinds
        What is accepted.
    allowed
        The same in words, with an example.
    length
        The one length unit accepted, where not empty.
    """

    def read(value: Any) -> Quantity:
        quantity = _quantity(value, kinds, allowed)
        if length and quantity.length not in ("", length):
            raise refuse(value, allowed)
        if not SMALLEST <= quantity.number <= LARGEST:
            raise refuse(value, f"{allowed}, the number from {SMALLEST:g} to {LARGEST:g}")
        return quantity

    return read


def temperature(value: Any) -> Quantity:
    """Read the temperature: a multiple of T_F, kelvin, or an energy k_B T; a plain 0."""
    allowed = '0, or a temperature with its unit, such as "0.2 T_F", "40 nK" or "0.01 hartree"'
    quantity = _quantity(value, (PLAIN, FERMI_TEMPERATURE, TEMPERATURE, ENERGY), allowed)
    if quantity.number < 0:
        raise refuse(value, allowed, "temperatures are absolute")
    if quantity.number > 0 and quantity.plain:
        raise refuse(value, allowed, f'write "{value} T_F" for a multiple of the majority\'s T_F')
    return quantity


def rotation(value: Any) -> float:
    """Read the rotation of the spins: degrees, from 0 up to but not 360."""
    allowed = '0, or an angle with its unit, such as "60 deg" or "1.2 rad"'
    quantity = _quantity(value, (PLAIN, ANGLE), allowed)
    if quantity.plain and quantity.number != 0:
        raise refuse(value, allowed, f'write "{value} deg" for degrees')
    degrees = quantity.number if quantity.unit == "deg" else quantity.value * 180.0 / pi
    return round(degrees % 360.0, _ANGLE_DIGITS) % 360.0


def axes(value: Any) -> str | tuple[str, ...]:
    """Read the kind of axis, one word for all or a list with one per axis."""
    waiting = "a periodic box has no walls; choose it large where walls do not matter"
    read = choice("periodic", dict.fromkeys(_AXES[1:], waiting))
    if not isinstance(value, list):
        return read(value)
    for kind in value:
        read(kind)
    return tuple(value)


def sides(value: Any) -> tuple[float, ...]:
    """Read the ratio of the sides; their number is checked against the dimension later."""
    allowed = "a list of positive numbers, one per axis, such as [1.0, 2.0]"
    if not isinstance(value, list) or not value:
        raise refuse(value, allowed)
    numbers = tuple(_number(part) for part in value)
    if any(number is None or not SMALLEST <= number <= LARGEST for number in numbers):
        raise refuse(value, allowed)
    ratio = tuple(number for number in numbers if number is not None)
    if max(ratio) > 1000 * min(ratio):
        raise refuse(value, "sides of which none is more than 1000 times another")
    return ratio


def twist(value: Any) -> tuple[float, ...] | str:
    """Read the twist of the boundary conditions: "none", "averaged", or one number an axis.

    Numbers are in units of 2π, from −½ to ½; ½ is the same as −½ and becomes it.
    """
    allowed = '"none", "averaged", or a list of numbers from -0.5 to 0.5, one per axis'
    if isinstance(value, str):
        if value in ("none", "averaged"):
            return value
        raise refuse(value, allowed, did_you_mean(value, ("none", "averaged")))
    if not isinstance(value, list) or not value:
        raise refuse(value, allowed)
    numbers = []
    for part in value:
        number = _number(part)
        if number is None:
            raise refuse(value, allowed)
        if abs(number) > 0.5:
            advice = "twists are in units of 2π, and whole numbers change nothing"
            raise refuse(value, allowed, advice)
        numbers.append(-0.5 if number == 0.5 else number + 0.0)
    return tuple(numbers)


def kept(most: int) -> Callable[[Any], int | None]:
    """Return a reader of how many snapshots to keep; "all" is None."""
    count = integer(0, most)

    def read(value: Any) -> int | None:
        if value == "all":
            return None
        try:
            return count(value)
        except RefusedError as error:
            first = error.refusals[0]
            advice = first.advice or (
                did_you_mean(value, ["all"]) if isinstance(value, str) else ""
            )
            raise refuse(value, f'"all" or {first.allowed}', advice) from None

    return read


def _number(value: Any) -> float | None:
    """Return an integer or float as a finite float, and None for anything else."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        return None
    try:
        number = float(value)
    except OverflowError:
        return None
    return number if isfinite(number) else None


def _quantity(value: Any, kinds: tuple[Kind, ...], allowed: str) -> Quantity:
    """Return a number or a text as a quantity of one of the kinds."""
    number = _number(value)
    if number is not None:
        quantity = Quantity(number)
    elif isinstance(value, str):
        try:
            quantity = parse_quantity(value)
        except QuantityError as error:
            raise refuse(value, allowed, str(error)) from None
    else:
        raise refuse(value, allowed)
    if quantity.kind not in kinds:
        got = f"{value_in_words(value)} ({kind_in_words(quantity.kind)})"
        raise RefusedError(Refusal(got, allowed))
    return quantity
