"""The exact pair correlation against brute force, outside formulas, and sampled snapshots.

Deterministic but for the sampled running integral, whose limits hold for all radii of all systems
together: fixed seeds, a false alarm with probability FAMILY_ALPHA.
"""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import j1

from pairmc.physics.grids import SeparationGrid, separation_grid
from pairmc.physics.observables import pair_correlation
from pairmc.physics.system import System
from pairmc.physics.theory.overlaps import overlaps
from pairmc.physics.theory.pair_correlation import bulk, expected
from pairmc.statistics import t_quantile
from tests.oracles import enumeration, pair_density, running_integral
from tests.physics.gases import BRICK, FLAT, make_sampler, make_system, shells, with_wrong_orbital

FAMILY_ALPHA = 1e-4

# Ratio and population: closed shells, and last levels that hold 1 and D − 1 of D particles (2 of
# a ring, 4 of uneven sides, 6 and 8 of cubes and squares), and a few between.
CLOSED = [((1,), 9), ((1, 1), 13), (FLAT, 15), (BRICK, 13), ((1, 1, 2), 9), ((1, 1, 1), 19)]
OPEN = [
    ((1,), 2),
    ((1,), 8),
    ((1, 1), 2),
    ((1, 1), 14),
    ((1, 1), 20),
    (FLAT, 6),
    (FLAT, 8),
    (FLAT, 13),
    (BRICK, 2),
    (BRICK, 14),
    (BRICK, 16),
    ((1, 1, 1), 2),
    ((1, 1, 1), 6),
    ((1, 1, 2), 10),
]


def pair_weights(system: System) -> tuple[np.ndarray, np.ndarray]:
    """Return the differences of the first component's orbitals, and how often each occurs."""
    wavenumbers, sums = overlaps(system.occupations[0]).by_length(system.axes)
    return wavenumbers, sums[0]


def like(ratio: tuple, population: int, edges: np.ndarray | None = None) -> tuple:
    """Return system, grid and expected g of one component, next to another of 3 particles."""
    system = make_system(ratio, (3, population))
    grid = separation_grid(system, 11)
    if edges is not None:
        grid = replace(grid, edges=np.asarray(edges))
    return system, grid, expected(system, grid)["pair_correlation"][2]


def bulk_formula(dimension: int, z: float) -> float:
    """Return g of the infinite gas as published (Giuliani & Vignale, Quantum Theory of the
    Electron Liquid, 2005, ch. 1; Mahan, Many-Particle Physics, ch. 5; from memory)."""
    if dimension == 1:
        return 1 - (np.sin(z) / z) ** 2
    if dimension == 2:
        return 1 - (2 * j1(z) / z) ** 2
    return 1 - 9 * ((np.sin(z) - z * np.cos(z)) / z**3) ** 2


class TestFiniteSystem:
    @pytest.mark.parametrize(("ratio", "population"), CLOSED + OPEN)
    def test_bins_against_brute_force(self, ratio, population):
        system, grid, g = like(ratio, population)
        sets = enumeration.occupied_sets(population, ratio)
        brute = pair_density.bin_averages(sets, system.sides, grid.edges)
        assert g == pytest.approx(brute, abs=1e-8)

    @pytest.mark.parametrize(("ratio", "population"), CLOSED + OPEN[2:])
    def test_a_wrong_orbital_is_seen(self, ratio, population):
        system, grid, g = like(ratio, population)
        wrong = expected(with_wrong_orbital(system), grid)["pair_correlation"][2]
        assert np.abs(wrong - g).max() > 1e-3

    @pytest.mark.parametrize(("ratio", "population"), [((1, 1), 14), (FLAT, 6), ((1, 1, 1), 6)])
    def test_mean_occupations_alone_do_not_give_it(self, ratio, population):
        """Control: 1 − |N⁻¹ Σ ⟨n_k⟩ e^{ik·r}|² leaves out that ⟨n_k n_k'⟩ ≠ ⟨n_k⟩⟨n_k'⟩."""
        system, grid, _ = like(ratio, population)
        state = system.occupations[1]
        direction = np.eye(len(ratio))[0] * grid.edges[6]
        angles = 2 * np.pi * state.orbitals.numbers @ (direction / np.array(system.sides))
        wrong = 1 - np.abs(state.mean() @ np.exp(1j * angles)) ** 2 / population**2
        sets = enumeration.occupied_sets(population, ratio)
        right = pair_density.pair_correlation(direction[None], sets, system.sides)[0]
        assert abs(wrong - right) > 1e-4

    def test_one_particle_never_meets_itself(self):
        for ratio in ((1,), FLAT, BRICK):
            _, _, g = like(ratio, 1)
            assert np.all(g == 0.0)

    def test_rows_and_the_hole(self):
        system = make_system(FLAT, (8, 5, 1))
        grid = separation_grid(system, 7)
        values = expected(system, grid)
        g = values["pair_correlation"]
        for row, (_, i, j) in enumerate(grid.pairs):
            if i == j:
                sets = enumeration.occupied_sets((8, 5, 1)[i], FLAT)
                brute = pair_density.bin_averages(sets, system.sides, grid.edges)
                assert g[row] == pytest.approx(brute, abs=1e-8)
            else:
                assert np.all(g[row] == 1.0)
            hole = system.gas.densities[j] * (g[row] - 1)
            assert values["exchange_hole"][row] == pytest.approx(hole)
        assert set(values) == set(pair_correlation.VARIABLES)
        counts = pair_correlation.mean_counts(values, grid)
        assert pair_correlation.values(counts, 1, grid)["pair_correlation"] == pytest.approx(g)

    def test_a_box_full_of_bins_holds_all_pairs(self):
        """On a ring half the circumference is everything: N(N − 1)/2 pairs."""
        for population in (2, 9, 14):
            system = make_system((1,), (population,))
            grid = separation_grid(system, 17)
            counts = pair_correlation.mean_counts(expected(system, grid), grid)
            assert counts.sum() == pytest.approx(population * (population - 1) / 2, rel=1e-12)

    @pytest.mark.parametrize(("ratio", "population"), CLOSED + OPEN)
    def test_same_numbers_at_another_density(self, ratio, population):
        values = []
        for density in (1e-3, 0.83, 4e7):
            system = make_system(ratio, (population,), density)
            values.append(expected(system, separation_grid(system, 9))["pair_correlation"])
        assert values[0] == pytest.approx(values[1], abs=1e-11)
        assert values[2] == pytest.approx(values[1], abs=1e-11)


