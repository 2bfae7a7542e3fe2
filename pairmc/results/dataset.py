"""Builds the dataset of a run from its tallies: values, errors, expectation, audit, scales."""

from __future__ import annotations

import json
from datetime import UTC, datetime
from importlib.metadata import version
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from pairmc.physics.observables import registry
from pairmc.physics.observables.variable import Variable
from pairmc.physics.theory import energy
from pairmc.results import schema
from pairmc.results.audit import INTERVAL_LEVEL, Audit, CountErrors, audit, count_errors
from pairmc.results.collect import Collected
from pairmc.results.scales import component_labels, scale_variables
from pairmc.results.singlet import singlet_variables
from pairmc.runfile.digest import canonical, digest
from pairmc.runfile.run import RunFile
from pairmc.units import in_atomic_units

Variables = dict[str, tuple[Any, ...]]


def build_dataset(run: RunFile, collected: Collected) -> xr.Dataset:
    """Return everything of a run's result but the kept snapshots.

    Parameters
    ----------
    run
        The run.
    collected
        Tallies of all its batches.

    Returns
    -------
    xarray.Dataset
        As documented in DEVELOPERS.md, "Result file".
    """
    variables: Variables = {
        "snapshot_count": (
            ("batch",),
            np.full(run.batches, run.batch_size, dtype=np.int64),
            {"units": "1", "long_name": "snapshots in the batch"},
        )
    }
    coordinates: Variables = {
        "batch": (
            ("batch",),
            np.arange(run.batches, dtype=np.int64),
            {"units": "1", "long_name": "batch number"},
        ),
        "spin": (("spin",), component_labels(run.gas), {"long_name": "spin component"}),
    }
    variables["mean_population"] = (
        ("batch", "spin"),
        np.stack(collected.populations) / run.batch_size,
        {"units": "1", "long_name": "particles of the component, mean over the batch"},
    )
    variables |= scale_variables(run, _energies(run, collected))
    if collected.energy_ratios:
        words = "exact kinetic energy over that of the infinite system, mean over the twists of "
        variables["energy_ratio"] = (
            ("batch", "spin"),
            np.stack(collected.energy_ratios),
            {"units": "1", "long_name": f"{words}the batch"},
        )
    for name in run.observables:
        more, where = _observable(run, name, collected)
        variables |= more
        coordinates |= where
    grid = registry.observable("pair_correlation").grid(
        run.observables["pair_correlation"], run.system()
    )
    variables |= singlet_variables(run, collected, grid)
    dataset = xr.Dataset(variables, coords=coordinates, attrs=attributes(run, collected))
    if run.gas.units.length == "bohr":
        _name_atomic_units(dataset)
    return dataset


def _name_atomic_units(dataset: xr.Dataset) -> None:
    """Say in words what the metres and joules of atomic units are, beside every such unit."""
    for variable in dataset.variables.values():
        unit = str(variable.attrs.get("units", ""))
        readable = in_atomic_units(unit)
        if readable != unit:
            variable.attrs["atomic_unit"] = readable


def _energies(run: RunFile, collected: Collected) -> NDArray[np.float64]:
    """Return the exact kinetic energy of each component, over the twists where there are many."""
    if collected.energy_ratios:
        bulk = np.array(run.gas.populations) * energy.bulk_per_particle(run.gas)
        return np.asarray(np.mean(collected.energy_ratios, axis=0) * bulk)
    return energy.expected(run.system())


def attributes(run: RunFile, collected: Collected) -> dict[str, Any]:
    """Return the global attributes of a result: what it is, and what made it."""
    stamp = datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
    program = f"pairmc {version('pairmc')}"
    line = f"{stamp} {program}: {run.snapshots} snapshots in {run.batches} batches"
    return {
        "Conventions": schema.CONVENTIONS,
        schema.SCHEMA_ATTRIBUTE: schema.schema_text(),
        "title": run.title,
        "source": f"{program}: direct draws of a free Fermi gas",
        "history": f"{collected.history}\n{line}" if collected.history else line,
        "run_file": run.text,
        "run_digest": digest(run),
        "run_settings": json.dumps(canonical(run), sort_keys=True),
        "seed": str(run.seed),
        "made_with": json.dumps(collected.made, sort_keys=True),
        "normalisation": schema.NORMALISATION,
        "ensemble": schema.ensemble_words(run),
    }


