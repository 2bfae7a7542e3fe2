"""What sets the scale of a gas: its density, the units it is measured in, its mass."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from typing import NamedTuple

from pairmc.physics.gas import (
    Gas,
    density_of_fermi_wavenumber,
    density_of_wigner_seitz_radius,
)
from pairmc.runfile.fields import FERMI_TEMPERATURE, TEMPERATURE, length_power
from pairmc.runfile.models import GasTable
from pairmc.runfile.problems import Finding, Refusal, value_in_words
from pairmc.units import (
    BOLTZMANN,
    ELECTRON_MASS,
    HARTREE,
    HBAR,
    METRES,
    Quantity,
    Units,
    kind_in_words,
)

_KEYS = ("total_density", "r_s", "fermi_wavenumber")


class Scale(NamedTuple):
    """Units, total density per length^dimension in them, and mass in kilograms where known."""

    units: Units
    total_density: float
    mass_kilogram: float | None


def check_scale(gas: GasTable, refused: set[str]) -> Iterator[Finding]:
    """Yield what does not fit together about density, units and mass.

    Parameters
    ----------
    gas
        The table, each value read on its own.
    refused
        Keys of the table that were given and refused, about which nothing is concluded.
    """
    given = [key for key in _KEYS if getattr(gas, key) is not None or key in refused]
    for key in given[1:]:
        yield Finding(
            ("gas", key),
            Refusal(f"both {given[0]} and {key}", f"only one of {', '.join(_KEYS)}", "keep one"),
        )
    density, d = gas.total_density, gas.dimension
    if density is not None and d is not None and not density.plain:
        yield from _check_power(density, d)
    unitless = all(getattr(gas, key) is None or getattr(gas, key).plain for key in given)
    if gas.mass is not None and unitless and "r_s" not in given and not refused & set(_KEYS):
        example = {1: "1.1 / um", 2: "1.1 / um^2", 3: "1.1 / um^3"}.get(d or 2)
        yield Finding(
            ("gas", "mass"),
            Refusal(
                value_in_words(gas.mass.written),
                "a mass only where the density has a unit",
                f'write total_density = "{example}", with a unit, or leave out the mass',
            ),
        )


def check_temperature(gas: GasTable, refused: set[str]) -> Iterator[Finding]:
    """Yield what does not fit together about temperature, ensemble and mass.

    Parameters
    ----------
    gas
        The table, each value read on its own.
    refused
        Keys of the table that were given and refused, about which nothing is concluded.
    """
    given = gas.temperature
    if given.number > 0 and given.kind != FERMI_TEMPERATURE and not refused & {"mass", *_KEYS}:
        scale = next((q for q in (gas.total_density, gas.fermi_wavenumber) if q is not None), None)
        electrons = gas.r_s is not None or (scale is not None and scale.length == "bohr")
        if not electrons and (gas.mass is None or scale is None or scale.plain):
            yield Finding(
                ("gas", "temperature"),
                Refusal(
                    value_in_words(given.written),
                    "kelvin or an energy only where density has a unit and the mass is given",
                    'give both, or write a multiple of T_F, such as "0.2 T_F"',
                ),
            )


def _check_power(density: Quantity, dimension: int) -> Iterator[Finding]:
    """Yield the complaint about a density whose power of length is not the dimension."""
    if density.kind == length_power(-dimension):
        return
    wanted = kind_in_words(length_power(-dimension))
    power = "" if dimension == 1 else f"^{dimension}"
    yield Finding(
        ("gas", "total_density"),
        Refusal(
            f"{value_in_words(density.written)} ({kind_in_words(density.kind)})",
            f'{wanted} such as "1.1 / {density.length}{power}", as dimension = {dimension}',
            "correct the power of the length, or the dimension",
        ),
    )


def settle_scale(gas: GasTable) -> Scale:
    """Return the scale of a gas whose table has passed all checks.

    With r_s, or a density or wave number per bohr, lengths are in bohr, energies in hartree, and
    the mass is the electron's unless given. The density follows from r_s by n V_d(r_s) = 1, and
    from the Fermi wave number of the majority component by n = n_majority N/N_majority
    (`pairmc.physics.gas`).
    """
    if gas.dimension is None or gas.particles is None:
        raise AssertionError("dimension and particles are checked before")
    d, populations = gas.dimension, tuple(gas.particles.values())
    if gas.r_s is not None:
        return _scale("bohr", density_of_wigner_seitz_radius(d, gas.r_s.number), gas.mass)
    if gas.fermi_wavenumber is not None:
        given = gas.fermi_wavenumber
        majority = density_of_fermi_wavenumber(d, given.number)
        density = majority * sum(populations) / max(populations)
    else:
        given = gas.total_density or Quantity(1.0)
        density = given.number
    if given.plain:
        return Scale(Units(), density, None)
    return _scale(given.length, density, gas.mass)


def settle_gas(table: GasTable) -> Gas:
    """Return the gas of a table that has passed all checks.

    k_B T in units of ħ²/(m · length²) is T/T_F · k_F²/2 with k_F of the majority component, or
    k_B T divided by ħ²/m.
    """
    scale = settle_scale(table)
    particles = table.particles or {}
    gas = Gas(
        dimension=table.dimension or 0,
        components=tuple(particles),
        populations=tuple(particles.values()),
        total_density=scale.total_density,
        units=scale.units,
        ensemble=table.ensemble,
    )
    given = table.temperature
    if given.number == 0:
        return gas
    if given.kind == FERMI_TEMPERATURE:
        thermal = 0.5 * given.number * gas.fermi_wavenumbers[gas.majority] ** 2
    else:
        joules = given.value * (BOLTZMANN if given.kind == TEMPERATURE else 1.0)
        thermal = joules / ((scale.units.kinetic or 0.0) * (scale.units.joules or 1.0))
    return replace(gas, thermal_energy=thermal)


def _scale(length: str, density: float, given: Quantity | None) -> Scale:
    """Return the scale in a length unit, with the mass that was given or its default."""
    mass = None if given is None else given.value
    metres = METRES[length]
    if length == "bohr":
        mass = ELECTRON_MASS if mass is None else mass
        return Scale(Units(length, metres, "hartree", HARTREE, ELECTRON_MASS / mass), density, mass)
    kinetic = None if mass is None else HBAR**2 / (mass * metres**2)
    return Scale(Units(length, metres, "J", 1.0, kinetic), density, mass)
