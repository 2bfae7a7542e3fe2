"""Warm gases in their box: exact expectations, and snapshots of both ensembles against them.

Statistical checks use fixed seeds; together they raise a false alarm with probability below
FAMILY_ALPHA, each with an equal share.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.integrate import quad
from scipy.stats import chisquare, ttest_1samp

from pairmc.physics.gas import Gas
from pairmc.physics.grids import separation_grid
from pairmc.physics.observables import pair_correlation
from pairmc.physics.occupation.canonical import Canonical
from pairmc.physics.occupation.grand_canonical import GrandCanonical
from pairmc.physics.snapshots import NO_COMPONENT, Snapshots
from pairmc.physics.system import System, build_system
from pairmc.physics.theory.pair_correlation import bulk, expected
from pairmc.statistics import Moments, hotelling, merge_for_test
from tests.oracles import pair_density, thermal
from tests.oracles.significance import hotelling_p_value
from tests.physics.gases import draw, make_sampler, shells

FAMILY_ALPHA = 1e-4

ENSEMBLES = ("canonical", "grand-canonical")
DENSITY = 0.83


def warm_system(
    ratio: Sequence[float], populations: Sequence[int], reduced: float, ensemble: str = "canonical"
) -> System:
    """Return a gas at a temperature in units of the majority's T_F."""
    names = ("up", "down", "strange")[: len(populations)]
    gas = Gas(len(ratio), names, tuple(populations), DENSITY, ensemble=ensemble)
    fermi_energy = 0.5 * gas.fermi_wavenumbers[gas.majority] ** 2
    gas = replace(gas, thermal_energy=reduced * fermi_energy)
    assert gas.reduced_temperature == pytest.approx(reduced)
    return build_system(gas, tuple(ratio))


def exact_pairs(state: Canonical | GrandCanonical) -> NDArray:
    """Return ⟨n_i n_j⟩ of the oracle, ⟨n_i⟩ on the diagonal."""
    energies, T = state.orbitals.energies, state.thermal_energy
    if isinstance(state, Canonical):
        return thermal.exact_canonical(energies, state.population, T)[1]
    return thermal.independent_pairs(thermal.fermi_occupations(energies, state.population, T))


def package_pairs(state: Canonical | GrandCanonical) -> NDArray:
    """Return the same from the package."""
    weights, factors = state.pair_factors()
    pairs = ((weights[:, None] * factors).T @ factors).real
    np.fill_diagonal(pairs, state.mean())
    return pairs


def test_ensembles_are_built_as_asked():
    for ensemble, kind in zip(ENSEMBLES, (Canonical, GrandCanonical), strict=True):
        system = warm_system((1.0, 1.0), (9, 5), 0.4, ensemble)
        assert [type(state) for state in system.occupations] == [kind, kind]
        assert [state.population for state in system.occupations] == [9, 5]
        # one temperature for all components, in units of the majority's T_F
        assert {state.thermal_energy for state in system.occupations} == {system.gas.thermal_energy}
        # one order of orbitals for all components
        first, second = (state.orbitals.numbers for state in system.occupations)
        shared = min(len(first), len(second))
        assert np.array_equal(first[:shared], second[:shared])