def _observable(run: RunFile, name: str, collected: Collected) -> tuple[Variables, Variables]:
    """Return the variables and coordinates of one observable."""
    module, theory = registry.observable(name), registry.theory(name)
    system = run.system()
    grid = module.grid(run.observables[name], system)
    tallies = collected.tallies[name]
    counts, moments = tallies.stacked(), tallies.moments(run.snapshots)
    bulk = theory.bulk(system, grid)
    predicted = tallies.expected()
    if predicted is None:
        expected = theory.expected(system, grid)
        predicted = run.batch_size * module.mean_counts(expected, grid)
        total = run.batches * predicted
    else:
        total = predicted.sum(axis=0)
        expected = module.values(total, run.snapshots, grid)
    errors = count_errors(counts, total)
    judged = audit(grid, counts, moments, predicted)

    variables = _values(run, module, grid, counts.sum(axis=0), errors)
    variables[module.COUNT_NAME] = (
        ("batch", *module.COUNT.dimensions),
        counts,
        _describe(run, module.COUNT),
    )
    for key, variable in module.VARIABLES.items():
        exact = _describe(run, variable, ", exact value for this finite system, bin average")
        exact["expectation_source"] = "exact"
        if tallies.expected_counts:
            exact["comment"] = "mean over the twists of all snapshots"
        variables[f"{key}_expected"] = (variable.dimensions, expected[key], exact)
        infinite = _describe(run, variable, ", infinite system of the same densities, bin average")
        variables[f"{key}_bulk"] = (variable.dimensions, bulk[key], infinite)
    variables |= _audit_variables(run, name, module, judged)
    variables |= _headline(run, module, grid, judged)
    if tallies.expected_counts:
        about = _describe(run, module.COUNT, ", expected at the twists of the batch")
        where = ("batch", *module.COUNT.dimensions)
        variables[f"{module.COUNT_NAME}_expected"] = (where, predicted, about)
    variables |= _moment_variables(name, grid, tallies.sums)

    coordinates: Variables = {
        key: (part.dimensions, part.values, _coordinate_attributes(run, key, part))
        for key, part in grid.coordinates().items()
    }
    joint = np.arange(grid.joint_bins, dtype=np.int64)
    for suffix in ("", "_other"):
        key = f"{name}_joint_bin{suffix}"
        coordinates[key] = ((key,), joint, {"units": "1", "long_name": "joint bin"})
    merged = np.arange(len(judged.value), dtype=np.int64)
    key = f"{name}_merged_bin"
    coordinates[key] = ((key,), merged, {"units": "1", "long_name": "merged bin"})
    return variables, coordinates


def _values(
    run: RunFile, module: Any, grid: Any, total: NDArray[np.int64], errors: CountErrors
) -> Variables:
    """Return values, standard errors and intervals of an observable's variables."""
    values = module.values(total, run.snapshots, grid)
    zero = module.values(np.zeros_like(errors.error), run.snapshots, grid)
    spread = module.values(errors.error, run.snapshots, grid)
    lower = module.values(errors.lower, run.snapshots, grid)
    upper = module.values(errors.upper, run.snapshots, grid)
    level = f"{100 * INTERVAL_LEVEL:g} %"
    variables: Variables = {}
    for key, variable in module.VARIABLES.items():
        attributes = _describe(run, variable)
        attributes["ancillary_variables"] = f"{key}_error"
        variables[key] = (variable.dimensions, values[key], attributes)
        variables[f"{key}_error"] = (
            variable.dimensions,
            spread[key] - zero[key],
            _describe(run, variable, ", standard error over batches"),
        )
        variables[f"{key}_interval"] = (
            (*variable.dimensions, "bound"),
            np.stack([lower[key], upper[key]], axis=-1),
            _describe(run, variable, f", {level} interval") | {"level": INTERVAL_LEVEL},
        )
    return variables