class TestCurvature:
    """g → (⟨k²⟩ − |P|²/N²) r²/d, P the total wave vector of a filled set."""

    @staticmethod
    def coefficient(ratio: tuple, population: int) -> tuple[float, float]:
        """Return g/r² at contact, and the mean square wave number it should be d times."""
        dimension = len(ratio)
        system = make_system(ratio, (population,))
        radius = 1e-4 / system.gas.fermi_wavenumbers[0]
        grid = replace(separation_grid(system, 1), edges=np.array([0.0, radius]))
        g = expected(system, grid)["pair_correlation"][0, 0]
        sets = enumeration.occupied_sets(population, ratio)
        square = [enumeration.mean_square_wavenumber(waves, system.sides) for waves in sets]
        # r² averaged over a ball of radius R is R² d/(d + 2)
        return g * (dimension + 2) / dimension / radius**2, float(np.mean(square))

    @pytest.mark.parametrize(("ratio", "population"), CLOSED)
    def test_closed_shells(self, ratio, population):
        coefficient, square = self.coefficient(ratio, population)
        assert coefficient == pytest.approx(square / len(ratio), rel=1e-5)

    @pytest.mark.parametrize(("ratio", "population"), OPEN)
    def test_open_shells_move(self, ratio, population):
        coefficient, square = self.coefficient(ratio, population)
        sides = np.array(make_system(ratio, (population,)).sides)
        totals = [
            2 * np.pi * waves.sum(axis=0) / sides
            for waves in enumeration.occupied_sets(population, ratio)
        ]
        motion = np.mean([total @ total for total in totals]) / population**2
        assert motion > 1e-4 * square
        assert coefficient == pytest.approx((square - motion) / len(ratio), rel=1e-5)

    @pytest.mark.parametrize(
        ("dimension", "population", "percent"),
        # Kinetic energy against the infinite gas, recomputed independently to the digits shown;
        # infinite coefficients 1/4 and 1/5 (Giuliani & Vignale, as above).
        [(2, 49, "+0.489"), (3, 33, "-0.502"), (3, 57, "+1.574")],
    )
    def test_kinetic_energy_at_contact(self, dimension, population, percent):
        coefficient, _ = self.coefficient((1,) * dimension, population)
        system = make_system((1,) * dimension, (population,))
        scaled = coefficient / system.gas.fermi_wavenumbers[0] ** 2
        assert f"{100 * (scaled * (dimension + 2) - 1):+.3f}" == percent