class TestExpectation:
    @pytest.mark.parametrize(
        ("ensemble", "variance"), [("canonical", 2.8958), ("grand-canonical", 5.1512)]
    )
    def test_number_in_half_a_square(self, ensemble, variance):
        """2D, N = 21, T/T_F = 0.5, slab x < L/2: recomputed independently from the definition."""
        state = warm_system((1.0, 1.0), (21,), 0.5, ensemble).occupations[0]
        found = thermal.box_window_variance(
            state.orbitals.numbers, package_pairs(state), (0.5, 1.0)
        )
        assert found == pytest.approx(variance, abs=6e-5)

    @pytest.mark.parametrize(
        ("ratio", "population", "reduced"),
        [
            ((1.0,), 9, 0.3),
            ((1.0,), 4, 1e-3),
            ((1.0, 1.5), 8, 0.4),
            ((1.0, 1.0), 21, 0.1),
            ((1.0, 1.0), 3, 2.0),
            ((1.0, 1.5, 1.75), 5, 0.15),
        ],
    )
    @pytest.mark.parametrize("ensemble", ENSEMBLES)
    def test_of_every_bin_by_integrals_over_shells(self, ratio, population, reduced, ensemble):
        system = warm_system(ratio, (population,), reduced, ensemble)
        state = system.occupations[0]
        grid = separation_grid(system, 5)
        found = expected(system, grid)["pair_correlation"][0]
        exact = thermal.pair_correlation_bins(
            state.orbitals.numbers, exact_pairs(state), system.sides, grid.edges
        )
        assert found == pytest.approx(exact, rel=1e-8, abs=1e-9)

    def test_of_a_fixed_population_by_listing_sets(self):
        """Two particles, warm: the weighted average of g over all sets that ever occur."""
        system = warm_system((1.0, 1.5), (2,), 0.3)
        state = system.occupations[0]
        sets, probabilities = thermal.canonical_sets(
            state.orbitals.energies, 2, state.thermal_energy
        )
        kept = probabilities > 1e-13
        listed = [state.orbitals.numbers[members] for members in sets[kept]]
        grid = separation_grid(system, 3)
        exact = pair_density.bin_averages(listed, system.sides, grid.edges, probabilities[kept])
        found = expected(system, grid)["pair_correlation"][0]
        assert found == pytest.approx(exact, rel=1e-8, abs=1e-9)

    @pytest.mark.parametrize("ensemble", ENSEMBLES)
    def test_unlike_components_are_independent(self, ensemble):
        system = warm_system((1.0, 1.0), (9, 5), 0.4, ensemble)
        found = expected(system, separation_grid(system, 6))
        assert np.all(found["pair_correlation"][1] == 1.0)
        assert np.all(found["exchange_hole"][1] == 0.0)

    @pytest.mark.parametrize("dimension", [1, 2, 3])
    @pytest.mark.parametrize("reduced", [1e-3, 0.5, 10.0])
    def test_of_the_infinite_gas_by_plain_integrals(self, dimension, reduced):
        populations = {1: 7, 2: 9, 3: 7}[dimension]
        system = warm_system((1.0,) * dimension, (populations,), reduced)
        grid = separation_grid(system, 3)
        found = bulk(system, grid)["pair_correlation"][0]
        gas = thermal.InfiniteGas(dimension, DENSITY, system.gas.thermal_energy)
        for b, (inner, outer) in enumerate(zip(grid.edges[:-1], grid.edges[1:], strict=True)):
            value, _ = quad(
                lambda r: r ** (dimension - 1) * gas.pair_correlation(r), inner, outer, epsrel=1e-9
            )
            mean = value * dimension / (outer**dimension - inner**dimension)
            assert found[b] == pytest.approx(mean, rel=1e-7)

    @pytest.mark.parametrize("reduced", [0.5, 2.0])
    def test_large_box_with_fluctuating_numbers_is_the_infinite_gas(self, reduced):
        """What periodicity adds falls exponentially; at fixed numbers 1/N stays."""
        free = warm_system((1.0, 1.0), (61,), reduced, "grand-canonical")
        grid = separation_grid(free, 10)
        infinite = bulk(free, grid)["pair_correlation"][0]
        found = expected(free, grid)["pair_correlation"][0]
        assert found == pytest.approx(infinite, abs=1e-7)
        fixed = warm_system((1.0, 1.0), (61,), reduced)
        other = expected(fixed, grid)["pair_correlation"][0]
        structure = {0.5: 0.43233236, 2.0: 2 * (1 - np.exp(-0.5))}[reduced]
        # far away: −S(0)/N (2D closed form, recomputed independently)
        assert (other - found)[-1] == pytest.approx(-structure / 61, rel=0.005)

    @pytest.mark.parametrize("ensemble", ENSEMBLES)
    def test_cold_gas_is_the_ground_state(self, ensemble):
        warm = warm_system((1.0, 1.0), (13, 5), 1e-3, ensemble)
        cold = build_system(replace(warm.gas, thermal_energy=0.0, ensemble="canonical"), (1.0, 1.0))
        grid = separation_grid(warm, 8)
        found, ground = (expected(system, grid) for system in (warm, cold))
        for name, values in ground.items():
            assert found[name] == pytest.approx(values, rel=1e-8, abs=1e-9)


