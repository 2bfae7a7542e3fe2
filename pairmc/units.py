"""What a run's numbers are measured in."""

from __future__ import annotations

import re
from dataclasses import dataclass, field, replace
from difflib import get_close_matches
from functools import lru_cache
from math import isfinite, pi
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import pint

# CODATA 2022 recommended values (Mohr, Newell, Taylor & Tiesinga, 2024), SI units.
HBAR = 6.62607015e-34 / (2 * pi)  # J s (h is exact)
BOLTZMANN = 1.380649e-23  # J / K (exact)
ELECTRONVOLT = 1.602176634e-19  # J (exact)
BOHR = 5.29177210544e-11  # m
HARTREE = 4.3597447222060e-18  # J
ELECTRON_MASS = 9.1093837139e-31  # kg
ATOMIC_MASS = 1.66053906892e-27  # kg


@dataclass(frozen=True)
class Units:
    """The units of one run: a length, an energy and what ties them together.

    Parameters
    ----------
    length
        Name of the length unit as a reader writes it: ``"um"``, ``"bohr"``, or ``""`` where the run
        gives none.
    metres
        One length unit in metres; None where the run gives none.
    energy
        Name of the energy unit: ``"J"``, ``"hartree"``, or ``""`` where energies are counted in
        ħ²/(m · length²).
    joules
        One energy unit in joules; None where the run gives none.
    kinetic
        ħ²/m in energy unit × length unit²; None where the run gives a length but no mass, so that
        no energy is known.
    """

    length: str = ""
    metres: float | None = None
    energy: str = ""
    joules: float | None = None
    kinetic: float | None = 1.0

    def udunits(self, length_power: int) -> str:
        """Return the unit string of length**length_power for a CF file.

        udunits does not know bohr, so the metres are written out.
        """
        if self.metres is None or length_power == 0:
            return "1"
        base = f"{self.metres:.11e} m" if self.length == "bohr" else self.length
        if length_power == 1:
            return base
        return f"({base})^{length_power}" if " " in base else f"{base}^{length_power}"


# Metres in each unit of length a quantity may be written in.
METRES = {
    "m": 1.0,
    "mm": 1e-3,
    "um": 1e-6,
    "nm": 1e-9,
    "pm": 1e-12,
    "angstrom": 1e-10,
    "bohr": BOHR,
}
# Every other unit; nothing else is known. "[kind]" starts a kind of its own.
_DEFINITIONS = {
    **{name: f"{metres!r} m" for name, metres in METRES.items()},
    "m": "[length]",
    "kg": "[mass]",
    "g": "1e-3 kg",
    "u": f"{ATOMIC_MASS!r} kg",
    "m_e": f"{ELECTRON_MASS!r} kg",
    "K": "[temperature]",
    "mK": "1e-3 K",
    "uK": "1e-6 K",
    "nK": "1e-9 K",
    "J": "[energy]",
    "eV": f"{ELECTRONVOLT!r} J",
    "hartree": f"{HARTREE!r} J",
    "T_F": "[fermi_temperature]",
    "rad": "[angle]",
    "deg": f"{pi / 180!r} rad",
}
_SPELLINGS = {"µm": "um", "μm": "um", "micrometre": "um", "micrometer": "um", "Å": "angstrom"}

_NAME_AND_POWER = r"([^\W\d]+)(?:\s*(?:\^|\*\*)\s*([+-]?[1-9]))?"
_FACTOR = _NAME_AND_POWER.replace("([", "(?:[")
_QUANTITY = re.compile(
    r"\s*(?P<number>[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)\s*"
    rf"(?:\*?\s*(?P<above>{_FACTOR}(?:(?:\s*\*\s*|\s+){_FACTOR})*))?"
    rf"(?P<below>(?:\s*/\s*{_FACTOR})*)\s*"
)
_LONGEST = 100  # characters of a quantity

Kind = tuple[tuple[str, int], ...]


class QuantityError(ValueError):
    """A text is no quantity; the message says why, or what to do."""


@dataclass(frozen=True)
class Quantity:
    """A number and its unit, as written.

    Parameters
    ----------
    number
        The number, in the unit written.
    unit
        The unit in one spelling, ``"um^-2"``; empty for a plain number.
    kind
        What kind of quantity, as sorted pairs of name and power: ``(("length", -2),)``.
    si
        One unit in m, kg, K, J, T_F, rad and their powers.
    length
        Name of the length unit in it, or ``""``.
    written
        The text it was read from, or ``""``.
    """

    number: float
    unit: str = ""
    kind: Kind = ()
    si: float = 1.0
    length: str = ""
    written: str = field(default="", compare=False)

    @property
    def value(self) -> float:
        """The quantity in m, kg, K, J, T_F, rad and their powers."""
        return self.number * self.si

    @property
    def plain(self) -> bool:
        """True where no unit was written."""
        return self.unit == ""


