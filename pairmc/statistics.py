"""Errors, intervals and p-values of counted things.

Standard errors come from the spread of batches and are used with Student's t; the global p-value
comes from the covariance over single snapshots and is Hotelling's (Ann. Math. Stat. 2, 360, 1931).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import linalg, special

# A merged bin expects at least about this many counts in the whole run.
MINIMUM_COUNT = 100

# Coverage of an interval of one standard error to either side.
ONE_SIGMA = 0.682689492137086

# The covariance is trusted where there are at least this many snapshots for each merged bin.
SNAPSHOTS_PER_BIN = 5

# Directions whose variance, in units of the bins' own variances, is below this do not vary at all:
# the bins of a complete box hold every pair, so that their sum is fixed.
_NULL_VARIANCE = 1e-9

# Largest deviation, in standard errors of single bins, put down to rounding in such a direction.
_NULL_DEVIATION = 1e-5

FloatArray = NDArray[np.float64]


def t_quantile(level: float, batches: int) -> float:
    """Return t with P(|T| < t) = `level` for Student's T with batches − 1 degrees of freedom."""
    return float(special.stdtrit(batches - 1, 0.5 * (1.0 + level)))


def standard_error(batch_values: FloatArray) -> FloatArray:
    """Return s/√B, s the standard deviation over the first axis (B batches of equal size)."""
    batches = batch_values.shape[0]
    error: FloatArray = batch_values.std(axis=0, ddof=1) / np.sqrt(batches)
    return error


def poisson_interval(
    count: NDArray[np.int64] | FloatArray, level: float
) -> tuple[FloatArray, FloatArray]:
    """Return the exact central interval for the mean of a Poisson count (Garwood, Biometrika 28,
    437, 1936).

    Parameters
    ----------
    count : array
        What was counted.
    level
        Coverage, e.g. 0.95.

    Returns
    -------
    lower, upper : array
        Of the shape of `count`; lower is 0 where nothing was counted.
    """
    count = np.asarray(count, dtype=np.float64)
    tail = 0.5 * (1.0 - level)
    below = np.asarray(special.gammaincinv(np.maximum(count, 0.5), tail), dtype=np.float64)
    lower = np.where(count > 0, below, 0.0)
    upper = np.asarray(special.gammainccinv(count + 1.0, tail), dtype=np.float64)
    return lower, upper


def sum_by_group(
    values: FloatArray | NDArray[np.int64], groups: NDArray[np.int64], size: int
) -> FloatArray:
    """Return the sums of `values` over each of `size` groups; group −1 is left out."""
    kept = groups >= 0
    sums = np.bincount(groups[kept], weights=values[kept], minlength=size)
    return np.asarray(sums, dtype=np.float64)


def merge_outward(
    expected: FloatArray, blocks: NDArray[np.int64], minimum: float = MINIMUM_COUNT
) -> NDArray[np.int64]:
    """Merge neighbouring bins, from the first on, until each expects enough.

    Parameters
    ----------
    expected : array (bin,)
        Expected counts of the whole run.
    blocks : array (bin,) of int64
        Bins are merged only within a block of equal numbers.
    minimum
        What a merged bin must expect at least.

    Returns
    -------
    array (bin,) of int64
        Merged bin of each bin, from 0; −1 in a block that as a whole expects less than `minimum`.
        What is left over at the end of a block joins the last merged bin.
    """
    merged = np.full(len(expected), -1, dtype=np.int64)
    following = 0
    for block in np.unique(blocks):
        members = np.flatnonzero(blocks == block)
        total, first = 0.0, following
        for member in members:
            merged[member] = following
            total += expected[member]
            if total >= minimum:
                following += 1
                total = 0.0
        unfinished = members[merged[members] == following]
        merged[unfinished] = following - 1 if following > first else -1
    return merged