class TestInfiniteSystem:
    @pytest.mark.parametrize("dimension", [1, 2, 3])
    def test_bins_against_quadrature_of_the_published_formula(self, dimension):
        system = make_system((1, Fraction(3, 2), 2)[:dimension], (40, 7))
        for bins in (1, 5, 40):
            grid = separation_grid(system, bins)
            values = bulk(system, grid)["pair_correlation"]
            assert np.all(values[1] == 1.0)
            for row, part in ((0, 0), (2, 1)):
                fermi = system.gas.fermi_wavenumbers[part]
                direct = [
                    _quadrature(dimension, fermi, a, b)
                    for a, b in zip(grid.edges[:-1], grid.edges[1:], strict=True)
                ]
                assert values[row] == pytest.approx(direct, abs=1e-10)

    @pytest.mark.parametrize(("dimension", "coefficient"), [(1, 1 / 3), (2, 1 / 4), (3, 1 / 5)])
    def test_contact(self, dimension, coefficient):
        # g → z²/3, z²/4, z²/5 (same textbooks, from memory).
        system = make_system((1,) * dimension, (30,))
        radius = 1e-3 / system.gas.fermi_wavenumbers[0]
        grid = replace(separation_grid(system, 1), edges=np.array([0.0, radius]))
        g = bulk(system, grid)["pair_correlation"][0, 0] * (dimension + 2) / dimension
        assert g / 1e-6 == pytest.approx(coefficient, rel=1e-6)

    def test_a_ring_tends_to_it_as_the_square_of_its_population(self):
        """[sin z/(N sin(z/N))]² = (sin z/z)²(1 + z²/3N² + …): the rate is 1/N²."""
        scaled = np.linspace(0.0, 6.0, 13)
        differences = [self.difference((1,), n, scaled)[1] * n**2 for n in (21, 41, 81, 161)]
        assert differences[0] == pytest.approx(differences[-1], rel=2e-2)
        assert differences[2] == pytest.approx(differences[-1], rel=2e-3)
        # largest where sin² z/3 is, averaged over bins of 1/2
        assert -1 / 3 < differences[-1].min() < -0.3
        assert differences[-1].max() <= 0.0

    @pytest.mark.parametrize(
        ("dimension", "populations", "bounds"),
        [(2, (21, 97, 293), (2e-2, 2.5e-3, 1e-3)), (3, (33, 257, 1419), (6e-3, 3.2e-3, 1e-4))],
    )
    def test_closed_shells_tend_to_it(self, dimension, populations, bounds):
        """Below k_F r = 4; shells are irregular, so the bounds are about twice what was seen."""
        scaled = np.linspace(0.0, 4.0, 17)
        largest = []
        for population, bound in zip(populations, bounds, strict=True):
            closed, difference = self.difference((1,) * dimension, population, scaled)
            assert closed
            largest.append(np.abs(difference).max())
            assert largest[-1] < bound
        assert largest[0] > largest[1] > largest[2]

    @staticmethod
    def difference(ratio: tuple, population: int, scaled: np.ndarray) -> tuple[bool, np.ndarray]:
        """Return whether the shell is closed, and expected less infinite g in bins of k_F r."""
        system = make_system(ratio, (population,))
        grid: SeparationGrid = separation_grid(system, 1)
        edges = scaled / system.gas.fermi_wavenumbers[0]
        assert edges[-1] <= grid.edges[-1]
        grid = replace(grid, edges=edges)
        finite, infinite = (f(system, grid)["pair_correlation"][0] for f in (expected, bulk))
        return system.occupations[0].closed, finite - infinite


def _quadrature(dimension: int, fermi: float, inner: float, outer: float) -> float:
    """Return the published g averaged over a shell."""
    integral = quad(
        lambda r: bulk_formula(dimension, fermi * r) * r ** (dimension - 1) if r > 0 else 0.0,
        inner,
        outer,
        epsabs=1e-13,
        epsrel=1e-12,
        limit=400,
    )[0]
    return integral * dimension / (outer**dimension - inner**dimension)


class TestPairWeights:
    @pytest.mark.parametrize(("ratio", "population"), CLOSED + OPEN)
    def test_add_up_to_all_ordered_pairs(self, ratio, population):
        system = make_system(ratio, (population,))
        wavenumbers, weights = pair_weights(system)
        assert weights.sum() == pytest.approx(population * (population - 1), rel=1e-12)
        assert np.all(np.diff(wavenumbers) > 0.0)
        assert wavenumbers[0] > 0.0
        assert np.all(weights > 0.0)

    @pytest.mark.parametrize(
        ("dimension", "population", "length", "directions", "value"),
        [
            # S(1,0), S(2,0), S(1,0,0), S(2,0,0): recomputed independently from the definition.
            (2, 49, 1, 4, Fraction(9, 49)),
            (2, 49, 2, 4, Fraction(16, 49)),
            (3, 57, 1, 6, Fraction(21, 57)),
            (3, 57, 2, 6, Fraction(34, 57)),
        ],
    )
    def test_structure_factor(self, dimension, population, length, directions, value):
        """S(q) = 1 − #{k, k + q both filled}/N, and `directions` vectors have this length."""
        system = make_system((1,) * dimension, (population,))
        wavenumbers, weights = pair_weights(system)
        steps = wavenumbers * system.sides[0] / (2 * np.pi)
        (weight,) = weights[np.abs(steps - length) < 1e-9]
        assert 1 - weight / population / directions == pytest.approx(float(value), abs=1e-12)

    def test_structure_factor_of_a_ring(self):
        # min(m, N)/N: Diaconis & Evans, Trans. AMS 353, 2615 (2001).
        system = make_system((1,), (11,))
        wavenumbers, weights = pair_weights(system)
        assert wavenumbers * system.sides[0] / (2 * np.pi) == pytest.approx(np.arange(1, 11))
        assert 1 - weights / 22 == pytest.approx(np.arange(1, 11) / 11)

    def test_of_an_open_shell_by_listing(self):
        """Four particles of a square fill three of four waves round the first."""
        system = make_system((1, 1), (4,))
        wavenumbers, weights = pair_weights(system)
        squares = np.rint((wavenumbers * system.sides[0] / (2 * np.pi)) ** 2)
        # ordered pairs: 3 with the first; of the three pairs of the last level one opposite
        found = dict(zip(squares.tolist(), weights.tolist(), strict=True))
        assert found == pytest.approx({1.0: 6.0, 2.0: 4.0, 4.0: 2.0})


