"""The chain rule for a determinant: exact positions, one after the other, in blocks.

For N filled orbitals with feature vectors f(x) of length 1, the squared determinant is the law of a
projection kernel, and its points can be drawn one by one (Hough, Krishnapur, Peres & Virág, Probab.
Surveys 3, 206, 2006): with i points chosen, the next has a density proportional to

    residual(x) = 1 − ‖ projection of f(x) on the span of the chosen feature vectors ‖²  ≤ 1,

so a point proposed uniformly in the box is accepted when u < residual(x), u uniform in [0, 1).
Proposals do not depend on what was chosen, hence they are evaluated in blocks, with matrix
products, and then accepted in order. One that fails against the points chosen so far fails for
ever, since the residual only falls; those that pass are decided among themselves by
`accept_in_order`.

Two routes to the same residual. While few points are chosen, the orthonormal `basis` of their span
is small, and the residual is 1 minus what the basis holds. Past `SWITCH`·N points the basis of the
remaining span, the `complement`, is smaller: the residual is what the complement holds, a sum of
squares that no rounding makes negative. The complement only ever shrinks by reflections, which keep
it as orthonormal as it was made, 1e-9 or better, to the last point.

Cost for real features, in operations: proposals 2N³(−s − ln(1−s)) + 2N³(1−s), extending the basis
N³s², building the complement 2N³s(1−s) + 2N³(1−s)², reflections 2N³(1−s)²; about 3.3 N³ for
s = 0.65, nearly all in matrix products. Complex features cost four times as much. Memory: N² for
the basis and less for the complement.
"""

from __future__ import annotations

import numpy as np

from pairmc.compiled import kernel
from pairmc.physics.sampling.features import fill_features

# Share of the particles placed before the complement takes over.
SWITCH = 0.65

# A residual below this is rounding: the point coincides with chosen ones and is refused. Proposals
# whose true residual is so small are accepted in one of 10¹² trials.
RESIDUAL_FLOOR = 1e-12

# Smallest squared pivot of a row that may enter the complement, times N. Well below 1, so that
# enough rows pass: the pivots that remain add up to the number of rows still wanted.
PIVOT_FLOOR = 1e-3

# Largest measured departure of the complement from orthonormal.
COMPLEMENT_ERROR = 1e-9


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


@kernel
def propose(rng, waves, points, thresholds, features):
    """Draw a block of uniform points with their acceptance thresholds, and their features."""
    dimension, count = points.shape
    for p in range(count):
        for a in range(dimension):
            points[a, p] = rng.random()
        thresholds[p] = rng.random()
    fill_features(waves, points, features)


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
def extend_basis(basis, placed, vectors, held, inverse):
    """Orthonormalise the accepted feature vectors against the basis and append them to it.

    `vectors` are the accepted feature vectors, `held` their coefficients in the basis, `inverse`
    the inverse of the Cholesky factor of their residuals. Rows of the basis are complex-conjugated.
    """
    fresh = conjugated(vectors)
    if placed > 0:
        subtract(fresh, multiply(conjugated(held), basis[:placed]))
    np.dot(conjugated(inverse), fresh, basis[placed : placed + vectors.shape[0]])


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
def shuffled(rng, size):
    """Return 0 … size − 1 in random order."""
    order = np.arange(size)
    for i in range(size - 1, 0, -1):
        j = int(rng.random() * (i + 1))
        order[i], order[j] = order[j], order[i]
    return order


