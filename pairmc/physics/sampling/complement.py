"""The complement: an orthonormal basis of the span that the chosen points have left over.

It is made once in a snapshot, from the basis of the chosen points, and shrinks by reflections.
"""

from __future__ import annotations

import numpy as np

from pairmc.compiled import kernel
from pairmc.physics.sampling.acceptance import accept_in_order
from pairmc.physics.sampling.matrices import (
    conjugated,
    gather_columns,
    gather_rows,
    invert_lower,
    multiply,
)

# Smallest squared pivot of a row that may enter the complement, times N. Well below 1, so that
# enough rows pass: the pivots that remain add up to the number of rows still wanted.
PIVOT_FLOOR = 1e-3

# Largest measured departure of the complement from orthonormal.
COMPLEMENT_ERROR = 1e-9


@kernel
def scrambled(state):
    """Return the next state, below 2³¹, of a linear congruential generator.

    Orders and signs are a fixed sequence and no random stream: how many are used depends on
    rounding, and positions must not.
    """
    return (1103515245 * state + 12345) % 2147483648


@kernel
def shuffled(size, state):
    """Return 0 … size − 1 in an order that `state` decides."""
    order = np.arange(size)
    for i in range(size - 1, 0, -1):
        state = scrambled(state)
        j = (state >> 8) % (i + 1)
        order[i], order[j] = order[j], order[i]
    return order


@kernel
def residual_rows(basis, coordinates):
    """Return the named rows of 1 − B†B: unit vectors projected on what the basis leaves."""
    rows = multiply(conjugated(gather_columns(basis, coordinates)), basis)
    for j in range(coordinates.size):
        row = rows[j]
        for n in range(row.size):
            row[n] = -row[n]
        row[coordinates[j]] += 1.0
    return rows


@kernel
def orthonormality_error(basis, rows):
    """Return an estimate of how far `rows` are from orthonormal and orthogonal to `basis`.

    The longest change of a random vector of signs z under rows rows†, and the longest component of
    rows† z in the basis, for two such vectors: about the error matrix's mean entry times √size.
    """
    size, orbitals = rows.shape
    worst = 0.0
    state = 20261201
    for _ in range(2):
        signs = np.empty((1, size), dtype=rows.dtype)
        for j in range(size):
            state = scrambled(state)
            signs[0, j] = 1.0 if state < 1073741824 else -1.0
        image = conjugated(multiply(signs, rows)).reshape(orbitals, 1)
        back = multiply(rows, image)
        for j in range(size):
            worst = max(worst, abs(back[j, 0] - signs[0, j]))
        held = multiply(basis, image)
        for k in range(held.shape[0]):
            worst = max(worst, abs(held[k, 0]))
    return worst


@kernel
def project_coordinates(basis, order):
    """Return rows that span the complement of `basis`: projected unit vectors, orthonormalised.

    Unit vectors are taken in the given order, projected on the complement and orthonormalised by a
    Cholesky factorisation of their inner products, which are elements of the projector itself.
    Those that the ones before nearly span (pivot below `PIVOT_FLOOR`/N) are passed over.
    """
    placed, orbitals = basis.shape
    wanted = orbitals - placed
    candidates = min(wanted + 4, orbitals)
    while True:
        coordinates = order[:candidates].copy()
        rows = residual_rows(basis, coordinates)
        gram = conjugated(gather_columns(rows, coordinates))  # the projector is Hermitian
        # one spare row: accept_in_order works in the row that comes next
        factor = np.zeros((wanted + 1, wanted + 1), dtype=basis.dtype)
        floors = np.full(candidates, PIVOT_FLOOR / orbitals)
        chosen = np.empty(candidates, dtype=np.int64)
        found = accept_in_order(gram, floors, wanted, factor, chosen)
        if found == wanted:
            return multiply(invert_lower(factor, wanted), gather_rows(rows, chosen[:wanted]))
        candidates = min(candidates + wanted - found + 4, orbitals)


