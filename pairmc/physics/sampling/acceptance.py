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
    Cholesky factorisation of `gram` restricted to accepted rows, which takes each accepted
    candidate out of all that follow: loops that run through the vector unit.

    Parameters
    ----------
    gram : array (candidate, candidate)
        Inner products ⟨r_j, r_l⟩ = Σ r_j conj(r_l) of the candidates' residual vectors;
        overwritten.
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
    candidates = gram.shape[0]
    accepted = 0
    for j in range(candidates):
        if accepted == most:
            break
        pivot = gram[j, j].real
        if not (pivot > thresholds[j] and pivot > RESIDUAL_FLOOR):
            continue
        row = factor[accepted]
        for l in range(accepted):
            row[l] = gram[chosen[l], j]
        length = np.sqrt(pivot)
        row[accepted] = length
        chosen[accepted] = j
        accepted += 1
        # what the candidates after it have along it, kept in the row of the gram matrix that is
        # done with, is taken out of all their inner products
        along = gram[j]
        for i in range(j + 1, candidates):
            along[i] = gram[i, j] / length
        for i in range(j + 1, candidates):
            weight = along[i]
            target = gram[i]
            for l in range(j + 1, i + 1):
                target[l] -= weight * np.conj(along[l])
    return accepted
