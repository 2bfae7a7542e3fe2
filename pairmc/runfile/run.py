"""What a run is, once its file has been read and checked: one frozen value."""

from __future__ import annotations

import operator
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from functools import lru_cache
from math import radians

from pairmc.errors import InputError, Problem
from pairmc.physics.gas import Gas
from pairmc.physics.observables.pair_correlation_settings import Settings as PairCorrelationSettings
from pairmc.physics.system import (
    System,
    Twist,
    build_axes,
    build_listed,
    build_pair,
    build_system,
)
from pairmc.runfile.models import SEED_LIMIT, Document
from pairmc.runfile.occupation import OccupationSpec
from pairmc.runfile.occupation_checks import filled_orbitals
from pairmc.runfile.problems import value_in_words
from pairmc.runfile.scale import settle_gas, settle_scale
from pairmc.units import ATOMIC_MASS, ELECTRON_MASS


@dataclass(frozen=True)
class RunFile:
    """A run: the gas, its box, and what is sampled. Nothing in it needs a further check.

    Parameters
    ----------
    title
        One line; made from the gas where the file gives none.
    path
        The file it was read from, as it was named.
    text
        The file, verbatim.
    gas
        The gas, in the run's units.
    sides
        Ratio of the sides of the box, one number per axis.
    twist
        Twist of the boundary conditions in units of 2π, one number per axis, from −½ up to but not
        ½; or ``"averaged"``: every snapshot has its own.
    rotation
        Angle in degrees, from 0 up to but not 360, by which all spins are turned before they are
        detected.
    occupation
        Orbitals that are named, or None: the ground state, or the thermal law.
    sampler
        ``"direct"``.
    snapshots, batches
        How many snapshots, in how many batches of equal size.
    seed
        From 0 to 2**128 − 1; 20261201 where the file gives none.
    keep_snapshots
        Snapshots with an index below this are stored; None stores all.
    observables
        Settings of what is tallied, by name.
    mass_kilogram
        Mass of one particle in kilograms; None where lengths have no unit or no mass is known.
    """

    title: str
    path: str
    text: str
    gas: Gas
    sides: tuple[float, ...]
    twist: Twist
    rotation: float
    occupation: OccupationSpec | None
    sampler: str
    snapshots: int
    batches: int
    seed: int
    keep_snapshots: int | None
    observables: Mapping[str, PairCorrelationSettings] = field(hash=False)
    mass_kilogram: float | None

    @property
    def particles(self) -> dict[str, int]:
        """Population of each component."""
        return dict(zip(self.gas.components, self.gas.populations, strict=True))

    @property
    def batch_size(self) -> int:
        """Snapshots in one batch."""
        return self.snapshots // self.batches

    def system(self) -> System:
        """Return the gas in its box with its filled orbitals; built once for equal gases."""
        return _system(self.gas, self.sides, self.twist, radians(self.rotation), self.occupation)

    def with_seed(self, seed: int) -> RunFile:
        """Return the same run with another seed.

        Raises
        ------
        InputError
            Where the seed is no whole number from 0 to 2**128 − 1.
        """
        try:
            number = -1 if isinstance(seed, bool) else operator.index(seed)
        except TypeError:
            number = -1
        if not 0 <= number < SEED_LIMIT:
            allowed = "a whole number, at least 0 and below 2^128"
            raise InputError(Problem("seed", value_in_words(seed), allowed))
        return replace(self, seed=number)

    def with_batches(self, batches: int) -> RunFile:
        """Return the same run with another number of batches of the same size."""
        return replace(self, batches=batches, snapshots=batches * self.batch_size)

    def understood(self) -> dict[str, str]:
        """Return each quantity as it was understood, in the run's units.

        Returns
        -------
        dict
            ``total_density``, ``r_s``, ``fermi_wavenumber`` (of the majority component),
            ``temperature`` in T_F of the majority and, where known, in kelvin, and ``mass``.
        """
        gas = self.gas
        echo = {
            "total_density": _with_unit(gas.total_density, gas.units.length, -gas.dimension),
            "r_s": _with_unit(gas.wigner_seitz_radius, gas.units.length, 1),
            "fermi_wavenumber": _with_unit(
                gas.fermi_wavenumbers[gas.majority], gas.units.length, -1
            ),
            "temperature": _temperature(gas),
        }
        if self.mass_kilogram is not None:
            electrons = gas.units.length == "bohr"
            unit, name = (ELECTRON_MASS, "m_e") if electrons else (ATOMIC_MASS, "u")
            echo["mass"] = f"{self.mass_kilogram / unit:.9g} {name}"
        return echo


def build_run(document: Document, path: str, text: str) -> RunFile:
    """Return the run of a document that has passed all checks.

    Parameters
    ----------
    document
        The tables.
    path, text
        Where they were read, and what was read.
    """
    scale = settle_scale(document.gas)
    gas = settle_gas(document.gas)
    observables = document.observables
    pair_correlation = None if observables is None else observables.pair_correlation
    bins = PairCorrelationSettings().bins if pair_correlation is None else pair_correlation.bins
    sampling = document.sampling
    return RunFile(
        title=document.title or _title(gas),
        path=path,
        text=text,
        gas=gas,
        sides=document.confinement.sides or (1.0,) * gas.dimension,
        twist=_twist(document.confinement.twist, gas.dimension),
        rotation=document.spin.rotation,
        occupation=document.occupation,
        sampler=sampling.sampler,
        snapshots=sampling.snapshots,
        batches=sampling.batches,
        seed=sampling.seed,
        keep_snapshots=sampling.keep_snapshots,
        observables={"pair_correlation": PairCorrelationSettings(bins)},
        mass_kilogram=scale.mass_kilogram,
    )


def _twist(given: str | tuple[float, ...], dimension: int) -> Twist:
    """Return the twist that was written."""
    if isinstance(given, tuple):
        return given
    return "averaged" if given == "averaged" else (0.0,) * dimension


def _temperature(gas: Gas) -> str:
    """Return the temperature in T_F of the majority and, where known, in kelvin."""
    if gas.thermal_energy == 0:
        return "0"
    text = f"{gas.reduced_temperature:.9g} T_F"
    return text if gas.temperature is None else f"{text} = {gas.temperature:.9g} K"


@lru_cache(maxsize=8)
def _system(
    gas: Gas,
    sides: tuple[float, ...],
    twist: Twist,
    rotation: float,
    occupation: OccupationSpec | None,
) -> System:
    if occupation is None:
        return build_system(gas, sides, twist, rotation)
    axes = build_axes(gas, sides, twist)
    particles = dict(zip(gas.components, gas.populations, strict=True))
    if occupation.pair is not None:
        return build_pair(gas, axes, occupation.pair.kind, occupation.pair.filled, rotation)
    return build_listed(gas, axes, filled_orbitals(occupation, axes, particles), rotation)


def _title(gas: Gas) -> str:
    parts = [f"{name} = {n}" for name, n in zip(gas.components, gas.populations, strict=True)]
    return f"Free Fermi gas in {gas.dimension}D, {', '.join(parts)}"


def _with_unit(number: float, unit: str, power: int) -> str:
    """Return a number with length**power behind it, where lengths have a unit."""
    if not unit:
        return f"{number:.9g}"
    return f"{number:.9g} {unit}" if power == 1 else f"{number:.9g} {unit}^{power}"
