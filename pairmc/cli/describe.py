"""``pairmc describe``: what is in a result file."""

from __future__ import annotations

import json
import textwrap
from collections.abc import Sequence
from typing import Any

import click

from pairmc.cli import text


@click.command()
@click.argument("files", metavar="FILE…", nargs=-1, required=True, type=click.Path())
@click.option("--json", "as_json", is_flag=True, help="Print one JSON list, an entry a file.")
def describe(files: Sequence[str], as_json: bool) -> None:
    """Say what result files hold: scales, hole depth, and whether sample and expectation disagree.

    The depth of the hole is an average over the range of separations beside it.
    """
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
        f"  {text.counted(summary['snapshots'], 'snapshot')} in "
        f"{text.counted(summary['batches'], 'batch')}"
        + (f", positions of {kept} kept" if kept else ", no positions kept"),
        *_conditions(summary),
        "",
        _components(summary["components"]),
    ]
    for name, audit in summary["observables"].items():
        lines += ["", *_audit(name, audit)]
    return "\n".join(lines)


def _conditions(summary: dict[str, Any]) -> list[str]:
    """Return the ensemble in words, and the temperature where there is one."""
    lines = textwrap.wrap(
        summary["ensemble"], _WIDTH, initial_indent="  ", subsequent_indent="    "
    )
    conditions = summary["conditions"]
    if conditions.get("reduced_temperature", {"value": 0.0})["value"] > 0:
        ratio = conditions["reduced_temperature"]["value"]
        kelvin = conditions.get("temperature")
        in_kelvin = "" if kelvin is None else f" = {text.temperature(kelvin['value'])}"
        lines.append(f"  temperature {ratio:.5g} T_F of the majority component{in_kelvin}")
    return lines


# Characters of a line of text.
_WIDTH = 100

_HEADS = {
    "population": "particles",
    "detected_population": "detected (mean)",
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
    if name == "fermi_energy" and unit == "1":
        unit = text.ENERGY_UNIT
    return f"{value:.5g} {readable_unit(unit)}".rstrip()


def readable_unit(unit: str) -> str:
    """Return a unit of the file with bohr and hartree in place of their metres and joules."""
    from pairmc.units import in_atomic_units

    return "" if unit == "1" else in_atomic_units(unit)


def _audit(name: str, audit: dict[str, Any]) -> list[str]:
    """Return the lines of one observable."""
    headline = audit["headline"]
    lines = [f"{name}: {headline['words']}", text.table(_headline_rows(headline["values"]))]
    lines += _wide_ranges(headline)
    if audit["p_value"] is None:
        return [*lines, "  sample against exact expectation: too few pairs or snapshots for a test"]
    return [*lines, "  sample against exact expectation: " + _test(audit)]


def _headline_rows(values: dict[str, Any]) -> list[list[str]]:
    """Return the table of sampled and exact values, each with the range it is averaged over."""
    scales = [entry["range"]["scaled_by"] for entry in values.values() if entry["range"]]
    rulers = ["averaged over r", f"k_F r ({scales[0]})"] if scales else ["", ""]
    rows = [["pair", "sampled", "exact", "", *rulers]]
    for label, entry in values.items():
        if entry["value"] is None:
            rows.append([label, "too few pairs", "", "", "", ""])
            continue
        sampled = text.with_error(entry["value"], entry["error"])
        exact = text.exact(entry["expected"], entry["error"])
        reach = _range(entry["range"]) if entry["range"] else ("", "")
        rows.append([label, sampled, exact, readable_unit(entry["unit"]), *reach])
    return rows


def _range(reach: dict[str, Any]) -> tuple[str, str]:
    """Return a range of separations in its unit, and times k_F."""
    separation = f"{reach['from']:.4g} to {reach['to']:.4g} {readable_unit(reach['unit'])}"
    return separation.rstrip(), f"{reach['scaled_from']:.3g} to {reach['scaled_to']:.3g}"


def _wide_ranges(headline: dict[str, Any]) -> list[str]:
    """Return a line that says where the average is not the value at contact, if anywhere."""
    values = headline["values"]
    wide = [label for label, entry in values.items() if entry["range"] and entry["range"]["wide"]]
    if not wide:
        return []
    pairs = "all pairs" if len(wide) == len(values) > 1 else ", ".join(wide)
    return [
        f"  {pairs}: averaged over a range that reaches beyond k_F r = "
        f"{headline['wide_beyond']:g}; this is not the value at contact"
    ]


def _test(audit: dict[str, Any]) -> str:
    """Return what the global test and the largest difference say."""
    from pairmc.results.summary import probability

    merged, tested = audit["merged_bins"], audit["dimensions_tested"]
    bins = text.counted(merged, "merged bin")
    if tested < merged:
        bins += f", {tested} of them independent"
    said = f"{audit['verdict']}, global p-value {probability(audit['p_value'])} ({bins}); "
    largest = audit["largest_difference"]
    if largest is None:
        return said + "a difference where none is possible"
    beyond = "beyond the limit" if largest > audit["family_limit"] else "limit"
    return said + (
        f"largest difference {largest:.2f} standard errors ({beyond} "
        f"{audit['family_limit']:.2f} at {audit['family_level']:g} for all bins together)"
    )
