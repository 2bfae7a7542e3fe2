"""Numbers and tables as a person reads them."""

from __future__ import annotations

from collections.abc import Sequence
from math import floor, isfinite, log10

from pairmc.units import BOLTZMANN, Units

# Of energies where a run gives no units.
ENERGY_UNIT = "ħ²/(m·length²)"

PLANCK = 6.62607015e-34  # J s (exact)

_PREFIXES = ((1.0, ""), (1e-3, "m"), (1e-6, "µ"), (1e-9, "n"), (1e-12, "p"))


def with_unit(number: float, unit: str, power: int = 1) -> str:
    """Return a number with a unit to a power: ``1.1 um^-2``; without one where there is none."""
    text = f"{number:.5g}"
    if not unit:
        return text
    return f"{text} {unit}" if power == 1 else f"{text} {unit}^{power}"


def temperature(kelvin: float) -> str:
    """Return a temperature with the prefix that suits it."""
    for size, prefix in _PREFIXES:
        if kelvin >= size:
            return f"{kelvin / size:.5g} {prefix}K"
    return f"{kelvin:.4g} K"


def energy(value: float, units: Units) -> str:
    """Return an energy: hartree, or joules with the frequency E/h that laboratories speak of."""
    if not units.energy:
        return f"{value:.5g} {ENERGY_UNIT}"
    if units.energy == "hartree":
        return f"{value:.5g} hartree"
    frequency = value / PLANCK
    size, prefix = (1e3, "k") if frequency >= 1e3 else (1.0, "")
    return f"{value:.5g} J = h × {frequency / size:.5g} {prefix}Hz"


def energy_as_temperature(value: float, units: Units) -> str | None:
    """Return an energy divided by k_B, or None where it has no SI value."""
    return None if units.joules is None else temperature(value * units.joules / BOLTZMANN)


def with_error(value: float, error: float) -> str:
    """Return a value and its standard error, both to two digits of the error."""
    if not (isfinite(error) and error > 0):
        return f"{value:.6g}"
    decimals = max(0, 1 - floor(log10(error)))
    if decimals > 6 or abs(value) >= 1e6:
        return f"{value:.6g} ± {error:.2g}"
    return f"{value:.{decimals}f} ± {error:.{decimals}f}"


def exact(value: float, error: float) -> str:
    """Return an exact value to one digit more than a sampled value with that error is given."""
    if not (isfinite(error) and error > 0):
        return f"{value:.6g}"
    decimals = max(0, 2 - floor(log10(error)))
    if decimals > 7 or abs(value) >= 1e6:
        return f"{value:.6g}"
    return f"{round(value, decimals) + 0.0:.{decimals}f}"


def counted(number: int, word: str) -> str:
    """Return a number with the word for what it counts: ``1 merged bin``, ``48 merged bins``."""
    ending = "" if number == 1 else "es" if word.endswith("ch") else "s"
    return f"{number} {word}{ending}"


def duration(seconds: float) -> str:
    """Return a time in the unit that suits it."""
    if seconds < 1:
        return "under a second"
    if seconds < 90:
        return f"about {seconds:.0f} s"
    if seconds < 5400:
        return f"about {seconds / 60:.0f} min"
    if seconds < 172800:
        return f"about {seconds / 3600:.1f} h"
    return f"about {seconds / 86400:.1f} days"


def size(number: float) -> str:
    """Return a number of bytes in the unit that suits it."""
    for limit, unit in ((1e9, "GB"), (1e6, "MB"), (1e3, "kB")):
        if number >= limit:
            return f"{number / limit:.3g} {unit}"
    return f"{number:.0f} bytes"


def table(rows: Sequence[Sequence[str]], indent: str = "  ") -> str:
    """Return rows as aligned columns; the first row is the head."""
    widths = [max(len(row[column]) for row in rows) for column in range(len(rows[0]))]
    return "\n".join(
        indent
        + "  ".join(cell.ljust(width) for cell, width in zip(row, widths, strict=True)).rstrip()
        for row in rows
    )
