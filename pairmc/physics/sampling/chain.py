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
from pairmc.physics.sampling.acceptance import accept_in_order, passing_points
from pairmc.physics.sampling.complement import complement_of, reflect
from pairmc.physics.sampling.features import fill_features
from pairmc.physics.sampling.matrices import (
    column_norms,
    conjugated,
    gather_columns,
    gather_rows,
    gram_matrix,
    invert_lower,
    multiply,
    subtract,
)

# Share of the particles placed before the complement takes over.
SWITCH = 0.65


@kernel
def block_size(population):
    """Return how many points are proposed at a time: about N/6, so that some r/6 of the remaining
    r particles are accepted in a block and few products are wasted on later blocks."""
    return max(8, min(population // 6, 512))


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
                complement = complement_of(basis[:placed])
        else:
            reflect(complement, left, inside)
            placed += accepted
