"""Which proposed points are accepted: each against those before it, in order."""

from __future__ import annotations

import numpy as np

from pairmc.compiled import kernel

# A residual below this is rounding: the point coincides with chosen ones and is refused. Proposals
# whose true residual is so small are accepted in one of 10¹² trials.
RESIDUAL_FLOOR = 1e-12


@kernel
def passing_points(residuals, thresholds):
    """Return which points exceed their thresholds."""
    passing = np.empty(residuals.size, dtype=np.int64)
    count = 0
    for p in range(residuals.size):
        if residuals[p] > thresholds[p]:
            passing[count] = p
            count += 1
    return passing[:count]


@kernel
def accept_in_order(gram, thresholds, most, factor, chosen):
    """Decide candidates one after the other: each must exceed its threshold given those before.

    The residual of candidate j, given the accepted ones before it, is the next pivot of the
    Cholesky factorisation of `gram` restricted to accepted rows.

    Parameters
    ----------
    gram : array (candidate, candidate)
        Inner products ⟨r_j, r_l⟩ = Σ r_j conj(r_l) of the candidates' residual vectors.
    thresholds : array (candidate,)
        Candidate j is accepted when its pivot exceeds max(threshold_j, `RESIDUAL_FLOOR`).
    most : int
        Stop after this many are accepted.
    factor : array (candidate, candidate)
        Filled: row l the l-th row of the lower Cholesky factor of the accepted rows.
    chosen : array (candidate,) of int64
        Filled: which candidates were accepted.

    Returns
    -------
    int
        How many were accepted.
    """
    accepted = 0
    for j in range(gram.shape[0]):
        if accepted == most:
            break
        row = factor[accepted]
        pivot = gram[j, j].real
        for l in range(accepted):
            other = factor[l]
            total = gram[j, chosen[l]]
            for m in range(l):
                total -= row[m] * np.conj(other[m])
            entry = total / other[l]
            row[l] = entry
            pivot -= (entry * np.conj(entry)).real
        if pivot > thresholds[j] and pivot > RESIDUAL_FLOOR:
            row[accepted] = np.sqrt(pivot)
            chosen[accepted] = j
            accepted += 1
    return accepted
