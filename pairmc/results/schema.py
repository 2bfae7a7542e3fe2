"""The names and rules of a result file. A change here changes the schema number."""

from __future__ import annotations

from pairmc.runfile.run import RunFile

# major.minor: a newer minor opens with a warning, a newer major is refused.
SCHEMA = (1, 1)

SCHEMA_ATTRIBUTE = "pairmc_schema"
CONVENTIONS = "CF-1.11"

TWIST_ATTRIBUTES = {
    "units": "1",
    "long_name": "twist of the boundary conditions in the snapshot, in units of 2 pi",
}

NORMALISATION = (
    "pair correlations are normalised by the mean densities of the run, where spins are rotated by "
    "those of detected components: "
    "g = (pairs in the bin)/(snapshots * ideal pairs), ideal = n_s^2 V dv / 2 for like components "
    "and n_s n_s' V dv for unlike ones, dv the volume of the shell; not by the number of pairs"
)


def ensemble_words(run: RunFile) -> str:
    """Return the ensemble in words, and what is done to the spins."""
    turned = (
        f"; all spins are rotated by {run.rotation:g} degrees before they are detected, so that "
        "detected populations fluctuate, and pair correlations are normalised by their means"
    )
    if run.occupation is None:
        words = _ensemble(run)
    elif run.occupation.pair is not None:
        words = f"one spin {run.occupation.pair.kind} of two particles in two orbitals"
    else:
        words = "one determinant of the orbitals named in the run file, fixed populations"
    return words + (turned if run.rotation else "")


def _ensemble(run: RunFile) -> str:
    words = _occupations(run)
    if run.twist == "averaged" or not any(run.twist):
        return words
    return f"{words}; twist {', '.join(f'{part:g}' for part in run.twist)} of the boundary"


def _occupations(run: RunFile) -> str:
    warm, fixed = run.gas.thermal_energy > 0, run.gas.ensemble == "canonical"
    if run.twist == "averaged":
        warmth = "at a temperature" if warm else "zero temperature"
        if fixed:
            return f"canonical: fixed populations, a twist for each snapshot, {warmth}"
        return (
            "grand canonical, at fixed Fermi wave number: populations follow the twist of each "
            f"snapshot, at the chemical potential of the infinite system, {warmth}; pair "
            "correlations are normalised by mean densities, so that unlike components have "
            "<N_s N_s'>/(<N_s><N_s'>), not 1"
        )
    if not warm:
        words = f"{run.gas.ensemble}: fixed populations; zero temperature; "
        if all(part.closed for part in run.system().occupations):
            return words + "closed shells"
        return words + "a partly filled last level is an equal mixture of its fillings"
    if fixed:
        return "canonical: fixed populations at a temperature"
    return "grand canonical: populations fluctuate about their means, at a temperature"


def schema_text() -> str:
    """Return the schema number as the file states it."""
    return f"{SCHEMA[0]}.{SCHEMA[1]}"