class TestSnapshots:
    """Pairs, numbers and wave vectors of snapshots, whole snapshots as units."""

    # ensemble, ratio, populations, T/T_F: like and unlike components, one to three dimensions
    CASES = (
        ((1.0,), (9, 4), 0.3),
        ((1.0, 1.0), (21, 21), 0.5),
        ((1.0, 1.5), (6, 3), 0.1),
        ((1.0, 1.0, 1.0), (5, 3), 0.15),
    )
    CHECKS = 2 * 2 * len(CASES) + 2 * 3 + 2 * 2 + 2
    ALPHA = FAMILY_ALPHA / CHECKS
    SNAPSHOTS = 2000
    BINS = 12

    def package_p_value(self, snapshots: Snapshots, truth: System) -> float:
        """Return the package's global p-value against the expectation of `truth`."""
        grid = separation_grid(truth, self.BINS)
        tallies = pair_correlation.empty(grid)
        pair_correlation.tally(snapshots, grid, tallies)
        count = len(snapshots.position)
        moments = Moments(count, tallies["moment_sum"], tallies["moment_product"])
        mean = grid.joint_sums(pair_correlation.mean_counts(expected(truth, grid), grid))
        groups = merge_for_test(count * mean, grid.blocks, count)
        merged = np.array([mean[groups == g].sum() for g in range(groups.max() + 1)])
        return hotelling(moments.merged(groups), merged).p_value

    def independent_p_value(self, snapshots: Snapshots, truth: System) -> float:
        """Return the same from counting, exact pairs and quadrature of the tests' own."""
        sides = np.array(truth.sides)
        edges = 0.5 * sides.min() * np.array([0.0, 0.35, 0.5, 0.65, 0.8, 0.97])
        ball = shells(len(sides), edges) / sides.prod()
        means, counts = [], []
        for part, state in enumerate(truth.occupations):
            g = thermal.pair_correlation_bins(
                state.orbitals.numbers, exact_pairs(state), sides, edges
            )
            means.append(0.5 * state.population**2 * ball * g)
            counts.append(counted(snapshots, part, part, sides, edges))
        first, second = (state.population for state in truth.occupations)
        means.append(first * second * ball)
        counts.append(counted(snapshots, 0, 1, sides, edges))
        mean, count = np.concatenate(means), np.concatenate(counts, axis=1)
        kept = len(count) * mean >= 100
        assert kept.sum() >= 9
        return hotelling_p_value(count[:, kept], mean[kept])

    @pytest.mark.parametrize(("ratio", "populations", "reduced"), CASES)
    @pytest.mark.parametrize("ensemble", ENSEMBLES)
    def test_agree_with_their_own_ensemble(self, ratio, populations, reduced, ensemble):
        system = warm_system(ratio, populations, reduced, ensemble)
        snapshots = draw(system, self.SNAPSHOTS, seed=81)
        assert self.package_p_value(snapshots, system) > self.ALPHA
        assert self.independent_p_value(snapshots, system) > self.ALPHA

    def test_the_other_ensemble_is_seen(self):
        """Fixed against fluctuating numbers, both ways, by both tests; and a warmer gas."""
        ratio, populations, reduced = self.CASES[1]
        fixed, free = (warm_system(ratio, populations, reduced, name) for name in ENSEMBLES)
        for system, other in ((fixed, free), (free, fixed)):
            snapshots = draw(system, self.SNAPSHOTS, seed=82)
            assert self.package_p_value(snapshots, other) < self.ALPHA
            assert self.independent_p_value(snapshots, other) < self.ALPHA
            warmer = warm_system(ratio, populations, 1.3 * reduced, system.gas.ensemble)
            assert self.package_p_value(snapshots, warmer) < self.ALPHA

    @pytest.mark.parametrize("ensemble", ENSEMBLES)
    def test_numbers_of_particles(self, ensemble):
        """Of each component and in half the box: means and variances."""
        system = warm_system((1.0, 1.0), (21, 9), 0.5, ensemble)
        snapshots = draw(system, 6000, seed=83)
        component = snapshots.component
        assert np.array_equal(component == NO_COMPONENT, np.isnan(snapshots.position).all(axis=2))
        assert np.all(np.diff((component == NO_COMPONENT).astype(int), axis=1) >= 0)
        for part, state in enumerate(system.occupations):
            numbers = (component == part).sum(axis=1)
            if ensemble == "canonical":
                assert np.all(numbers == state.population)
            else:
                mean = thermal.fermi_occupations(
                    state.orbitals.energies, state.population, state.thermal_energy
                )
                self.check(numbers, state.population, (mean * (1 - mean)).sum())
        inside = ((component == 0) & (snapshots.position[..., 0] < 0.5)).sum(axis=1)
        # 2D, N = 21, T/T_F = 0.5: recomputed independently from the definition
        self.check(inside, 10.5, {"canonical": 2.8958, "grand-canonical": 5.1512}[ensemble])
        other = {"canonical": 5.1512, "grand-canonical": 2.8958}[ensemble]
        assert ttest_1samp((inside - 10.5) ** 2, other).pvalue < self.ALPHA

    def check(self, numbers: NDArray, mean: float, variance: float) -> None:
        """Student's t of a mean and of a variance about the exact mean, ALPHA/2 each."""
        assert ttest_1samp(numbers, mean).pvalue > 0.5 * self.ALPHA
        assert ttest_1samp((numbers - mean) ** 2, variance).pvalue > 0.5 * self.ALPHA

    def test_one_particle_is_uniform_at_any_temperature(self):
        """One particle occupies one plane wave: |e^{ik·r}|² is flat."""
        system = warm_system((1.0, 1.5), (1,), 2.0)
        snapshots = draw(system, 4000, seed=84)
        fine = np.floor(4 * snapshots.position[:, 0]).astype(int) @ np.array([4, 1])
        assert chisquare(np.bincount(fine, minlength=16)).pvalue > self.ALPHA

    def test_no_particle_at_all_is_a_snapshot_too(self):
        """One particle on average: many snapshots hold none, and pairs are those of the rest."""
        system = warm_system((1.0,), (1,), 2.0, "grand-canonical")
        snapshots = draw(system, 4000, seed=85)
        numbers = (snapshots.component == 0).sum(axis=1)
        state = system.occupations[0]
        mean = thermal.fermi_occupations(state.orbitals.energies, 1, state.thermal_energy)
        law = np.ones(1)
        for filled in mean:  # the sum of independent yes–no variables
            law = np.convolve(law, [1 - filled, filled])
        law = np.append(law[:4], law[4:].sum())
        observed = np.bincount(np.minimum(numbers, 4), minlength=5)
        keep = len(numbers) * law > 8
        law, observed = (np.append(x[keep], x[~keep].sum()) for x in (law, observed))
        if law[-1] * len(numbers) < 8:
            law, observed = (np.append(x[:-2], x[-2:].sum()) for x in (law, observed))
        assert observed[0] > 500
        assert chisquare(observed, len(numbers) * law / law.sum()).pvalue > self.ALPHA

    @pytest.mark.parametrize("ensemble", ENSEMBLES)
    def test_three_and_four_snapshots_are_seven(self, ensemble):
        system = warm_system((1.0, 1.0), (9, 5), 0.5, ensemble)
        one, other = make_sampler(system, seed=86), make_sampler(system, seed=86)
        whole = one.draw(7)
        for part, rows in ((other.draw(3), slice(0, 3)), (other.draw(4), slice(3, 7))):
            width = part.component.shape[1]
            assert np.array_equal(part.component, whole.component[rows, :width])
            assert np.all(whole.component[rows, width:] == NO_COMPONENT)
            assert np.array_equal(part.position, whole.position[rows, :width], equal_nan=True)


def counted(
    snapshots: Snapshots, first: int, second: int, sides: NDArray, edges: NDArray
) -> NDArray[np.int64]:
    """Return unordered pairs (snapshot, bin) of two components, by numpy, snapshot by snapshot."""
    counts = []
    for position, component in zip(snapshots.position, snapshots.component, strict=True):
        one, other = position[component == first], position[component == second]
        step = one[:, None] - other[None]
        distance = np.sqrt((((step - np.round(step)) * sides) ** 2).sum(axis=2))
        if first == second:
            distance = distance[np.triu_indices(len(one), k=1)]
        counts.append(np.histogram(distance, bins=edges)[0])
    return np.array(counts)
