"""Holds tallies against their exact expectation: errors, merged bins, the global p-value."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pairmc.statistics import (
    MINIMUM_COUNT,
    ONE_SIGMA,
    GlobalTest,
    Moments,
    hotelling,
    merge_for_test,
    poisson_interval,
    standard_error,
    sum_by_group,
    t_quantile,
)

FloatArray = NDArray[np.float64]

# Coverage of the intervals in a result file.
INTERVAL_LEVEL = 0.95


@dataclass(frozen=True, eq=False)
class CountErrors:
    """Errors of the counts of a whole run.

    Parameters
    ----------
    error : array
        Standard error, never 0.
    lower, upper : array
        Interval of coverage `INTERVAL_LEVEL`.
    """

    error: FloatArray
    lower: FloatArray
    upper: FloatArray


def count_errors(counts: NDArray[np.int64], expected: FloatArray) -> CountErrors:
    """Return the errors of counts summed over batches.

    From the spread of batches, B^(1/2)·s with Student's t. A bin that expects fewer than
    `MINIMUM_COUNT` is too empty for that; its counts are rare and independent, so its interval is
    Poisson's, and its error the longer arm of the interval of one standard error.

    Parameters
    ----------
    counts : array (batch, …)
        Counts of each batch.
    expected : array (…)
        Expected counts of the whole run.
    """
    batches, total = counts.shape[0], counts.sum(axis=0)
    spread = batches * standard_error(counts.astype(np.float64))
    arm = t_quantile(INTERVAL_LEVEL, batches) * spread
    sparse = expected < MINIMUM_COUNT
    low, high = poisson_interval(total, ONE_SIGMA)
    lower, upper = poisson_interval(total, INTERVAL_LEVEL)
    return CountErrors(
        error=np.where(sparse, np.maximum(total - low, high - total), spread),
        lower=np.where(sparse, lower, total - arm),
        upper=np.where(sparse, upper, total + arm),
    )


@dataclass(frozen=True, eq=False)
class Audit:
    """One observable of a run against its expectation.

    Parameters
    ----------
    merged : array (pair, separation) of int64
        Merged bin of every bin, −1 where there are too few counts for any.
    value, error, expected : array (merged,)
        The observable's main variable in each merged bin: mean, standard error over batches,
        expectation.
    difference : array (merged,)
        (value − expected)/error: Student's t with batches − 1 degrees of freedom. Where every
        snapshot has an expectation of its own, the error is that of what these leave.
    test
        Global test over all merged bins.
    """

    merged: NDArray[np.int64]
    value: FloatArray
    error: FloatArray
    expected: FloatArray
    difference: FloatArray
    test: GlobalTest


def audit(
    grid: Any,
    counts: NDArray[np.int64],
    moments: Moments,
    expected: FloatArray,
) -> Audit:
    """Hold an observable's counts against their expectation.

    Parameters
    ----------
    grid
        Its grid.
    counts : array (batch, …)
        Its counts, batch by batch.
    moments
        Of its joint bins, over single snapshots; of what their expectations leave, where these
        differ between snapshots.
    expected : array (…), or (batch, …) where the expectations of batches differ
        Expected counts of a batch.
    """
    M, batches = moments.snapshots, counts.shape[0]
    differing = expected.ndim == counts.ndim
    mean = grid.joint_sums(expected.mean(axis=0) if differing else expected) * (batches / M)
    groups = merge_for_test(M * mean, grid.blocks, M)
    merged = groups[grid.joint]
    size = int(groups.max(initial=-1)) + 1
    predicted = sum_by_group(mean, groups, size)
    per_batch = np.stack([sum_by_group(row, merged, size) for row in counts])
    per_batch *= batches / M
    value, error = per_batch.mean(axis=0), standard_error(per_batch)
    difference, spread, reference = value - predicted, error, predicted
    if differing:
        residual = np.stack([sum_by_group(row, merged, size) for row in counts - expected]) * (
            batches / M
        )
        difference, spread = residual.mean(axis=0), standard_error(residual)
        reference = np.zeros(size)
    ideal = sum_by_group(grid.ideal, merged, size)
    return Audit(
        merged=merged,
        value=value / ideal,
        error=error / ideal,
        expected=predicted / ideal,
        difference=_ratio(difference, spread, predicted),
        test=hotelling(moments.merged(groups), reference),
    )


def _ratio(difference: FloatArray, error: FloatArray, scale: FloatArray) -> FloatArray:
    """Return difference/error; where nothing varies, 0 if they agree to rounding and else ∞."""
    certain = error <= 1e-12 * scale
    exact = np.where(np.abs(difference) <= 1e-9 * scale, 0.0, np.inf)
    ratio: FloatArray = np.where(certain, exact, difference / np.where(certain, 1.0, error))
    return ratio
