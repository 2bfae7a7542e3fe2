"""``pairmc describe``: what is in a result file."""

from __future__ import annotations

import json
from collections.abc import Sequence
from typing import Any

import click

from pairmc.cli import text


@click.command()
@click.argument("files", metavar="FILE…", nargs=-1, required=True, type=click.Path())
@click.option("--json", "as_json", is_flag=True, help="Print one JSON list, an entry a file.")
def describe(files: Sequence[str], as_json: bool) -> None:
    """Say what result files hold: scales, hole depth, and how sample and expectation agree."""
    from pairmc.results.load import load
    from pairmc.results.summary import summarise

    summaries = [{"file": file} | summarise(load(file)) for file in files]
    if as_json:
        click.echo(json.dumps(summaries, indent=2, ensure_ascii=False, allow_nan=False))
    else:
        click.echo("\n\n".join(summary_text(summary) for summary in summaries))


def summary_text(summary: dict[str, Any]) -> str:
    """Return a summary as a person reads it."""
    kept = summary["kept_snapshots"]
    lines = [
        f"{summary['file']}: {summary['title']}",
        f"  {summary['snapshots']} snapshots in {summary['batches']} batches"
        + (f", positions of {kept} kept" if kept else ", no positions kept"),
        "",
        _components(summary["components"]),
    ]
    for name, audit in summary["observables"].items():
        lines += ["", *_audit(name, audit)]
    return "\n".join(lines)


_HEADS = {
    "population": "particles",
    "density": "density",
    "fermi_wavenumber": "k_F",
    "fermi_energy": "E_F",
    "fermi_temperature": "T_F",
}


def _components(components: dict[str, Any]) -> str:
    """Return the table of components."""
    names = list(next(iter(components.values())))
    rows = [["component", *(_HEADS[name] for name in names)]]
    for label, quantities in components.items():
        rows.append([label, *(_quantity(name, quantities[name]) for name in names)])
    return text.table(rows)


def _quantity(name: str, quantity: dict[str, Any]) -> str:
    """Return a number with its unit, in the words of the field."""
    value, unit = quantity["value"], quantity["unit"]
    if name == "population":
        return str(value)
    if name == "fermi_temperature":
        return text.temperature(value)
    return f"{value:.5g} {readable_unit(unit)}".rstrip()


def readable_unit(unit: str) -> str:
    """Return a unit of the file with bohr and hartree in place of their metres and joules."""
    from pairmc.units import BOHR, HARTREE

    if unit == "1":
        return ""
    bohr, hartree = f"{BOHR:.11e} m", f"{HARTREE:.13e} J"
    return unit.replace(f"({bohr})", "bohr").replace(bohr, "bohr").replace(hartree, "hartree")


def _audit(name: str, audit: dict[str, Any]) -> list[str]:
    """Return the lines of one observable."""
    headline = audit["headline"]
    rows = [["pair", "sampled", "exact", ""]]
    for label, entry in headline["values"].items():
        if entry["value"] is None:
            rows.append([label, "too few pairs", "", ""])
            continue
        sampled = text.with_error(entry["value"], entry["error"])
        exact = text.exact(entry["expected"], entry["error"])
        rows.append([label, sampled, exact, readable_unit(entry["unit"])])
    lines = [f"{name}: {headline['words']}", text.table(rows)]
    if audit["p_value"] is None:
        lines.append("  sample against expectation: too few pairs for a test")
        return lines
    lines.append(
        f"  sample against exact expectation: global p-value {text.probability(audit['p_value'])} "
        f"({audit['dimensions_tested']} merged bins); largest difference "
        f"{audit['largest_difference']:.2f} standard errors (limit {audit['family_limit']:.2f} "
        f"at {audit['family_level']:g} for all bins together)"
    )
    return lines
