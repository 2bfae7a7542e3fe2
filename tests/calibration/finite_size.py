"""What a twist for each snapshot does to the error of a finite box: one table, from exact values.

``python tests/calibration/finite_size.py`` prints the table of README.md: this box less the
infinite system for the kinetic energy, g and S, at zero twist, averaged over twists at fixed
populations, and averaged at fixed Fermi wave number. One component, zero temperature, equal sides.
"""

from __future__ import annotations

import numpy as np
from scipy.stats import qmc

from pairmc.physics.gas import Gas
from pairmc.physics.grids import separation_grid
from pairmc.physics.system import System, build_system
from pairmc.physics.theory import energy, pair_correlation, structure_factor

# Twists averaged over: 2^14 points of a Sobol sequence (scipy), its scrambling fixed.
POWER, SEED = 14, 7

CASES = ((2, 21), (2, 49), (2, 101), (3, 33), (3, 57), (3, 123))


def row(system: System, twists: np.ndarray) -> tuple[float, float, float]:
    """Return the errors of energy (in per cent), g (largest, any bin), S (smallest wave number)."""
    gas, grid = system.gas, separation_grid(system, 40)
    step = (1,) + (0,) * (gas.dimension - 1)
    bulk = pair_correlation.bulk(system, grid)["pair_correlation"][0]
    if system.averaged:
        total = energy.at_twists(system, twists)[:, 0].mean()
        g = np.mean(
            [
                pair_correlation.at_twists(system, grid, part).mean(axis=0)[0]
                for part in parts(twists)
            ],
            axis=0,
        )
        factor = structure_factor.at_twists(system, 0, step, twists).mean()
    else:
        total = energy.expected(system)[0]
        g = pair_correlation.expected(system, grid)["pair_correlation"][0]
        factor = structure_factor.expected(system, 0, step)
    per_particle = total / gas.populations[0]
    q = system.axes[0].steps(np.array(1)).item()
    return (
        100 * (per_particle / energy.bulk_per_particle(gas)[0] - 1),
        np.abs(g - bulk).max(),
        factor - structure_factor.bulk(gas, 0, q),
    )


def parts(twists: np.ndarray) -> list[np.ndarray]:
    """Return the twists in pieces of equal size."""
    return np.split(twists, 16)


def main() -> None:
    """Print the table."""
    print("| gas | twist | kinetic energy | g, largest | S(2π/L) |")
    print("|---|---|---|---|---|")
    for dimension, population in CASES:
        for twist, ensemble, words in (
            (None, "canonical", "none"),
            ("averaged", "canonical", "averaged, fixed N"),
            ("averaged", "grand-canonical", "averaged, fixed k_F"),
        ):
            gas = Gas(dimension, ("up",), (population,), 1.0, ensemble=ensemble)
            system = build_system(gas, (1.0,) * dimension, twist)
            twists = qmc.Sobol(dimension, rng=SEED).random_base2(POWER) - 0.5
            kinetic, g, factor = row(system, twists)
            print(
                f"| {dimension}D, N = {population} | {words} | {kinetic:+.3f} % | {g:.4f} "
                f"| {factor:+.4f} |",
                flush=True,
            )


if __name__ == "__main__":
    main()
