"""Warm occupations against all sets of orbitals, exact integers and known identities.

The checks of drawn frequencies use fixed seeds; together they raise a false alarm with probability
below FAMILY_ALPHA, each with an equal share.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.stats import chi2_contingency, chisquare, poisson

from pairmc.physics.gas import Gas
from pairmc.physics.occupation.canonical import Canonical
from pairmc.physics.occupation.grand_canonical import GrandCanonical
from pairmc.physics.occupation.ground import GroundState
from pairmc.physics.orbitals import Orbitals
from pairmc.physics.system import build_system
from tests.oracles import thermal

FAMILY_ALPHA = 1e-4
STATISTICAL_CHECKS = 6 + 4 + 3 + 3 + 1
ALPHA = FAMILY_ALPHA / STATISTICAL_CHECKS

SPECTRA = {
    "distinct": (0.0, 0.37, 0.9, 1.1, 1.75, 2.2, 3.1),
    "levels": (0.0, 1.0, 1.0, 1.0, 1.0, 2.0, 2.0, 2.0, 2.0),
    "pairs": (0.3, 0.3, 0.8, 0.8, 1.9, 1.9),
    # a relative 1e-9 apart: levels of their own, and next to degenerate
    "close": (0.1, 1.0, 1.0 + 1e-9, 1.0 + 2e-9, 2.0, 2.0, 2.0 + 2e-9, 3.0),
    "one level": (0.7,) * 6,
}

# From a hundredth of the smallest step to far above the highest orbital.
TEMPERATURES = (2e-3, 0.05, 0.6, 7.0, 1000.0)

Occupation = GroundState | Canonical | GrandCanonical


def spectrum(energies: Iterable[float]) -> Orbitals:
    """Return orbitals of given ascending energies; equal numbers are one level."""
    energies = np.array(list(energies))
    level = np.concatenate(([0], np.cumsum(np.diff(energies) > 0)))
    return Orbitals(np.arange(len(energies))[:, None], energies, level)


def warm_gas(
    ratio: tuple[float, ...], population: int, reduced_temperature: float, ensemble="canonical"
) -> Canonical | GrandCanonical:
    """Return the occupation of one component in a periodic box."""
    cold = Gas(len(ratio), ("up",), (population,), 0.83)
    thermal_energy = reduced_temperature * 0.5 * cold.fermi_wavenumbers[0] ** 2
    gas = Gas(
        len(ratio),
        ("up",),
        (population,),
        0.83,
        thermal_energy=thermal_energy,
        ensemble=ensemble,
    )
    return build_system(gas, ratio).occupations[0]


def pair_probability(occupation: Occupation) -> NDArray:
    """Return ⟨n_i n_j⟩ of every two orbitals, ⟨n_i⟩ on the diagonal."""
    weights, factors = occupation.pair_factors()
    pairs = ((weights[:, None] * factors).T @ factors).real
    np.fill_diagonal(pairs, occupation.mean())
    return pairs


def number_sets(filled: NDArray[np.int64]) -> list[tuple[int, ...]]:
    """Return the orbitals of each snapshot, without padding."""
    return [tuple(row[row >= 0].tolist()) for row in filled]


def frequency_p_value(drawn: list, sets: Iterable, probabilities: NDArray) -> float:
    """Return the p-value of these probabilities; rare sets count as one, 0 where another occurs."""
    counts = Counter(drawn)
    sets = [tuple(int(i) for i in members) for members in sets]
    if not set(counts) <= set(sets):
        return 0.0
    observed = np.array([counts[members] for members in sets], dtype=float)
    expected = len(drawn) * probabilities
    rare = expected < 8
    if rare.any():
        seen, mean = observed[rare].sum(), expected[rare].sum()
        if mean < 8:  # too rare for a share of the sum of squares; a test of its own
            tail = min(poisson.cdf(seen, mean), poisson.sf(seen - 1, mean))
            return min(1.0, 2 * min(2 * tail, _chi_square(observed[~rare], expected[~rare])))
        observed = np.append(observed[~rare], seen)
        expected = np.append(expected[~rare], mean)
    return _chi_square(observed, expected)


def _chi_square(observed: NDArray, expected: NDArray) -> float:
    return float(chisquare(observed, expected * observed.sum() / expected.sum()).pvalue)


class TestFixedPopulation:
    @pytest.mark.parametrize("name", SPECTRA)
    @pytest.mark.parametrize("temperature", TEMPERATURES)
    def test_mean_and_pairs_against_all_sets(self, name, temperature):
        energies = SPECTRA[name]
        for population in range(1, min(5, len(energies) - 1) + 1):
            state = Canonical(spectrum(energies), population, temperature)
            sets, probabilities = thermal.canonical_sets(energies, population, temperature)
            mean, pairs = thermal.averages(sets, probabilities, len(energies))
            assert state.mean() == pytest.approx(mean, rel=1e-10, abs=1e-13)
            assert pair_probability(state) == pytest.approx(pairs, rel=1e-10, abs=1e-12)

    @pytest.mark.parametrize("temperature", TEMPERATURES)
    def test_all_orbitals_filled(self, temperature):
        state = Canonical(spectrum(SPECTRA["levels"]), 9, temperature)
        assert state.mean() == pytest.approx(np.ones(9), abs=1e-13)
        assert pair_probability(state) == pytest.approx(np.ones((9, 9)), abs=1e-12)
        assert state.draw(np.random.default_rng(60), 3).tolist() == [list(range(9))] * 3

    @pytest.mark.parametrize(
        ("ratio", "population", "reduced"),
        [
            ((1.0,), 21, 0.5),
            ((1.0, 1.0), 21, 0.1),
            ((1.0, 1.0), 21, 0.5),
            ((1.0, 1.5), 8, 0.02),
            ((1.0, 1.0 + 1e-9), 7, 0.3),  # levels split by a relative 1e-9
            ((1.0, 1.5, 1.75), 12, 0.15),
        ],
    )
    def test_gases_against_exact_integers(self, ratio, population, reduced):
        state = warm_gas(ratio, population, reduced)
        mean, pairs = thermal.exact_canonical(
            state.orbitals.energies, population, state.thermal_energy
        )
        assert state.mean() == pytest.approx(mean, rel=1e-9, abs=1e-12)
        assert pair_probability(state) == pytest.approx(pairs, rel=1e-9, abs=1e-12)

    @pytest.mark.parametrize(
        ("ratio", "population", "reduced"),
        [((1.0,), 50, 0.02), ((1.0, 1.5), 30, 0.2), ((1.0, 1.0, 1.0), 20, 0.2)],
    )
    def test_identities(self, ratio, population, reduced):
        """(x_j − x_i)⟨n_i n_j⟩ = x_j⟨n_i⟩ − x_i⟨n_j⟩, and Σ_{j≠i} ⟨n_i n_j⟩ = (N − 1)⟨n_i⟩."""
        state = warm_gas(ratio, population, reduced)
        mean, pairs = state.mean(), pair_probability(state)
        y = state.orbitals.energies / state.thermal_energy
        first, second = np.nonzero(np.subtract.outer(y, y) > 0.01)
        quotient = np.exp(y[second] - y[first])  # x_i/x_j < 1
        crossed = mean[first] - quotient * mean[second]
        # i is the orbital of higher energy: x_i < x_j
        assert (1 - quotient) * pairs[first, second] == pytest.approx(crossed, abs=1e-11)
        assert pairs.sum(axis=1) - mean == pytest.approx((population - 1) * mean, abs=1e-9)

    @pytest.mark.parametrize(("ratio", "population"), [((1.0, 1.0), 9), ((1.0, 1.0, 1.0), 5)])
    def test_pairs_within_a_level(self, ratio, population):
        """(D − 1)⟨n_i n_j⟩ = (N − 1)⟨n_i⟩ − Σ_{j of other levels} ⟨n_i n_j⟩."""
        state = warm_gas(ratio, population, 0.4)
        mean, pairs, level = state.mean(), pair_probability(state), state.orbitals.level
        for number in range(1, 6):
            members = np.flatnonzero(level == number)
            inner = pairs[np.ix_(members, members)][~np.eye(len(members), dtype=bool)]
            i = members[0]
            others = pairs[i, level != number].sum()
            assert np.ptp(inner) < 1e-12
            assert (len(members) - 1) * inner[0] == pytest.approx(
                (population - 1) * mean[i] - others, abs=1e-11
            )

    @pytest.mark.parametrize(("ratio", "population"), [((1.0,), 6), ((1.0, 1.0), 7), ((1.0,), 5)])
    @pytest.mark.parametrize("reduced", [1e-8, 1e-3])
    def test_cold_gas_is_the_ground_state(self, ratio, population, reduced):
        state = warm_gas(ratio, population, 0.2)
        cold = Canonical(state.orbitals, population, state.thermal_energy * reduced / 0.2)
        axes_cold = Gas(len(ratio), ("up",), (population,), 0.83)
        ground = build_system(axes_cold, ratio).occupations[0]
        count = len(ground.orbitals.energies)
        assert cold.mean()[:count] == pytest.approx(ground.mean(), abs=1e-12)
        assert cold.mean()[count:] == pytest.approx(0, abs=1e-12)
        pairs = pair_probability(cold)[:count, :count]
        assert pairs == pytest.approx(pair_probability(ground), abs=1e-12)
        if ground.closed:
            drawn = cold.draw(np.random.default_rng(61), 3)
            assert drawn.tolist() == [list(range(population))] * 3

    def test_hot_gas_fills_all_sets_alike(self):
        """x = 1: ⟨n⟩ = N/M, ⟨n n'⟩ = N(N − 1)/(M(M − 1))."""
        energies = np.sort(np.random.default_rng(62).random(40))
        state = Canonical(spectrum(energies), 6, 1e12)
        assert state.mean() == pytest.approx(np.full(40, 6 / 40), rel=1e-10)
        pairs = pair_probability(state)[~np.eye(40, dtype=bool)]
        assert pairs == pytest.approx(np.full(40 * 39, 30 / (40 * 39)), rel=1e-10)

    @pytest.mark.parametrize("shift", [-1e4, 1e4])
    def test_zero_of_energy_is_free(self, shift):
        energies = np.array(SPECTRA["levels"])
        state, shifted = (Canonical(spectrum(e), 4, 0.5) for e in (energies, energies + shift))
        assert shifted.mean() == pytest.approx(state.mean(), abs=1e-10)
        assert pair_probability(shifted) == pytest.approx(pair_probability(state), abs=1e-10)

    def test_stays_right_where_alternating_signs_lose_all_digits(self):
        """The recursion of Borrmann & Franke (1993) at a tenth of T_F, 21 in a square."""
        state = warm_gas((1.0, 1.0), 21, 0.1)
        mean, _ = thermal.exact_canonical(state.orbitals.energies, 21, state.thermal_energy)
        wrong = thermal.alternating_canonical(state.orbitals.energies, 21, state.thermal_energy)
        assert np.abs(wrong - mean).max() > 0.1
        assert np.abs(state.mean() - mean).max() < 1e-12