def _headline(run: RunFile, module: Any, grid: Any, judged: Audit) -> Variables:
    """Return the value named first, from the innermost merged bin of each row."""
    name, variable = module.HEADLINE
    first = judged.merged[:, 0]

    def of(values: NDArray[np.float64]) -> Any:
        return module.headline(np.append(values, np.nan)[first], grid)

    nothing = np.zeros(len(judged.value))
    return {
        name: (variable.dimensions, of(judged.value), _describe(run, variable)),
        f"{name}_error": (
            variable.dimensions,
            np.abs(of(judged.error) - of(nothing)),
            _describe(run, variable, ", standard error over batches"),
        ),
        f"{name}_expected": (
            variable.dimensions,
            of(judged.expected),
            _describe(run, variable, ", exact value for this finite system"),
        ),
    }


def _audit_variables(run: RunFile, name: str, module: Any, judged: Audit) -> Variables:
    """Return the comparison of sample and expectation."""
    main = module.VARIABLES[module.MAIN]
    dimensions, words = main.dimensions, main.long_name
    about = {"units": _unit(run, main.length_power)}
    bin_name = f"{name}_merged_bin"
    spread = np.append(judged.difference, np.nan)[judged.merged]
    test = judged.test
    counted = {"units": "1"}
    return {
        f"{name}_merge": (
            dimensions,
            judged.merged,
            counted | {"long_name": "merged bin that the bin belongs to, -1: none"},
        ),
        f"{name}_difference": (
            dimensions,
            spread,
            counted
            | {
                "long_name": "value less expectation in standard errors, of the merged bin",
                "comment": "Student's t with (batches - 1) degrees of freedom",
            },
        ),
        f"{name}_merged": (
            (bin_name,),
            judged.value,
            about | {"long_name": f"{words}, merged bin"},
        ),
        f"{name}_merged_error": (
            (bin_name,),
            judged.error,
            about | {"long_name": f"{words}, merged bin, standard error over batches"},
        ),
        f"{name}_merged_expected": (
            (bin_name,),
            judged.expected,
            about | {"long_name": f"{words}, merged bin, exact value for this finite system"},
        ),
        f"{name}_p_value": (
            (),
            test.p_value,
            counted
            | {
                "long_name": "global p-value of sample against expectation",
                "comment": "Hotelling's test over all merged bins of all pairs; covariance from "
                "single snapshots",
                "statistic": test.statistic,
                "dimensions_tested": np.int64(test.dimensions),
            },
        ),
    }


def _moment_variables(name: str, grid: Any, sums: dict[str, NDArray[Any]]) -> Variables:
    """Return the sums over snapshots from which covariances are worked out at reading."""
    joint = f"{name}_joint_bin"
    variables: Variables = {
        f"{name}_joint": (
            tuple(grid.coordinates())[:2],
            grid.joint,
            {"units": "1", "long_name": "joint bin that the bin belongs to"},
        ),
    }
    for kind, words in (("moment", "counts"), ("residual", "counts less expected counts")):
        if f"{kind}_sum" not in sums:
            continue
        variables[f"{name}_{kind}_sum"] = (
            (joint,),
            sums[f"{kind}_sum"],
            {"units": "1", "long_name": f"sum over snapshots of the {words} in a joint bin"},
        )
        variables[f"{name}_{kind}_product"] = (
            (joint, f"{joint}_other"),
            sums[f"{kind}_product"],
            {
                "units": "1",
                "long_name": f"sum over snapshots of products of two joint bins' {words}",
            },
        )
    return variables


def _unit(run: RunFile, power: int | str | None) -> str:
    """Return a unit string for a power of the length unit."""
    return run.gas.units.udunits(-run.gas.dimension if power == "-dimension" else int(power or 0))


def _describe(run: RunFile, variable: Variable, more: str = "") -> dict[str, Any]:
    """Return the attributes of a variable."""
    return {"units": _unit(run, variable.length_power), "long_name": variable.long_name + more}


def _coordinate_attributes(run: RunFile, key: str, part: Any) -> dict[str, Any]:
    """Return the attributes of a coordinate."""
    attributes = {"long_name": part.long_name}
    if part.length_power is not None:
        attributes["units"] = _unit(run, part.length_power)
        if part.length_power and run.gas.units.length:
            attributes["length_unit"] = run.gas.units.length
    if key == "separation":
        attributes["bounds"] = "separation_bounds"
    return attributes
