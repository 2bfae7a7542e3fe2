"""Small compiled pieces of linear algebra, for real and complex rows alike.

Loops where numpy's expressions would compile slowly; products go through one function.
"""

from __future__ import annotations

import numpy as np

from pairmc.compiled import kernel


@kernel
def column_norms(rows, norms):
    """Fill the squared length of every column of `rows`."""
    norms[:] = 0.0
    for l in range(rows.shape[0]):
        row = rows[l]
        for p in range(norms.size):
            norms[p] += (row[p] * np.conj(row[p])).real


@kernel
def gather_columns(rows, columns):
    """Return the named columns of `rows` as contiguous rows."""
    gathered = np.empty((columns.size, rows.shape[0]), dtype=rows.dtype)
    for l in range(rows.shape[0]):
        row = rows[l]
        for j in range(columns.size):
            gathered[j, l] = row[columns[j]]
    return gathered


@kernel
def gather_rows(rows, chosen):
    """Return a copy of the named rows."""
    gathered = np.empty((chosen.size, rows.shape[1]), dtype=rows.dtype)
    for j in range(chosen.size):
        row = rows[chosen[j]]
        target = gathered[j]
        for l in range(rows.shape[1]):
            target[l] = row[l]
    return gathered


@kernel
def conjugated(rows):
    """Return a copy of `rows`, complex-conjugated."""
    copy = np.empty(rows.shape, dtype=rows.dtype)
    for j in range(rows.shape[0]):
        row = rows[j]
        target = copy[j]
        for l in range(rows.shape[1]):
            target[l] = np.conj(row[l])
    return copy


@kernel
def subtract(rows, other):
    """Subtract `other` from `rows` in place."""
    for j in range(rows.shape[0]):
        row = rows[j]
        less = other[j]
        for l in range(rows.shape[1]):
            row[l] -= less[l]


@kernel
def multiply(left, right):
    """Return the matrix product; one place for all, so that it is compiled once."""
    product = np.empty((left.shape[0], right.shape[1]), dtype=left.dtype)
    np.dot(left, right, product)
    return product


@kernel
def gram_matrix(rows):
    """Return Σ r_j conj(r_l) for every two rows."""
    gram = np.empty((rows.shape[0], rows.shape[0]), dtype=rows.dtype)
    np.dot(rows, conjugated(rows).T, gram)
    return gram


@kernel
def invert_lower(factor, size):
    """Return the inverse of the leading lower triangle of `factor`, `size` rows."""
    inverse = np.zeros((size, size), dtype=factor.dtype)
    for j in range(size):
        row = inverse[j]
        for l in range(j):
            weight = factor[j, l]
            above = inverse[l]
            for m in range(l + 1):
                row[m] -= weight * above[m]
        scale = 1.0 / factor[j, j].real
        for m in range(j):
            row[m] *= scale
        row[j] = scale
    return inverse