class TestFluctuatingPopulation:
    @pytest.mark.parametrize("name", SPECTRA)
    @pytest.mark.parametrize("temperature", TEMPERATURES)
    def test_mean_and_pairs_against_all_sets(self, name, temperature):
        energies = SPECTRA[name]
        for population in (1, 3):
            state = GrandCanonical(spectrum(energies), population, temperature)
            every = thermal.grand_canonical_sets(energies, population, temperature)
            mean, pairs = thermal.averages(*every, len(energies))
            assert state.mean() == pytest.approx(mean, rel=1e-9, abs=1e-12)
            assert pair_probability(state) == pytest.approx(pairs, rel=1e-9, abs=1e-12)

    def test_differs_from_fixed_population(self):
        """Control: the two ensembles' pairs are told apart by the same comparison."""
        energies = SPECTRA["levels"]
        free, fixed = (kind(spectrum(energies), 3, 0.5) for kind in (GrandCanonical, Canonical))
        assert np.abs(pair_probability(free) - pair_probability(fixed)).max() > 0.02


# 1e-3 T_F to 100 T_F, 1 to 200 particles, as far as the orbitals are few enough to be quick.
RANGE = (
    *(((1.0,), n, t) for n in (1, 2, 51, 200) for t in (1e-3, 0.03, 1.0, 100.0)),
    *(((1.0, 1.5), n, t) for n in (1, 8, 200) for t in (1e-3, 0.03, 1.0, 3.0)),
    ((1.0, 1.5), 8, 100.0),
    *(((1.0, 1.0, 1.0), n, t) for n in (1, 57, 200) for t in (1e-3, 0.03, 0.5)),
    ((1.0, 1.0, 1.0), 2, 10.0),
)


