"""What a reader wants to know first about a result, as plain values ready for JSON."""

from __future__ import annotations

from typing import Any

import numpy as np
import xarray as xr

from pairmc.physics.observables import registry
from pairmc.statistics import t_quantile

# Chance that the largest of all standardised differences passes its limit although all is well.
FAMILY_LEVEL = 1e-3


def summarise(dataset: xr.Dataset) -> dict[str, Any]:
    """Return scales, sizes and the audit of each observable.

    Parameters
    ----------
    dataset
        A result, as `pairmc.load` returns it.

    Returns
    -------
    dict
        Numbers, texts, lists and dicts only. Quantities are dicts of ``value`` and ``unit``.
    """
    batches = dataset.sizes["batch"]
    return {
        "title": dataset.attrs["title"],
        "run_digest": dataset.attrs["run_digest"],
        "seed": dataset.attrs["seed"],
        "ensemble": dataset.attrs["ensemble"],
        "snapshots": int(dataset["snapshot_count"].sum()),
        "batches": batches,
        "kept_snapshots": dataset.sizes.get("snapshot", 0),
        "components": {
            str(label): {
                name: _quantity(dataset[name].isel(spin=index))
                for name in (
                    "population",
                    "density",
                    "fermi_wavenumber",
                    "fermi_energy",
                    "fermi_temperature",
                )
                if name in dataset
            }
            for index, label in enumerate(dataset["spin"].values)
        },
        "sides": [_quantity(side) for side in dataset["side"]],
        "wigner_seitz_radius": _quantity(dataset["wigner_seitz_radius"]),
        "observables": {
            name: _observable(dataset, name, batches)
            for name in registry.NAMES
            if f"{name}_p_value" in dataset
        },
    }


def _quantity(variable: xr.DataArray) -> dict[str, Any]:
    """Return a number and its unit."""
    value = variable.item()
    return {"value": value, "unit": variable.attrs["units"]}


def _number(value: Any) -> float | None:
    """Return a float, or None where there is no number: JSON knows no NaN."""
    return float(value) if np.isfinite(value) else None


def family_limit(batches: int, comparisons: int) -> float:
    """Return the |t| that the largest of many comparisons passes with a chance of `FAMILY_LEVEL`.

    Šidák's bound, exact for independent comparisons: each is tested at 1 − (1 − α)^(1/n).
    """
    return t_quantile((1.0 - FAMILY_LEVEL) ** (1.0 / comparisons), batches)


def _observable(dataset: xr.Dataset, name: str, batches: int) -> dict[str, Any]:
    """Return the audit of one observable and its headline values."""
    p_value = dataset[f"{name}_p_value"]
    merged = dataset.sizes[f"{name}_merged_bin"]
    audit: dict[str, Any] = {
        "p_value": _number(p_value.item()),
        "statistic": _number(p_value.attrs["statistic"]),
        "dimensions_tested": int(p_value.attrs["dimensions_tested"]),
        "merged_bins": merged,
        "largest_difference": None,
        "family_limit": None,
    }
    differences = dataset[f"{name}_difference"]
    if merged and np.isfinite(differences).any():
        audit["largest_difference"] = _number(np.abs(differences).max())
        audit["family_limit"] = family_limit(batches, merged)
        audit["family_level"] = FAMILY_LEVEL
    headline = registry.observable(name).HEADLINE.name
    audit["headline"] = {
        "name": headline,
        "words": dataset[headline].attrs["long_name"],
        "values": _headline(dataset, headline),
    }
    return audit


def _headline(dataset: xr.Dataset, name: str) -> dict[str, Any]:
    """Return value, error and expectation for each label of the headline's dimension."""
    (rows,) = dataset[name].dims
    return {
        str(label): {
            "value": _number(dataset[name].values[row]),
            "error": _number(dataset[f"{name}_error"].values[row]),
            "expected": _number(dataset[f"{name}_expected"].values[row]),
            "unit": dataset[name].attrs["units"],
        }
        for row, label in enumerate(dataset[rows].values)
    }
