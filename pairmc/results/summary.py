"""What a reader wants to know first about a result, as plain values ready for JSON."""

from __future__ import annotations

from typing import Any

import numpy as np
import xarray as xr

from pairmc.physics.observables import registry
from pairmc.statistics import t_quantile

# Chance that the largest of all standardised differences passes its limit although all is well.
FAMILY_LEVEL = 1e-3

# Below these global p-values the words change.
DOUBTFUL, EXCLUDED = 1e-2, 1e-4

# Over a range that reaches beyond this k_F r an average is far from the value at contact.
WIDE = 0.5


def summarise(dataset: xr.Dataset) -> dict[str, Any]:
    """Return scales, sizes and the audit of each observable.

    Parameters
    ----------
    dataset
        A result, as `pairmc.load` returns it.

    Returns
    -------
    dict
        Numbers, texts, lists and dicts only. Quantities are dicts of ``value`` and ``unit``, with
        a ``comment`` where the unit needs one.
    """
    batches = dataset.sizes["batch"]
    return {
        "title": dataset.attrs["title"],
        "run_digest": dataset.attrs["run_digest"],
        "seed": dataset.attrs["seed"],
        "ensemble": dataset.attrs["ensemble"],
        "conditions": {
            name: _quantity(dataset[name])
            for name in ("reduced_temperature", "temperature", "rotation", "total_energy")
            if name in dataset
        },
        "snapshots": int(dataset["snapshot_count"].sum()),
        "batches": batches,
        "kept_snapshots": dataset.sizes.get("snapshot", 0),
        "components": {
            str(label): {
                name: _quantity(dataset[name].isel(spin=index))
                for name in (
                    "population",
                    "detected_population",
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
    """Return a number and its unit, with what the file says about the unit."""
    about = {"unit": variable.attrs["units"]}
    if "comment" in variable.attrs:
        about["comment"] = variable.attrs["comment"]
    return {"value": variable.item()} | about


def _number(value: Any) -> float | None:
    """Return a float, or None where there is no number: JSON knows no NaN."""
    return float(value) if np.isfinite(value) else None


def probability(value: float) -> str:
    """Return a p-value to three decimals, small ones to two digits, never rounded up to 1."""
    if value >= 0.9995:
        return "> 0.999"
    if value >= 1e-3:
        return f"{value:.3f}"
    return f"{value:.1e}" if value > 0 else "< 1e-300"


def verdict(p_value: float) -> str:
    """Return what a global p-value says about sample and exact values, in words."""
    if p_value >= DOUBTFUL:
        return "no sign of disagreement"
    if p_value >= EXCLUDED:
        return "a sign of disagreement, rarely chance"
    return "sample and exact values disagree"


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
        "verdict": verdict(p_value.item()) if np.isfinite(p_value.item()) else None,
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
        "wide_beyond": WIDE,
        "values": _headline(dataset, headline, dataset[f"{name}_merge"]),
    }
    return audit


def _headline(dataset: xr.Dataset, name: str, merge: xr.DataArray) -> dict[str, Any]:
    """Return value, error, expectation and range for each label of the headline's dimension."""
    (rows,) = dataset[name].dims
    return {
        str(label): {
            "value": _number(dataset[name].values[row]),
            "error": _number(dataset[f"{name}_error"].values[row]),
            "expected": _number(dataset[f"{name}_expected"].values[row]),
            "unit": dataset[name].attrs["units"],
            "range": _range(dataset, merge.isel({rows: row})),
        }
        for row, label in enumerate(dataset[rows].values)
    }


def _range(dataset: xr.Dataset, merge: xr.DataArray) -> dict[str, Any] | None:
    """Return the separations of the innermost merged bin of one row, or None where there is none.

    Both in the unit of the bins and times k_F of the majority component.
    """
    (along,) = merge.dims
    if along != "separation" or merge.values[0] < 0:
        return None
    edges = dataset[f"{along}_bounds"]
    start, stop = (
        float(edge) for edge in edges.values[merge.values == merge.values[0]].ravel()[[0, -1]]
    )
    scale = float(dataset[f"scaled_{along}"][-1] / dataset[along][-1])
    majority = dataset["spin"].values[np.argmax(dataset["population"].values)]
    return {
        "quantity": str(along),
        "from": start,
        "to": stop,
        "unit": edges.attrs["units"],
        "scaled_from": scale * start,
        "scaled_to": scale * stop,
        "scaled_by": f"k_F of {majority}",
        "wide": scale * stop > WIDE,
    }