class TestWholeRange:
    @pytest.mark.parametrize(("ratio", "population", "reduced"), RANGE)
    @pytest.mark.parametrize("ensemble", ["canonical", "grand-canonical"])
    def test_finite_and_of_the_right_number(self, ratio, population, reduced, ensemble):
        state = warm_gas(ratio, population, reduced, ensemble)
        mean = state.mean()
        assert np.all(np.isfinite(mean))
        assert mean.min() > -1e-13
        assert mean.max() < 1 + 1e-13
        assert mean.sum() == pytest.approx(population, abs=1e-9)
        steps = np.diff(mean)
        assert np.all(steps <= 1e-12)  # ascending energy, descending occupation
        filled = state.draw(np.random.default_rng(63), 20)
        assert filled.dtype == np.int64
        assert filled.max(initial=-1) < len(mean)
        numbers = (filled >= 0).sum(axis=1)
        if ensemble == "canonical":
            assert np.all(numbers == population)
            weights, factors = state.pair_factors()
            every = np.sum(weights * (factors.sum(axis=1) ** 2 - (factors**2).sum(axis=1))).real
            assert every == pytest.approx(population * (population - 1), rel=1e-9, abs=1e-9)

    @pytest.mark.parametrize(
        ("ratio", "population", "reduced"),
        [((1.0,), 9, 0.5), ((1.0, 1.5), 8, 1e-3), ((1.0, 1.5), 8, 0.5), ((1.0, 1.0, 1.0), 7, 1.0)],
    )
    def test_what_is_left_out_holds_next_to_nothing(self, ratio, population, reduced):
        """Fewer than 1e-12 particles in all orbitals of a box twice as far out."""
        state = warm_gas(ratio, population, reduced, "grand-canonical")
        numbers, energies = state.orbitals.numbers, state.orbitals.energies
        sides = Gas(len(ratio), ("up",), (population,), 0.83).box(ratio)
        spans = [np.arange(-2 * m - 3, 2 * m + 4) for m in np.abs(numbers).max(axis=0)]
        grid = np.stack([part.ravel() for part in np.meshgrid(*spans)], axis=1)
        every = thermal.wave_energies(grid, sides)
        beyond = every[every > energies[-1] * (1 + 1e-9)]
        inside = np.sort(every[every <= energies[-1] * (1 + 1e-9)])
        assert inside == pytest.approx(energies, rel=1e-9, abs=1e-12)  # and no orbital missing
        mean = thermal.fermi_occupations(every, population, state.thermal_energy)
        tail = mean[every > energies[-1] * (1 + 1e-9)]
        assert len(tail) == len(beyond) > len(energies)
        assert tail.sum() < 1e-12


