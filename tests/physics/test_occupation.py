"""Occupations of the ground state against the list of all degenerate fillings.

The checks of drawn frequencies use fixed seeds; together they raise a false alarm with probability
below FAMILY_ALPHA, each with an equal share.
"""

from __future__ import annotations

from collections import Counter
from fractions import Fraction
from itertools import combinations
from math import comb

import numpy as np
import pytest
from scipy.stats import chisquare

from pairmc.physics.axes.periodic import Periodic
from pairmc.physics.occupation.ground import GroundState
from pairmc.physics.orbitals import enumerate_orbitals
from tests.oracles import enumeration, pair_density

FAMILY_ALPHA = 1e-4
STATISTICAL_CHECKS = 10
ALPHA = FAMILY_ALPHA / STATISTICAL_CHECKS

UNEVEN = (1, Fraction(3, 2), Fraction(7, 4))

# Ratio, population: closed shells, one or more particles and one or more holes in the last level.
CLOSED = [((1,), 7), ((1, 1), 13), ((1, 1, 2), 9), (UNEVEN, 9), ((1, 1, 1), 1)]
OPEN = [((1,), 4), ((1, 1), 3), ((1, 1), 8), ((1, 1, 2), 5), (UNEVEN, 8), ((1, 1, 1), 4)]


def ground_state(ratio: tuple, population: int) -> GroundState:
    """Return the occupation of a box with sides in this ratio."""
    axes = [Periodic(0.83 * float(side)) for side in ratio]
    return GroundState(enumerate_orbitals(axes, population), population)


def vectors(state: GroundState, filled: np.ndarray) -> list[frozenset]:
    """Return the filled integer vectors of each snapshot."""
    return [frozenset(map(tuple, state.orbitals.numbers[row].tolist())) for row in filled]


def listed(ratio: tuple, population: int) -> list[frozenset]:
    """Return all degenerate fillings."""
    sets = enumeration.occupied_sets(population, ratio)
    return [frozenset(map(tuple, waves.tolist())) for waves in sets]


def frequency_p_value(snapshots: list[frozenset], fillings: list[frozenset]) -> float:
    """Return the p-value of "every filling is equally likely"; 0 where another one occurs."""
    counts = Counter(snapshots)
    if not set(counts) <= set(fillings):
        return 0.0
    return float(chisquare([counts[filling] for filling in fillings]).pvalue)


@pytest.mark.parametrize(("ratio", "population"), CLOSED + OPEN)
def test_core_valence_and_degeneracy(ratio, population):
    state = ground_state(ratio, population)
    core, last = enumeration.core_and_last_level(population, ratio)
    assert (state.core, state.degeneracy, state.valence) == (
        len(core),
        len(last),
        population - len(core),
    )
    assert state.closed == (len(enumeration.occupied_sets(population, ratio)) == 1)


def pair_probability(state: GroundState) -> np.ndarray:
    """Return ⟨n_i n_j⟩ of every two orbitals; the diagonal means nothing."""
    weights, factors = state.pair_factors()
    return np.einsum("t,ti,tj->ij", weights, factors, factors).real


@pytest.mark.parametrize(("ratio", "population"), CLOSED + OPEN)
def test_mean_and_pair_probability_by_listing(ratio, population):
    state = ground_state(ratio, population)
    fillings = listed(ratio, population)
    waves = [tuple(row) for row in state.orbitals.numbers.tolist()]
    filled = np.array([[wave in filling for wave in waves] for filling in fillings], dtype=float)
    assert state.mean() == pytest.approx(filled.mean(axis=0), abs=1e-14)
    assert state.mean().sum() == pytest.approx(population)
    together = filled.T @ filled / len(fillings)
    assigned = pair_probability(state)
    distinct = ~np.eye(len(waves), dtype=bool)
    assert assigned[distinct] == pytest.approx(together[distinct], abs=1e-14)
    assert assigned[distinct].sum() == pytest.approx(population * (population - 1))


def test_independent_filling_would_be_seen():
    """Control: (v/D)² in place of v(v − 1)/(D(D − 1))."""
    state = ground_state((1, 1), 3)
    v, D = state.valence, state.degeneracy
    assert abs(pair_probability(state)[-1, -2] - (v / D) ** 2) > 0.05


