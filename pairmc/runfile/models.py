"""The tables of a run file: one frozen model each, every key with how it is read.

A key left out is None here or has its default; what must be given, and what fits together, is
checked across the tables in `pairmc.runfile.checks`.
"""

from __future__ import annotations

from typing import Annotated

from pydantic import BaseModel, ConfigDict, PlainValidator

from pairmc.physics.observables.pair_correlation_settings import Settings
from pairmc.runfile import fields
from pairmc.runfile.fields import choice, integer, later, length_power, scale
from pairmc.runfile.occupation import OccupationSpec
from pairmc.runfile.occupation import occupation as read_occupation
from pairmc.units import Quantity

LARGEST_SNAPSHOTS = 1_000_000_000
LARGEST_BATCHES = 1_000_000
SMALLEST_BATCHES = 8
SEED_LIMIT = 2**128
DEFAULT_SEED = 20261201

_DENSITY = scale(
    fields.PLAIN,
    *(length_power(-d) for d in (1, 2, 3)),
    allowed='a positive number of particles per length^dimension, such as "1.1 / um^2" in 2D',
)
_WIGNER_SEITZ = scale(
    fields.PLAIN,
    length_power(1),
    allowed='a positive number, in bohr, such as 2 or "2 bohr"',
    length="bohr",
)
_WAVENUMBER = scale(
    fields.PLAIN, length_power(-1), allowed='a positive number per length, such as "3.7 / um"'
)
_MASS = scale(fields.MASS, allowed='a positive mass with its unit, such as "6.015 u" or "1 m_e"')

_SPACE = "no run of this size would end; ask for fewer"
_SCAN = "write one run file for each point of the scan"
_DETECTION = "leave it out: every particle is then seen where it is"
_HOLE = "it is the density times (pair_correlation − 1)"
_OCCUPATION = "in the ground state it is known: one in every filled orbital"
_INSTEAD = "set keep_snapshots to store positions and work it out from them"


class _Table(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)


class GasTable(_Table):
    """``[gas]``: what the gas is. Without any scale the density is 1 per unit length^dimension."""

    dimension: Annotated[int | None, PlainValidator(integer(1, 3, allowed="1, 2 or 3"))] = None
    particles: Annotated[dict[str, int] | None, PlainValidator(fields.particles)] = None
    total_density: Annotated[Quantity | None, PlainValidator(_DENSITY)] = None
    r_s: Annotated[Quantity | None, PlainValidator(_WIGNER_SEITZ)] = None
    fermi_wavenumber: Annotated[Quantity | None, PlainValidator(_WAVENUMBER)] = None
    temperature: Annotated[Quantity, PlainValidator(fields.temperature)] = Quantity(0.0)
    mass: Annotated[Quantity | None, PlainValidator(_MASS)] = None
    ensemble: Annotated[
        str,
        PlainValidator(choice(("canonical", "grand-canonical"), {})),
    ] = "canonical"


class SpinTable(_Table):
    """``[spin]``: what is done to the spins before they are measured."""

    rotation: Annotated[float, PlainValidator(fields.rotation)] = 0.0


class ConfinementTable(_Table):
    """``[confinement]``: the box. Only the ratio of its sides is given; default all equal."""

    axes: Annotated[str | tuple[str, ...], PlainValidator(fields.axes)] = "periodic"
    sides: Annotated[tuple[float, ...] | None, PlainValidator(fields.sides)] = None
    twist: Annotated[str | tuple[float, ...], PlainValidator(fields.twist)] = "none"


class SamplingTable(_Table):
    """``[sampling]``: how many snapshots, drawn how. Without a seed it is `DEFAULT_SEED`."""

    sampler: Annotated[
        str,
        PlainValidator(
            choice("direct", {"metropolis": 'set sampler = "direct", which follows the same law'})
        ),
    ] = "direct"
    snapshots: Annotated[
        int, PlainValidator(integer(SMALLEST_BATCHES, LARGEST_SNAPSHOTS, _SPACE))
    ] = 20_000
    batches: Annotated[int, PlainValidator(integer(SMALLEST_BATCHES, LARGEST_BATCHES, _SPACE))] = 40
    seed: Annotated[
        int,
        PlainValidator(
            integer(0, SEED_LIMIT - 1, allowed="a whole number, at least 0 and below 2^128")
        ),
    ] = DEFAULT_SEED
    keep_snapshots: Annotated[int | None, PlainValidator(fields.kept(LARGEST_SNAPSHOTS))] = 0


class PairCorrelationTable(_Table):
    """``[observables.pair_correlation]``."""

    bins: Annotated[int, PlainValidator(integer(1, 10_000))] = Settings().bins


def _later(what: str = "an observable", advice: str = _INSTEAD) -> PlainValidator:
    return PlainValidator(later(what, advice))


class ObservablesTable(_Table):
    """``[observables]``: what is tallied; without the table, the pair correlation."""

    pair_correlation: PairCorrelationTable | None = None
    structure_factor: Annotated[None, _later()] = None
    number_statistics: Annotated[None, _later()] = None
    neighbours: Annotated[None, _later()] = None
    exchange_hole: Annotated[None, _later(advice=_HOLE)] = None
    pair_map: Annotated[None, _later()] = None
    momentum_occupation: Annotated[None, _later(advice=_OCCUPATION)] = None
    three_body: Annotated[None, _later()] = None


class Document(_Table):
    """The whole run file."""

    title: Annotated[str, PlainValidator(fields.title)] = ""
    gas: GasTable = GasTable()
    spin: SpinTable = SpinTable()
    confinement: ConfinementTable = ConfinementTable()
    occupation: Annotated[OccupationSpec | None, PlainValidator(read_occupation)] = None
    sampling: SamplingTable = SamplingTable()
    observables: ObservablesTable | None = None
    detection: Annotated[None, _later("a table", _DETECTION)] = None
    scan: Annotated[None, _later("a table", _SCAN)] = None