class TestDraws:
    @pytest.mark.parametrize("name", ["distinct", "levels", "close"])
    @pytest.mark.parametrize("temperature", [0.3, 2.0])
    def test_sets_of_a_fixed_population(self, name, temperature):
        energies = SPECTRA[name]
        state = Canonical(spectrum(energies), 3, temperature)
        rng = np.random.default_rng([64, len(energies), int(10 * temperature)])
        filled = state.draw(rng, 150_000)
        assert filled.shape == (150_000, 3)
        assert filled.dtype == np.int64
        assert np.all(np.diff(filled, axis=1) > 0)
        exact = thermal.canonical_sets(energies, 3, temperature)
        assert frequency_p_value(number_sets(filled), *exact) > ALPHA

    @pytest.mark.parametrize("name", ["distinct", "pairs"])
    @pytest.mark.parametrize("temperature", [0.3, 2.0])
    def test_sets_of_a_fluctuating_population(self, name, temperature):
        energies = SPECTRA[name]
        state = GrandCanonical(spectrum(energies), 2, temperature)
        rng = np.random.default_rng([65, len(energies), int(10 * temperature)])
        filled = state.draw(rng, 150_000)
        held = filled >= 0
        assert filled.dtype == np.int64
        assert held.any(axis=0).all()  # as wide as the fullest snapshot
        assert np.all(np.diff(held.astype(int), axis=1) <= 0)  # padding at the end
        assert np.all(np.diff(filled, axis=1)[held[:, 1:]] > 0)
        exact = thermal.grand_canonical_sets(energies, 2, temperature)
        assert frequency_p_value(number_sets(filled), *exact) > ALPHA

    def test_wrong_probabilities_are_seen(self):
        """Control: a tenth too hot, degeneracy forgotten, the other ensemble."""
        energies = SPECTRA["levels"]
        state = Canonical(spectrum(energies), 3, 0.8)
        drawn = number_sets(state.draw(np.random.default_rng(66), 20_000))
        hot = thermal.canonical_sets(energies, 3, 0.8 * 1.1)
        assert frequency_p_value(drawn, *hot) < ALPHA
        split = thermal.canonical_sets(np.array(energies) + 0.02 * np.arange(9), 3, 0.8)
        assert frequency_p_value(drawn, *split) < ALPHA
        free = GrandCanonical(spectrum(energies), 3, 0.8)
        loose = number_sets(free.draw(np.random.default_rng(67), 20_000))
        assert frequency_p_value(loose, *thermal.canonical_sets(energies, 3, 0.8)) == 0.0

    @pytest.mark.parametrize("name", ["distinct", "levels", "close"])
    def test_fixed_population_is_a_fluctuating_one_that_happens_to_have_it(self, name):
        """Draws of one kind against those of the other whose total is N."""
        orbitals = spectrum(SPECTRA[name])
        fixed = Canonical(orbitals, 3, 0.7).draw(np.random.default_rng(68), 12_000)
        free = GrandCanonical(orbitals, 3, 0.7).draw(np.random.default_rng(69), 40_000)
        drawn = number_sets(fixed)
        kept = [members for members in number_sets(free) if len(members) == 3]
        assert len(kept) > 8000
        assert self.same_law(drawn, kept) > ALPHA

    @pytest.mark.parametrize(
        ("ratio", "population", "reduced"),
        [((1.0, 1.0), 9, 0.3), ((1.0,), 21, 0.2), ((1.0, 1.0, 1.0), 7, 0.5)],
    )
    def test_the_same_in_gases(self, ratio, population, reduced):
        """By how many particles the two groups of orbitals round the Fermi level hold."""
        fixed = warm_gas(ratio, population, reduced)
        free = warm_gas(ratio, population, reduced, "grand-canonical")
        one = fixed.draw(np.random.default_rng(70), 8000)
        other = free.draw(np.random.default_rng(71), 40_000)
        kept = other[(other >= 0).sum(axis=1) == population]
        assert len(kept) > 4000

        def features(filled: NDArray[np.int64]) -> list[tuple[int, int]]:
            inner = ((filled >= 0) & (filled < population // 2)).sum(axis=1)
            outer = (filled >= population).sum(axis=1)
            return list(zip(inner.tolist(), outer.tolist(), strict=True))

        assert self.same_law(features(one), features(kept)) > ALPHA
        # control: without looking at the total the two differ
        assert self.same_law(features(one), features(other[:8000])) < ALPHA

    @staticmethod
    def same_law(drawn: list, others: list) -> float:
        """Return the p-value of one law; what occurs fewer than 20 times counts as one."""
        first, second = Counter(drawn), Counter(others)
        table = np.array([[first[key], second[key]] for key in sorted(set(first) | set(second))])
        rare = table.sum(axis=1) < 20
        if rare.any():
            rest = table[rare].sum(axis=0)
            table = table[~rare]
            if rest.sum() < 20:
                table[np.argmin(table.sum(axis=1))] += rest
            else:
                table = np.vstack([table, rest])
        return float(chi2_contingency(table, correction=False).pvalue)

    def test_snapshots_are_independent_of_each_other(self):
        """Sets of consecutive snapshots against the product of their probabilities."""
        energies = (0.0, 0.4, 0.4, 1.0)
        state = Canonical(spectrum(energies), 2, 0.8)
        drawn = number_sets(state.draw(np.random.default_rng(72), 40_000))
        both = [one + other for one, other in zip(drawn[::2], drawn[1::2], strict=True)]
        sets, probabilities = thermal.canonical_sets(energies, 2, 0.8)
        double = [(*one, *other) for one in sets for other in sets]
        assert frequency_p_value(both, double, np.outer(probabilities, probabilities).ravel()) > (
            ALPHA
        )

    def test_fewer_snapshots_are_the_first_of_more(self):
        for kind in (Canonical, GrandCanonical):
            state = kind(spectrum(SPECTRA["levels"]), 3, 0.8)
            few, many = (number_sets(state.draw(np.random.default_rng(73), n)) for n in (5, 50))
            assert few == many[:5]

    def test_different_generators_give_different_sets(self):
        state = Canonical(spectrum(SPECTRA["levels"]), 3, 2.0)
        one, other = (number_sets(state.draw(np.random.default_rng(s), 50)) for s in (74, 75))
        assert one != other