def merge_for_test(
    expected: FloatArray, blocks: NDArray[np.int64], snapshots: int
) -> NDArray[np.int64]:
    """Merge as `merge_outward`, and further where snapshots are few for so many merged bins.

    Parameters
    ----------
    expected : array (bin,)
        Expected counts of the whole run.
    blocks : array (bin,) of int64
        Bins are merged only within a block of equal numbers.
    snapshots
        Snapshots in the whole run.
    """
    minimum = float(MINIMUM_COUNT)
    while True:
        merged = merge_outward(expected, blocks, minimum)
        if (merged.max(initial=-1) + 1) * SNAPSHOTS_PER_BIN <= snapshots or merged.max() < 0:
            return merged
        minimum *= 1.25


@dataclass(frozen=True, eq=False)
class Moments:
    """First and second moments of a vector over snapshots.

    Parameters
    ----------
    snapshots
        How many.
    total : array (bin,)
        Σx.
    product : array (bin, bin)
        Σxxᵀ.
    """

    snapshots: int
    total: NDArray[np.int64]
    product: NDArray[np.int64]

    @property
    def mean(self) -> FloatArray:
        """Σx/M."""
        return self.total / self.snapshots

    @property
    def covariance(self) -> FloatArray:
        """(Σxxᵀ − ΣxΣxᵀ/M)/(M − 1), of single snapshots.

        The difference is taken in whole numbers, M Σxxᵀ − Σx Σxᵀ, so that nothing cancels.
        """
        M = self.snapshots
        total = self.total.astype(object)
        difference = M * self.product.astype(object) - np.outer(total, total)
        return difference.astype(np.float64) / (M * (M - 1.0))

    def merged(self, groups: NDArray[np.int64]) -> Moments:
        """Return the moments of the vector whose entries are summed by group; −1 is left out."""
        count = int(groups.max(initial=-1)) + 1
        matrix = np.zeros((count, len(groups)), dtype=np.int64)
        kept = groups >= 0
        matrix[groups[kept], np.flatnonzero(kept)] = 1
        return Moments(self.snapshots, matrix @ self.total, matrix @ self.product @ matrix.T)


@dataclass(frozen=True)
class GlobalTest:
    """Hotelling's test of a mean vector against its expectation.

    Parameters
    ----------
    statistic
        T² = M Δᵀ C⁻¹ Δ.
    dimensions
        Directions that vary, p.
    snapshots
        M.
    p_value
        Probability of a larger T² under the expectation: T²(M−p)/(p(M−1)) ~ F(p, M−p). NaN where
        nothing can be tested.
    """

    statistic: float
    dimensions: int
    snapshots: int
    p_value: float


def hotelling(moments: Moments, expected: FloatArray) -> GlobalTest:
    """Test the mean over snapshots against its expectation.

    Directions in which the snapshots do not vary at all must agree to rounding: if not, the p-value
    is 0; else they are left out.

    Parameters
    ----------
    moments
        Of independent snapshots.
    expected : array (bin,)
        Expected mean of one snapshot.

    Returns
    -------
    GlobalTest
    """
    M = moments.snapshots
    if M < 3 or len(moments.total) == 0:
        return GlobalTest(np.nan, 0, M, np.nan)
    covariance = moments.covariance
    scale = np.sqrt(np.diag(covariance))
    scale[scale == 0.0] = 1.0
    variances, directions = linalg.eigh(covariance / np.outer(scale, scale))
    offset = directions.T @ ((moments.mean - expected) / scale)
    varying = variances > _NULL_VARIANCE
    p = int(np.count_nonzero(varying))
    if np.any(np.abs(offset[~varying]) > _NULL_DEVIATION):
        return GlobalTest(np.inf, p, M, 0.0)
    if p == 0 or p >= M:
        return GlobalTest(np.nan, p, M, np.nan)
    statistic = float(M * np.sum(offset[varying] ** 2 / variances[varying]))
    fraction = statistic * (M - p) / (p * (M - 1.0))
    return GlobalTest(statistic, p, M, float(special.fdtrc(p, M - p, fraction)))
