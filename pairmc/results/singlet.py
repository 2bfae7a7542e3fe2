"""The fraction of pairs in the spin singlet, from the pair counts of two components."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from pairmc.physics.grids import SeparationGrid
from pairmc.physics.theory import singlet_fraction
from pairmc.results.collect import Collected
from pairmc.runfile.run import RunFile
from pairmc.statistics import MINIMUM_COUNT, ONE_SIGMA, poisson_interval, standard_error

Variables = dict[str, tuple[Any, ...]]

NAME = "singlet_fraction"


def singlet_variables(run: RunFile, collected: Collected, grid: SeparationGrid) -> Variables:
    """Return the expectation, and the estimate where the state allows one; none but for two labels.

    Parameters
    ----------
    run
        The run.
    collected
        Tallies of all its batches.
    grid
        The bins of the pair correlation.
    """
    system = run.system()
    if len(run.gas.components) != 2:
        return {}
    tallies = collected.tallies["pair_correlation"]
    along, about = ("separation",), {"units": "1"}
    words = "fraction of pairs in the spin singlet"
    reason = singlet_fraction.not_invariant(system)
    variables: Variables = {}
    predicted = tallies.expected()
    if predicted is None:
        exact = singlet_fraction.expected(system, grid)
    else:
        variables["singlet_pair_count_expected"] = (
            ("batch", *along),
            np.stack(collected.singlet_pairs),
            about | {"long_name": "expected pairs in the spin singlet at the twists of the batch"},
        )
        exact = np.sum(collected.singlet_pairs, axis=0) / predicted.sum(axis=(0, 1))
    variables[f"{NAME}_expected"] = (
        along,
        exact,
        about
        | {
            "long_name": f"{words}, exact value for this finite system, bin average",
            "expectation_source": "exact",
            "sampled_estimate": f"refused: {reason}" if reason else NAME,
        },
    )
    variables[f"{NAME}_bulk"] = (
        along,
        singlet_fraction.bulk(system, grid),
        about | {"long_name": f"{words}, infinite system of the same densities, bin average"},
    )
    if not reason:
        value, error = estimate(tallies.stacked(), grid)
        comment = "(1 - 3 (same - opposite) / (same + opposite)) / 4 of detected pairs of labels"
        variables[NAME] = (along, value, about | {"long_name": words, "comment": comment})
        variables[f"{NAME}_error"] = (
            along,
            error,
            about | {"long_name": f"{words}, standard error over batches"},
        )
    return variables


def estimate(
    counts: NDArray[np.int64], grid: SeparationGrid
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the fraction and its standard error from counts of a state that rotations leave alone.

    4⟨s_z s_z'⟩ = (same − opposite)/(same + opposite), and a singlet fraction of (1 − 3 of it)/4.

    Parameters
    ----------
    counts : array (batch, pair, separation)
        Unordered pairs of labels.
    grid
        The bins.

    Returns
    -------
    value, error : array (separation,)
        NaN where fewer than `MINIMUM_COUNT` pairs were found.
    """
    like = np.array([i == j for _, i, j in grid.pairs])
    same, opposite = counts[:, like].sum(axis=1), counts[:, ~like].sum(axis=1)
    every = same + opposite
    total = every.sum(axis=0)
    known = total >= MINIMUM_COUNT
    divisor = np.where(known, total, 1)
    ratio = (same - opposite).sum(axis=0) / divisor
    # of a ratio: what each batch adds to the numerator beyond its share of the denominator
    left = ((same - opposite) - ratio * every) * (len(counts) / divisor)
    spread = standard_error(left)
    # where one kind was never found, as if its count were at the end of its Poisson interval
    missing = np.minimum(same.sum(axis=0), opposite.sum(axis=0)) == 0
    _, unseen = poisson_interval(np.zeros(1, dtype=np.int64), ONE_SIGMA)
    spread = np.where(missing, np.maximum(spread, 2.0 * unseen / divisor), spread)
    value = np.where(known, 0.25 * (1.0 - 3.0 * ratio), np.nan)
    return value, np.where(known, 0.75 * spread, np.nan)