@pytest.mark.parametrize(("ratio", "population"), [*CLOSED[:-1], *OPEN])
def test_pair_correlation_from_pair_probabilities(ratio, population):
    """V⁻² Σ_{k≠k'} ⟨n_k n_k'⟩ [1 − cos (k − k')·r] is the average of g over the listed sets."""
    state = ground_state(ratio, population)
    sides = [0.83 * float(side) for side in ratio]
    displacements = np.random.default_rng(31).random((11, len(ratio))) * sides
    probability = pair_probability(state)
    phases = 2 * np.pi * (displacements / sides) @ state.orbitals.numbers.T
    cosines = np.cos(phases[:, :, None] - phases[:, None, :])
    density = (probability * (1 - cosines)).sum(axis=(1, 2)) / population**2
    sets = enumeration.occupied_sets(population, ratio)
    expected = pair_density.pair_correlation(displacements, sets, sides)
    assert density == pytest.approx(expected, abs=1e-12)


@pytest.mark.parametrize(("ratio", "population"), OPEN)
def test_every_filling_is_drawn_equally_often(ratio, population):
    state = ground_state(ratio, population)
    rng = np.random.default_rng([32, len(ratio), population])
    filled = state.draw(rng, 6000)
    assert filled.shape == (6000, population)
    assert np.all(np.diff(filled, axis=1) > 0)
    p_value = frequency_p_value(vectors(state, filled), listed(ratio, population))
    assert p_value > ALPHA


def test_snapshots_are_independent_of_each_other():
    """The 6 × 6 fillings of consecutive snapshots, all equally likely."""
    state = ground_state((1, 1), 3)
    drawn = vectors(state, state.draw(np.random.default_rng(33), 20_000))
    fillings = listed((1, 1), 3)
    number = {filling: i for i, filling in enumerate(fillings)}
    table = Counter((number[a], number[b]) for a, b in zip(drawn[::2], drawn[1::2], strict=True))
    observed = [table[i, j] for i in range(6) for j in range(6)]
    assert chisquare(observed).pvalue > ALPHA


def test_unequal_frequencies_are_seen():
    """Control: neighbours in the list of orbitals filled together slightly too often."""
    state = ground_state((1, 1, 2), 5)
    rng = np.random.default_rng(34)
    fair = state.draw(rng, 6000)
    block = np.arange(state.core, state.core + state.valence)
    biased = fair.copy()
    biased[rng.random(6000) < 0.05, state.core :] = block
    fillings = listed((1, 1, 2), 5)
    assert frequency_p_value(vectors(state, fair), fillings) > ALPHA
    assert frequency_p_value(vectors(state, biased), fillings) < ALPHA


def test_a_wrong_orbital_is_seen():
    """Control: one snapshot with an orbital that the ground state never fills."""
    state = ground_state(UNEVEN, 8)
    wide = ground_state(UNEVEN, 20)
    filled = state.draw(np.random.default_rng(35), 500)
    filled[123, -1] = len(state.orbitals.level)  # the first orbital of the next level
    assert frequency_p_value(vectors(wide, filled), listed(UNEVEN, 8)) == 0.0


@pytest.mark.parametrize(("ratio", "population"), CLOSED)
def test_closed_shells_use_no_randomness(ratio, population):
    state = ground_state(ratio, population)
    rng = np.random.default_rng(36)
    before = rng.bit_generator.state
    filled = state.draw(rng, 3)
    assert rng.bit_generator.state == before
    assert filled.tolist() == [list(range(population))] * 3
    assert vectors(state, filled)[0] == listed(ratio, population)[0]


def test_fewer_snapshots_are_the_first_of_more():
    state = ground_state((1, 1, 1), 4)
    few, many = (state.draw(np.random.default_rng(37), count) for count in (5, 50))
    assert np.array_equal(few, many[:5])


@pytest.mark.parametrize("valence", range(1, 7))
def test_pair_probability_of_every_filling_of_a_level(valence):
    """Six-fold second level of a cube, one to six particles, against all subsets."""
    state = ground_state((1, 1, 1), 1 + valence)
    containing = sum({0, 1} <= set(subset) for subset in combinations(range(6), valence))
    assert pair_probability(state)[-1, -2] == pytest.approx(containing / comb(6, valence))