@kernel
def complement_of(basis):
    """Return an orthonormal basis of all that is orthogonal to the rows of `basis`.

    Made from unit vectors in random order: random ones are never nearly dependent as a whole,
    while neighbouring ones are (on a ring, those of the highest wave numbers alone span the
    complement only to exponentially small pivots). The result is measured, and made anew from
    another order in the rare case that it is not orthonormal to `COMPLEMENT_ERROR`.

    Parameters
    ----------
    basis : array (placed, orbital)
        Orthonormal rows, complex-conjugated.

    Returns
    -------
    array (orbital − placed, orbital)
        Orthonormal rows, complex-conjugated.
    """
    best = project_coordinates(basis, shuffled(basis.shape[1], 1))
    error = orthonormality_error(basis, best)
    for trial in range(2, 22):
        if error < COMPLEMENT_ERROR:
            break
        other = project_coordinates(basis, shuffled(basis.shape[1], trial))
        other_error = orthonormality_error(basis, other)
        if other_error < error:
            best, error = other, other_error
    return best


@kernel
def make_reflector(columns, reflectors, j):
    """Write v_j, of ‖v‖² = 2, whose reflection 1 − v v† takes column j to its first j + 1 rows."""
    left = columns.shape[0]
    length = 0.0
    for l in range(j, left):
        length += (columns[l, j] * np.conj(columns[l, j])).real
    length = np.sqrt(length)
    head = columns[j, j]
    size = np.abs(head)
    phase = head / size if size > 0.0 else head + 1.0
    scale = 1.0 / np.sqrt(length * (length + size))
    reflectors[j, j] = (head + phase * length) * scale  # the sign avoids cancellation
    for l in range(j + 1, left):
        reflectors[l, j] = columns[l, j] * scale


@kernel
def apply_reflector(columns, reflectors, j, work):
    """Reflect the columns after j: c − v (v† c). Loops run along rows, through the vector unit."""
    left, accepted = columns.shape
    work[:] = 0.0
    for l in range(j, left):
        factor = np.conj(reflectors[l, j])
        row = columns[l]
        for i in range(j + 1, accepted):
            work[i] += factor * row[i]
    for l in range(j, left):
        factor = reflectors[l, j]
        row = columns[l]
        for i in range(j + 1, accepted):
            row[i] -= factor * work[i]


@kernel
def extend_triangle(triangle, reflectors, j, work):
    """Add column j of T, so that the product of the first j + 1 reflections is 1 − V T V†."""
    work[:] = 0.0
    for l in range(j, reflectors.shape[0]):
        factor = reflectors[l, j]
        row = reflectors[l]
        for i in range(j):
            work[i] += np.conj(row[i]) * factor
    triangle[j, j] = 1.0
    for m in range(j):
        total = triangle[m, m] * work[m]
        for i in range(m + 1, j):
            total += triangle[m, i] * work[i]
        triangle[m, j] = -total


@kernel
def reflect(complement, left, vectors):
    """Take the span of accepted points out of the complement by Householder reflections.

    With Ψ the coefficients of the accepted points in the complement (one column a point), unitary
    reflections U† bring Ψ to upper-triangular form; U† applied to the complement then leaves the
    accepted span in the first rows, which are dropped. Compact form U = 1 − V T V†.

    Parameters
    ----------
    complement : array (at least left, orbital)
        Its first `left` rows are replaced by the ``left − accepted`` rows that remain.
    left : int
        Rows in use.
    vectors : array (accepted, left)
        Coefficients of the accepted points.
    """
    accepted = vectors.shape[0]
    columns = np.empty((left, accepted), dtype=vectors.dtype)
    for j in range(accepted):
        source = vectors[j]
        for l in range(left):
            columns[l, j] = source[l]
    reflectors = np.zeros((left, accepted), dtype=vectors.dtype)  # V
    triangle = np.zeros((accepted, accepted), dtype=vectors.dtype)  # T
    work = np.empty(accepted, dtype=vectors.dtype)
    for j in range(accepted):
        make_reflector(columns, reflectors, j)
        apply_reflector(columns, reflectors, j, work)
        extend_triangle(triangle, reflectors, j, work)
    lower = np.empty((left - accepted, accepted), dtype=vectors.dtype)
    for l in range(left - accepted):
        for j in range(accepted):
            lower[l, j] = reflectors[l + accepted, j]
    adjoint = conjugated(triangle).T.copy()
    held = np.empty((accepted, complement.shape[1]), dtype=vectors.dtype)
    np.dot(conjugated(reflectors).T, complement[:left], held)
    change = multiply(lower, multiply(adjoint, held))
    for l in range(left - accepted):
        row = complement[l]
        source = complement[l + accepted]
        less = change[l]
        for n in range(row.size):
            row[n] = source[n] - less[n]