@kernel
def orthonormality_error(rng, basis, rows):
    """Return an estimate of how far `rows` are from orthonormal and orthogonal to `basis`.

    The longest change of a random vector of signs z under rows rows†, and the longest component of
    rows† z in the basis, for two such vectors: about the error matrix's mean entry times √size.
    """
    size, orbitals = rows.shape
    worst = 0.0
    for _ in range(2):
        signs = np.empty((1, size), dtype=rows.dtype)
        for j in range(size):
            signs[0, j] = 1.0 if rng.random() < 0.5 else -1.0
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
def complement_of(rng, basis):
    """Return an orthonormal basis of all that is orthogonal to the rows of `basis`.

    Made from unit vectors in random order: random ones are never nearly dependent as a whole,
    while neighbouring ones are (on a ring, those of the highest wave numbers alone span the
    complement only to exponentially small pivots). The result is measured, and made anew from
    another order in the rare case that it is not orthonormal to `COMPLEMENT_ERROR`.

    Parameters
    ----------
    rng : numpy.random.Generator
        Gives the order.
    basis : array (placed, orbital)
        Orthonormal rows, complex-conjugated.

    Returns
    -------
    array (orbital − placed, orbital)
        Orthonormal rows, complex-conjugated.
    """
    best = project_coordinates(basis, shuffled(rng, basis.shape[1]))
    error = orthonormality_error(rng, basis, best)
    for _ in range(20):
        if error < COMPLEMENT_ERROR:
            break
        other = project_coordinates(basis, shuffled(rng, basis.shape[1]))
        other_error = orthonormality_error(rng, basis, other)
        if other_error < error:
            best, error = other, other_error
    return best


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
        Coefficients of the accepted points; overwritten.
    """
    accepted = vectors.shape[0]
    reflectors = np.zeros((accepted, left), dtype=vectors.dtype)  # rows are V†
    triangle = np.zeros((accepted, accepted), dtype=vectors.dtype)
    for j in range(accepted):
        column = vectors[j]
        length = 0.0
        for l in range(j, left):
            length += (column[l] * np.conj(column[l])).real
        length = np.sqrt(length)
        head = column[j]
        size = np.abs(head)
        phase = head / size if size > 0.0 else head + 1.0
        # v = column + phase·length·e_j; the sign avoids cancellation
        column[j] = head + phase * length
        scale = 1.0 / np.sqrt(length * (length + size))
        reflector = reflectors[j]
        for l in range(j, left):
            reflector[l] = np.conj(column[l]) * scale  # ‖v‖² = 2, so H = 1 − v v†
        for i in range(j + 1, accepted):
            target = vectors[i]
            overlap = target[j] * 0.0
            for l in range(j, left):
                overlap += reflector[l] * target[l]
            for l in range(j, left):
                target[l] -= overlap * np.conj(reflector[l])
        triangle[j, j] = 1.0
        for i in range(j):
            other = reflectors[i]
            overlap = head * 0.0
            for l in range(j, left):
                overlap += other[l] * np.conj(reflector[l])
            for m in range(i + 1):
                triangle[m, j] -= triangle[m, i] * overlap
    adjoint = np.empty((accepted, accepted), dtype=vectors.dtype)
    for j in range(accepted):
        for i in range(accepted):
            adjoint[j, i] = np.conj(triangle[i, j])
    lower = np.empty((left - accepted, accepted), dtype=vectors.dtype)
    for l in range(left - accepted):
        for j in range(accepted):
            lower[l, j] = np.conj(reflectors[j, l + accepted])
    change = multiply(lower, multiply(adjoint, multiply(reflectors, complement[:left])))
    for l in range(left - accepted):
        row = complement[l]
        source = complement[l + accepted]
        less = change[l]
        for n in range(row.size):
            row[n] = source[n] - less[n]


@kernel
def block_size(population):
    """Return how many points are proposed at a time: about N/6, so that some r/6 of the remaining
    r particles are accepted in a block and few products are wasted on later blocks."""
    return max(8, min(population // 6, 512))


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
def draw_positions(rng, waves, position):
    """Draw the positions of all particles of one component in one snapshot.

    Parameters
    ----------
    rng : numpy.random.Generator
        Used a block of proposals at a time: coordinates, then the threshold, point after point.
    waves : PlaneWaves
        The filled plane waves.
    position : array (particle, axis)
        Filled with fractions of the sides, in [0, 1), in the order drawn.
    """
    population = waves.population
    dimension = position.shape[1]
    count = block_size(population)
    kind = waves.like.dtype
    points = np.empty((dimension, count))
    thresholds = np.empty(count)
    residuals = np.empty(count)
    features = np.empty((population, count), dtype=kind)
    factor = np.empty((count + 1, count + 1), dtype=kind)
    chosen = np.empty(count, dtype=np.int64)
    switch = int(np.ceil(SWITCH * population))
    # the last block before the switch may overshoot it by what one block accepts
    basis = np.empty((min(population, switch + count), population), dtype=kind)
    complement = np.empty((0, population), dtype=kind)
    placed = 0
    while placed < population:
        left = population - placed
        propose(rng, waves, points, thresholds, features)
        direct = placed < switch
        held = (
            multiply(basis[:placed], features) if direct else multiply(complement[:left], features)
        )
        column_norms(held, residuals)
        if direct:
            for p in range(count):
                residuals[p] = 1.0 - residuals[p]
        passing = passing_points(residuals, thresholds)
        for j in range(passing.size):
            thresholds[j] = thresholds[passing[j]]
        inside = gather_columns(held, passing)
        vectors = gather_columns(features, passing) if direct else inside
        gram = gram_matrix(vectors)
        if direct:
            subtract(gram, gram_matrix(inside))
        accepted = accept_in_order(gram, thresholds, left, factor, chosen)
        if accepted == 0:
            continue
        kept = chosen[:accepted]
        for j in range(accepted):
            for a in range(dimension):
                position[placed + j, a] = points[a, passing[kept[j]]]
        inside = gather_rows(inside, kept)
        if direct:
            inverse = invert_lower(factor, accepted)
            extend_basis(basis, placed, gather_rows(vectors, kept), inside, inverse)
            placed += accepted
            if switch <= placed < population:
                complement = complement_of(rng, basis[:placed])
        else:
            reflect(complement, left, inside)
            placed += accepted
