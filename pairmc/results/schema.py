"""The names and rules of a result file. A change here changes the schema number."""

from __future__ import annotations

# major.minor: a newer minor opens with a warning, a newer major is refused.
SCHEMA = (1, 0)

SCHEMA_ATTRIBUTE = "pairmc_schema"
CONVENTIONS = "CF-1.11"

# Marks the variables that hold the kept snapshots; they are written part by part.
KEPT = ("position", "component", "particle_count", "snapshot_batch")

NORMALISATION = (
    "pair correlations are normalised by the densities of the run: "
    "g = (pairs in the bin)/(snapshots * ideal pairs), ideal = n_s^2 V dv / 2 for like components "
    "and n_s n_s' V dv for unlike ones, dv the volume of the shell; not by the number of pairs"
)


def ensemble_words(ensemble: str, warm: bool) -> str:
    """Return the ensemble in words."""
    if not warm:
        return (
            f"{ensemble}: fixed populations; zero temperature; a partly filled last level is an "
            "equal mixture of its fillings"
        )
    if ensemble == "canonical":
        return "canonical: fixed populations at a temperature"
    return "grand canonical: populations fluctuate about their means, at a temperature"


def schema_text() -> str:
    """Return the schema number as the file states it."""
    return f"{SCHEMA[0]}.{SCHEMA[1]}"
