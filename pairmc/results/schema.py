"""The names and rules of a result file. A change here changes the schema number."""

from __future__ import annotations

# major.minor: a newer minor opens with a warning, a newer major is refused.
SCHEMA = (1, 0)

SCHEMA_ATTRIBUTE = "pairmc_schema"
CONVENTIONS = "CF-1.11"

# Marks the variables that hold the kept snapshots; they are written part by part.
KEPT = ("position", "component", "particle_count", "snapshot_batch")

# Filled in where a snapshot holds fewer particles than the longest one.
NO_COMPONENT = -1

NORMALISATION = (
    "pair correlations are normalised by the densities of the run: "
    "g = (pairs in the bin)/(snapshots * ideal pairs), ideal = n_s^2 V dv / 2 for like components "
    "and n_s n_s' V dv for unlike ones, dv the volume of the shell; not by the number of pairs"
)

ENSEMBLES = {
    "canonical": "canonical: fixed populations; zero temperature; a partly filled last level is an "
    "equal mixture of its fillings"
}


def schema_text() -> str:
    """Return the schema number as the file states it."""
    return f"{SCHEMA[0]}.{SCHEMA[1]}"