def parse_quantity(text: str) -> Quantity:
    """Read ``number [unit]``: ``1.1 / um^2``, ``1.1 um^-2``, ``1.1e12/m**2``, ``6.015 u``, ``2``.

    Units are a short closed list without prefixes or plurals; factors are multiplied by a space or
    ``*`` and divided by ``/``, and nothing is multiplied after a ``/``.

    Parameters
    ----------
    text
        What to read, at most 100 characters.

    Raises
    ------
    QuantityError
        Where the text is of another form, a unit is not in the list, the number is not finite, two
        different length units meet, or a unit cancels.
    """
    match = _QUANTITY.fullmatch(text) if len(text) <= _LONGEST else None
    if match is None:
        raise QuantityError("write one number and its unit: no brackets, no second number")
    number = float(match["number"])
    if not isfinite(number):
        raise QuantityError("the number is too large")
    powers: dict[str, int] = {}
    for part, sign in ((match["above"] or "", 1), (match["below"], -1)):
        for name, power in re.findall(_NAME_AND_POWER, part):
            known = _known_unit(name)
            powers[known] = powers.get(known, 0) + sign * int(power or 1)
    if not powers:
        return Quantity(number, written=text)
    lengths = [name for name in powers if name in METRES]
    if len(lengths) > 1:
        raise QuantityError(f"keep to one length unit, {lengths[0]} or {lengths[1]}")
    cancelled = [name for name, power in powers.items() if power == 0]
    if cancelled:
        raise QuantityError(f"the unit {cancelled[0]} cancels")
    return replace(_quantity(number, powers), written=text)


def in_atomic_units(unit: str) -> str:
    """Return a unit of a result file with bohr and hartree in place of their metres and joules."""
    bohr, hartree = f"{BOHR:.11e} m", f"{HARTREE:.13e} J"
    return unit.replace(f"({bohr})", "bohr").replace(bohr, "bohr").replace(hartree, "hartree")


def kind_in_words(kind: Kind) -> str:
    """Return what kind of quantity this is: ``a number per area``, ``a mass``."""
    lengths = {1: "a length", 2: "an area", 3: "a volume"}
    lengths |= {-1: "a number per length", -2: "a number per area", -3: "a number per volume"}
    match kind:
        case ():
            return "a plain number"
        case (("length", power),) if power in lengths:
            return lengths[power]
        case (("fermi_temperature", 1),):
            return "a multiple of T_F"
        case ((("mass" | "temperature") as name, 1),):
            return f"a {name}"
        case ((("energy" | "angle") as name, 1),):
            return f"an {name}"
    return "of the kind " + " ".join(f"{name}^{power}" for name, power in kind)


def _known_unit(name: str) -> str:
    """Return the listed name of a unit, or refuse it and name the nearest."""
    name = _SPELLINGS.get(name, name)
    if name in _DEFINITIONS:
        return name
    near = [known for known in _DEFINITIONS if known.lower() == name.lower()]
    near = near or get_close_matches(name, _DEFINITIONS, 1)
    meant = f"; did you mean {near[0]}?" if near else ""
    raise QuantityError(f'"{name}" is no unit known here ({", ".join(_DEFINITIONS)}){meant}')


def _quantity(number: float, powers: dict[str, int]) -> Quantity:
    """Attach the units to the number; what they amount to is the unit library's work."""
    registry = _registry()
    unit = registry.parse_units(" * ".join(f"{name}**{power}" for name, power in powers.items()))
    dimensionality: dict[str, Any] = dict(unit.dimensionality)
    kind = ((name.strip("[]"), int(power)) for name, power in dimensionality.items())
    return Quantity(
        number=number,
        unit=" ".join(name if power == 1 else f"{name}^{power}" for name, power in powers.items()),
        kind=tuple(sorted(kind)),
        si=float(registry.Quantity(1.0, unit).to_base_units().magnitude),
        length=next((name for name in powers if name in METRES), ""),
    )


@lru_cache(maxsize=1)
def _registry() -> pint.UnitRegistry[float]:
    """Return a registry that knows the closed list and nothing else; built on first use."""
    import pint

    registry: pint.UnitRegistry[float] = pint.UnitRegistry(None)
    for name, definition in _DEFINITIONS.items():
        registry.define(f"{name} = {definition}")
    return registry
