"""The run digest: one number for all that decides a run's numbers, and nothing else.

Two files with the same digest describe the same snapshots: batches of one may stand beside batches
of the other. The title, the number of batches and the spelling of units are not in it.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import asdict
from typing import Any

from pairmc.physics.system import Twist, build_axes
from pairmc.runfile.occupation_checks import canonical_occupation
from pairmc.runfile.run import RunFile

# Raised whenever the same run draws other snapshots than before.
STREAM_VERSION = 1


def canonical(run: RunFile) -> dict[str, Any]:
    """Return all that decides a run's numbers, in one spelling.

    Lengths, densities and masses are in SI units where the run has units; floats are texts of 12
    significant digits; sides are ratios to the first. Keys with one possible value in this release
    are there, so that digests stay when further values come.

    Parameters
    ----------
    run
        The run.

    Returns
    -------
    dict
        Tables of texts, integers, lists and None, ready for JSON.
    """
    gas, metres = run.gas, run.gas.units.metres
    axes = build_axes(gas, run.sides, run.twist)
    filled = canonical_occupation(run.occupation, axes, run.particles)
    density = gas.total_density * (1.0 if metres is None else metres**-gas.dimension)
    named = {} if filled is None else {"occupation": filled}
    return named | {
        "stream_version": STREAM_VERSION,
        "gas": {
            "dimension": gas.dimension,
            "components": list(gas.components),
            "populations": list(gas.populations),
            "total_density": _digits(density),
            "density_unit": "1" if metres is None else f"m^-{gas.dimension}",
            "mass": None if run.mass_kilogram is None else _digits(run.mass_kilogram),
            "temperature": _digits(gas.reduced_temperature) if gas.thermal_energy else "0",
            "ensemble": gas.ensemble,
        },
        "spin": {"rotation": _digits(run.rotation) if run.rotation else "0"},
        "confinement": {
            "axes": ["periodic"] * gas.dimension,
            "sides": [_digits(side / run.sides[0]) for side in run.sides],
            "twist": _twist(run.twist),
        },
        "sampling": {
            "sampler": run.sampler,
            "batch_size": run.batch_size,
            "seed": str(run.seed),
            "keep_snapshots": "all" if run.keep_snapshots is None else run.keep_snapshots,
        },
        "detection": None,
        "observables": {name: asdict(settings) for name, settings in run.observables.items()},
    }


def digest(run: RunFile) -> str:
    """Return the run digest: SHA-256 of the canonical form as JSON, 64 hexadecimal digits."""
    text = json.dumps(canonical(run), sort_keys=True, separators=(",", ":"), allow_nan=False)
    return hashlib.sha256(text.encode()).hexdigest()


def differing_keys(
    one: Mapping[str, Any], other: Mapping[str, Any]
) -> list[tuple[str, object, object]]:
    """Return where two canonical forms differ.

    Parameters
    ----------
    one, other
        Canonical forms.

    Returns
    -------
    list of (str, object, object)
        Dotted key and both values, None for a key that is missing, in order of the keys.
    """
    left, right = _flat(one), _flat(other)
    return [
        (key, left.get(key), right.get(key))
        for key in sorted({*left, *right})
        if left.get(key) != right.get(key)
    ]


def _flat(table: Mapping[str, Any], above: str = "") -> dict[str, object]:
    """Return the values of nested tables by dotted key."""
    values: dict[str, object] = {}
    for key, value in table.items():
        if isinstance(value, Mapping):
            values |= _flat(value, f"{above}{key}.")
        else:
            values[above + key] = value
    return values


def _twist(twist: Twist) -> str | list[str]:
    """Return the twist in one spelling; a vector of zeros is none."""
    if twist == "averaged":
        return "averaged"
    return [_digits(float(part)) for part in twist] if any(twist) else "none"


def _digits(number: float) -> str:
    return f"{number:.11e}"
