"""How far a sample of whole snapshots lies from an exact expectation."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.stats import f


def hotelling_p_value(vectors: NDArray, expected: NDArray) -> float:
    """Return the p-value of "the mean vector per snapshot is the expected one".

    T² = M Δᵀ C⁻¹ Δ with C from the M snapshots themselves; T²(M − p)/(p(M − 1)) follows F(p, M − p)
    (Hotelling, Ann. Math. Stat. 2, 360, 1931; from memory).

    Parameters
    ----------
    vectors : array (snapshot, feature)
        One vector per independent snapshot, many more snapshots than features.
    expected : array (feature,)
        Exact expectation.
    """
    snapshots, features = vectors.shape
    difference = vectors.mean(axis=0) - expected
    covariance = np.atleast_2d(np.cov(vectors, rowvar=False))
    squared = snapshots * difference @ np.linalg.solve(covariance, difference)
    ratio = squared * (snapshots - features) / (features * (snapshots - 1))
    return float(f.sf(ratio, features, snapshots - features))
