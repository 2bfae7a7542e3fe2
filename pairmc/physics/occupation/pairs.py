"""How an occupation says which orbitals are filled together: a sum of products."""

from __future__ import annotations

from collections.abc import Iterable
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray


class PairTerm(NamedTuple):
    """One term of ⟨n_i n_j⟩ = Re Σ weight · factor_i · factor_j, for i ≠ j.

    Parameters
    ----------
    weight
        Real or complex.
    factor : array (orbital,)
        Real or complex.
    """

    weight: complex
    factor: NDArray[np.float64] | NDArray[np.complex128]


def stacked(
    terms: Iterable[PairTerm],
) -> tuple[NDArray[np.complex128], NDArray[np.complex128]]:
    """Return the weights (term,) and factors (term, orbital) of all terms."""
    every = list(terms)
    weights = np.array([term.weight for term in every], dtype=np.complex128)
    return weights, np.array([term.factor for term in every], dtype=np.complex128)