# Closed and open shells, with the other component to be ignored.
INTEGRALS = [(FLAT, (15, 4)), (FLAT, (8, 5)), (BRICK, (13, 3)), ((1, 1, 1), (6, 7)), ((1,), (9, 4))]


class TestRunningIntegral:
    @pytest.mark.parametrize(("ratio", "populations"), INTEGRALS)
    def test_of_the_expected_bins(self, ratio, populations):
        system = make_system(ratio, populations)
        grid = separation_grid(system, 21)
        hole = expected(system, grid)["exchange_hole"]
        volumes = shells(len(ratio), grid.edges)
        for row, part in ((0, 0), (2, 1)):
            sets = enumeration.occupied_sets(populations[part], ratio)
            exact = running_integral.hole_charge(sets, system.sides, grid.edges[1:])
            assert np.cumsum(hole[row] * volumes) == pytest.approx(exact, abs=1e-9)

    @pytest.mark.parametrize(("ratio", "populations"), INTEGRALS)
    def test_of_sampled_pairs_at_every_radius(self, ratio, populations):
        """Student's t of 40 batches at every radius that holds 100 pairs of the run or more.

        The limit is for all radii of all systems together.
        """
        system = make_system(ratio, populations)
        grid = separation_grid(system, 16)
        charges = [_batch_charge(system, grid, batch) for batch in range(40)]
        sets = enumeration.occupied_sets(populations[0], ratio)
        exact = running_integral.hole_charge(sets, system.sides, grid.edges[1:])
        limit = t_quantile(1 - FAMILY_ALPHA / (16 * len(INTEGRALS)), 40)
        pairs = 0.5 * populations[0] * (exact + _ball_content(system, grid))
        filled = 40 * 100 * pairs >= 100
        assert filled[4:].all()
        assert np.all(_deviation(charges, exact)[filled] < limit)
        # Controls: one orbital wrong; another normalisation; a bin too far; the other component.
        wrong = sets[0].copy()
        wrong[-1] *= 3
        planted = running_integral.hole_charge([wrong], system.sides, grid.edges[1:])
        n = populations[0]
        rescaled = (exact + _ball_content(system, grid)) * n / (n - 1) - _ball_content(system, grid)
        other = running_integral.hole_charge(
            enumeration.occupied_sets(populations[1], ratio), system.sides, grid.edges[1:]
        )
        for control in (planted, rescaled, np.concatenate([[0.0], exact[:-1]]), other):
            assert np.any(_deviation(charges, control)[filled] > limit)


def _batch_charge(system, grid: SeparationGrid, batch: int) -> np.ndarray:
    """Return n ∫ (g − 1) dV within every edge, from the first component's pairs of one batch."""
    snapshots = make_sampler(system, seed=31, batch=batch).draw(100)
    tallies = pair_correlation.empty(grid)
    pair_correlation.tally(snapshots, grid, tallies)
    pairs = np.cumsum(tallies["count"][0]) / 100
    return 2 * pairs / system.gas.populations[0] - _ball_content(system, grid)


def _ball_content(system, grid: SeparationGrid) -> np.ndarray:
    """Return the mean number of particles of the first component within every edge."""
    return system.gas.densities[0] * np.cumsum(shells(system.gas.dimension, grid.edges))


def _deviation(batches: list, exact: np.ndarray) -> np.ndarray:
    """Return |t|; where nothing varies, 0 if it agrees to rounding and else infinity."""
    values = np.array(batches)
    difference = np.abs(values.mean(axis=0) - exact)
    error = values.std(axis=0, ddof=1) / np.sqrt(len(values))
    certain = error < 1e-12
    unlike = np.where(difference < 1e-9, 0.0, np.inf)
    return np.where(certain, unlike, difference / np.where(certain, 1.0, error))
