"""Spins rotated before detection: exact values, and snapshots of positions and detected labels.

Statistical checks use fixed seeds; together they raise a false alarm with probability below
FAMILY_ALPHA, each with an equal share.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from fractions import Fraction
from itertools import pairwise, product
from math import pi, radians

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.stats import chisquare

from pairmc.physics.gas import Gas
from pairmc.physics.grids import separation_grid
from pairmc.physics.snapshots import NO_COMPONENT, Snapshots
from pairmc.physics.system import System, build_system
from pairmc.physics.theory.pair_correlation import at_twists, bulk, expected
from tests.oracles import enumeration, spinors, thermal, twists
from tests.oracles.shells import gauss_legendre, shell_rule
from tests.oracles.significance import hotelling_p_value
from tests.physics.gases import BRICK, FLAT, Ratio, draw, make_sampler, shells
from tests.physics.test_chain import run_python

FAMILY_ALPHA = 1e-4
STATISTICAL_CHECKS = 30
ALPHA = FAMILY_ALPHA / STATISTICAL_CHECKS

RING = (1,)
PAIRS = ((0, 0), (0, 1), (1, 1))
TWIST = (Fraction(3, 10), Fraction(-1, 5))
# Ensemble and T/T_F.
COLD, FREE_COLD = ("canonical", 0.0), ("grand-canonical", 0.0)
WARM, FREE = ("canonical", 0.3), ("grand-canonical", 0.3)

# Ratio of the sides, populations, degrees, state and twist: closed shells, nothing of one
# component (also with complex orbitals), open shells, temperatures.
GASES = (
    (FLAT, (9, 5), 60, COLD, None),
    (BRICK, (0, 9), 90, COLD, None),
    (FLAT, (7, 0), 110, COLD, TWIST),
    (RING, (8, 3), 143, COLD, None),
    (FLAT, (6, 3), 60, WARM, None),
    (FLAT, (6, 3), 60, FREE, None),
)


def make(
    ratio: Ratio,
    populations: Sequence[int],
    degrees: float,
    state: tuple[str, float] = COLD,
    twist: Sequence[Fraction] | str | None = None,
) -> System:
    """Return a gas at T/T_F of its majority, its spins rotated."""
    names = ("up", "down")[: len(populations)]
    gas = Gas(len(ratio), names, tuple(populations), 0.83, ensemble=state[0])
    fermi_energy = 0.5 * gas.fermi_wavenumbers[gas.majority] ** 2
    gas = replace(gas, thermal_energy=state[1] * fermi_energy)
    where = twist if twist is None or isinstance(twist, str) else tuple(map(float, twist))
    return build_system(gas, tuple(map(float, ratio)), where, radians(degrees))


def edges_of(system: System) -> NDArray:
    """Return three bins up to half the shortest side."""
    return 0.5 * min(system.sides) * np.array([0.0, 0.3, 0.55, 1.0])


def values(system: System, edges: NDArray) -> NDArray:
    """Return the package's g (pair, separation) between any edges."""
    grid = replace(separation_grid(system, len(edges) - 1), edges=edges)
    return expected(system, grid)["pair_correlation"]


# Exact values of the tests' own


def over_shells(
    function: Callable[[NDArray], NDArray], waves: Sequence[NDArray], system: System
) -> NDArray:
    """Return a function (…, point) of the displacement averaged over three shells."""
    extent = np.ptp(np.concatenate(waves), axis=0) / system.sides
    means = []
    for bounds in pairwise(edges_of(system)):
        points, volumes = shell_rule(len(extent), *bounds, float(np.linalg.norm(2 * pi * extent)))
        means.append(function(points) @ volumes / volumes.sum())
    return np.stack(means, axis=-1)


def by_sets(mixture: spinors.Mixture, system: System) -> NDArray:
    """Return g (pair, bin) from the two-body matrix of every filled set."""

    def correlations(points: NDArray) -> NDArray:
        given = (mixture, system.rotation, points, system.sides)
        return np.array([spinors.pair_correlation(*given, pair) for pair in PAIRS])

    return over_shells(correlations, [one for _, sets in mixture for one in sets], system)


def ground_mixture(
    ratio: Ratio, populations: Sequence[int], twist: Sequence[Fraction] | None = None
) -> spinors.Mixture:
    """Return all pairs of filled sets of lowest energy; a common twist changes no difference."""
    lists = [
        enumeration.occupied_sets(n, ratio, twist and twist[: len(ratio)]) for n in populations
    ]
    pairs = list(product(*lists))
    return [(1 / len(pairs), sets) for sets in pairs]


def warm_mixture(system: System, waves: NDArray) -> spinors.Mixture:
    """Return all pairs of filled sets of some waves, but for those that hardly ever occur."""
    gas, sides, T = system.gas, system.sides, system.gas.thermal_energy
    if gas.ensemble == "canonical":
        mixture = spinors.canonical_mixture(waves, sides, gas.populations, T)
    else:
        energies = spinors.wave_energies(waves, sides)
        filled = [thermal.fermi_occupations(energies, n, T)[0] for n in gas.populations]
        up, down = (energies[0] + T * np.log(mean / (1 - mean)) for mean in filled)
        mixture = spinors.grand_canonical_mixture(waves, sides, (up, down), T)
    return [(weight, sets) for weight, sets in mixture if weight > 1e-12]


def by_moments(
    system: System, twist: Sequence[float], averaged: bool, points: NDArray | None = None
) -> NDArray:
    """Return g (pair, bin or point) from G_st(r) = V² ⟨γ_s(r) γ_t*(r)⟩ and the rotation D.

    ρ_ab = Σ_st D_as² D_bt² G_st(0) − D_as D_bs D_at D_bt G_st(r).
    """
    gas, parts = system.gas, []
    free = "following" if averaged else "mean"
    law = free if gas.ensemble == "grand-canonical" else "fixed"
    for population in gas.populations:
        part = twists.filled(system.sides, twist, population, gas.thermal_energy, law)
        kept = part.mean > twists.LEAST
        parts.append((part.waves[kept], part.pairs[np.ix_(kept, kept)], part.mean[kept]))
    D = spinors.rotation(system.rotation)
    means = D**2 @ gas.populations

    def correlations(points: NDArray) -> NDArray:
        points = np.vstack([np.zeros(points.shape[1]), points])
        phases = [np.exp(2j * pi * (points / system.sides) @ waves.T) for waves, _, _ in parts]
        first, second = (phase @ mean for phase, (_, _, mean) in zip(phases, parts, strict=True))
        like = [
            ((phase @ pairs) * phase.conj()).sum(axis=1).real
            for phase, (_, pairs, _) in zip(phases, parts, strict=True)
        ]
        cross = (first * second.conj()).real
        G, rows = np.array([[like[0], cross], [cross, like[1]]]), []
        for a, b in PAIRS:
            both = D[a] ** 2 @ G[:, :, 0] @ D[b] ** 2
            exchange = np.einsum("s,t,stp->p", D[a] * D[b], D[a] * D[b], G[:, :, 1:])
            rows.append((both - exchange) / (means[a] * means[b]))
        return np.array(rows)

    if points is not None:
        return correlations(points)
    return over_shells(correlations, [waves for waves, _, _ in parts], system)


class TestIdentities:
    @pytest.mark.parametrize("ratio", [RING, FLAT, BRICK])
    @pytest.mark.parametrize("state", [COLD, WARM, FREE])
    def test_polarised_gas(self, ratio, state):
        """Every pair of labels has the hole of the one component there was, at any angle."""
        alone = make(ratio, (9,), 0, state)
        grid = separation_grid(alone, 4)
        for degrees, populations in product((90, 37, 300), ((9, 0), (0, 9))):
            turned = make(ratio, populations, degrees, state)
            for function in (expected, bulk):
                found = function(turned, separation_grid(turned, 4))["pair_correlation"]
                single = function(alone, grid)["pair_correlation"]
                assert found == pytest.approx(np.tile(single, (3, 1)), abs=1e-12)
        assert make(ratio, (9, 0), 90).detected_populations == (4.5, 4.5)

    @pytest.mark.parametrize("state", [COLD, WARM, FREE])
    def test_half_a_turn_exchanges_the_components(self, state):
        system, turned = (make(FLAT, (9, 5), degrees, state) for degrees in (0, 180))
        assert turned.detected_populations == (5, 9)
        edges = edges_of(system)
        assert values(turned, edges) == pytest.approx(values(system, edges)[::-1], abs=1e-12)

    # weights of wave vectors below 1e-9 of the largest are left out of warm sums
    @pytest.mark.parametrize(
        ("state", "n", "close"), [(COLD, 9, 1e-13), (FREE_COLD, 5, 1e-13), (FREE, 6, 5e-9)]
    )
    def test_invariant_states_do_not_feel_a_rotation(self, state, n, close):
        for degrees, function in product((37, 90, 180, 300), (expected, bulk)):
            turned = make(FLAT, (n, n), degrees, state)
            found = function(turned, separation_grid(turned, 8))
            plain = replace(turned, rotation=0.0)
            for name, array in function(plain, separation_grid(plain, 8)).items():
                assert found[name] == pytest.approx(array, abs=close)

    def test_equal_fixed_populations_feel_it_when_warm(self):
        """g_ud − 1 of 21 + 21, 2D, T/T_F = 0.5, 90°: recomputed independently to the digits."""
        system = make((1, 1), (21, 21), 90, ("canonical", 0.5))
        radii = np.arange(1, 5) / system.gas.fermi_wavenumbers[0]
        found = values(system, np.sort([*(radii - 1e-4), *(radii + 1e-4)]))[1, ::2] - 1
        assert [f"{100 * value:.2f}" for value in found] == ["-0.47", "-0.99", "-1.02", "-1.02"]
        angles = 2 * pi * np.arange(48) / 48
        circle = np.stack([np.cos(angles), np.sin(angles)], axis=1)
        points = (radii[:, None, None] * circle).reshape(-1, 2)
        exact = by_moments(system, (0.0, 0.0), False, points)[1].reshape(4, -1).mean(axis=1)
        assert found == pytest.approx(exact - 1, abs=1e-7)


class TestExpectation:
    @pytest.mark.parametrize(
        ("ratio", "populations", "degrees", "twist"),
        [
            (RING, (7, 3), 37, None),
            (RING, (4, 0), 143, None),
            (RING, (2, 6), 300, None),
            (RING, (4, 3), 70, TWIST),
            (FLAT, (3, 11), 37, None),
            (FLAT, (6, 3), 143, None),
            (FLAT, (7, 4), 70, TWIST),
            (FLAT, (5, 0), 70, TWIST),
            (BRICK, (5, 3), 90, None),
            (BRICK, (2, 3), 143, None),
        ],
    )
    def test_cold_gas_by_listing_sets(self, ratio, populations, degrees, twist):
        system = make(ratio, populations, degrees, twist=twist and twist[: len(ratio)])
        exact = by_sets(ground_mixture(ratio, populations, twist), system)
        assert values(system, edges_of(system)) == pytest.approx(exact, abs=1e-9)

    @pytest.mark.parametrize(
        ("ratio", "populations", "degrees", "state", "largest"),
        [
            (RING, (3, 1), 50, ("canonical", 0.4), 4),
            (FLAT, (2, 1), 120, ("canonical", 0.15), 1.7),
            (RING, (2, 1), 120, ("grand-canonical", 0.2), 2),
        ],
    )
    def test_warm_gas_by_listing_sets(self, ratio, populations, degrees, state, largest):
        """Sets with waves beyond the largest have weights below 1e-9."""
        system = make(ratio, populations, degrees, state)
        waves = thermal.box_waves([float(side) for side in ratio], largest)
        exact = by_sets(warm_mixture(system, waves), system)
        assert values(system, edges_of(system)) == pytest.approx(exact, abs=1e-8)

    @pytest.mark.parametrize(("ratio", "populations"), [(RING, (4, 3)), (FLAT, (7, 4))])
    @pytest.mark.parametrize("state", [WARM, FREE])
    def test_warm_gas_by_moments(self, ratio, populations, state):
        for twist in (np.zeros(len(ratio)), np.array([0.3, -0.2])[: len(ratio)]):
            system = make(ratio, populations, 110, state, tuple(twist))
            exact = by_moments(system, twist, False)
            assert values(system, edges_of(system)) == pytest.approx(exact, abs=1e-8)

    @pytest.mark.parametrize(
        ("ratio", "state"),
        [*product([RING, FLAT], [COLD, FREE_COLD, WARM, FREE]), (BRICK, COLD), (BRICK, FREE_COLD)],
    )
    def test_many_twists(self, ratio, state):
        system = make(ratio, (4, 2), 110, state, "averaged")
        some = np.array([[0.31, -0.22, 0.05], [-0.47, 0.13, 0.36], [0.02, 0.44, -0.27]])
        some = some[:, : len(ratio)]
        grid = replace(separation_grid(system, 3), edges=edges_of(system))
        alone = np.array([expected(system.at(one), grid)["pair_correlation"] for one in some])
        # cold values are exact, warm ones interpolated between twists
        close = 1e-5 if state[1] else 1e-12
        assert at_twists(system, grid, some) == pytest.approx(alone, abs=close)
        for twist, found in zip(some[: 3 - len(ratio)], alone, strict=False):
            assert found == pytest.approx(by_moments(system, twist, True), abs=1e-8)

    @pytest.mark.parametrize("ratio", [RING, FLAT, BRICK])
    def test_infinite_system(self, ratio):
        """g_st = 1 − (Σ_c D_sc D_tc n_c f_c)²/(n_s' n_t'), of all labels alike."""
        system = make(ratio, (9, 4), 70)
        grid = separation_grid(system, 5)
        n, D = np.array(system.gas.densities), spinors.rotation(system.rotation)
        amplitudes = [twists.cold_amplitude(len(ratio), density) for density in n]
        exact = np.ones((3, 5))
        for b, bounds in enumerate(pairwise(grid.edges)):
            r, weights = gauss_legendre(*bounds, 20)
            weights = weights * r ** (len(ratio) - 1)
            f = np.array([amplitude(r) for amplitude in amplitudes])
            for row, (s, t) in enumerate(PAIRS):
                hole = ((D[s] * D[t] * n) @ f) ** 2 / ((D[s] ** 2 @ n) * (D[t] ** 2 @ n))
                exact[row, b] -= weights @ hole / weights.sum()
        assert bulk(system, grid)["pair_correlation"] == pytest.approx(exact, abs=1e-9)


# Snapshots


def pairs_and_ideal(snapshots: Snapshots, system: System) -> tuple[NDArray, NDArray, NDArray]:
    """Return edges, pairs (snapshot, pair · bin) by numpy, and pairs (pair, bin) at g = 1."""
    edges = 0.5 * min(system.sides) * np.array([0.0, 0.5, 0.7, 0.85, 0.97])
    counts = twists.pair_counts(snapshots.position, snapshots.component, system.sides, edges)
    assert np.all(counts.sum(axis=0) > 100)
    first, second = spinors.rotation(system.rotation) ** 2 @ system.gas.populations
    weights = [0.5 * first**2, first * second, 0.5 * second**2]
    return edges, counts, np.outer(weights, shells(len(system.sides), edges) / system.gas.volume)


def pairs_p_value(snapshots: Snapshots, truth: System) -> float:
    """Return the p-value of pairs in bins against `expected`."""
    edges, counts, ideal = pairs_and_ideal(snapshots, truth)
    return hotelling_p_value(counts, (ideal * values(truth, edges)).ravel())


def chi_square_p_value(observed: NDArray, law: NDArray) -> float:
    """Return the p-value of numbers in cells; cells that expect fewer than 8 are joined."""
    assert law.sum() == pytest.approx(1, abs=1e-9)
    mean = law / law.sum() * observed.sum()
    if observed[mean < 1e-9].any():  # what cannot be
        return 0.0
    order = np.argsort(mean, kind="stable")
    observed, mean = observed[order], mean[order]
    rare = 1 + max(np.searchsorted(mean.cumsum(), 8.0), np.count_nonzero(mean < 8.0) - 1)
    both = [np.append(cells[:rare].sum(), cells[rare:]) for cells in (observed, mean)]
    return float(chisquare(*both).pvalue)


class TestSnapshots:
    """Whole snapshots as units."""

    @pytest.mark.parametrize("gas", GASES)
    def test_pairs(self, gas):
        system = make(*gas)
        assert pairs_p_value(draw(system, 3000, seed=201), system) > ALPHA

    @pytest.mark.parametrize("state", [COLD, FREE_COLD, WARM, FREE])
    def test_pairs_given_the_twists_drawn(self, state):
        system = make(FLAT, (6, 3), 60, state, "averaged")
        snapshots = draw(system, 3000, seed=202)
        edges, counts, ideal = pairs_and_ideal(snapshots, system)
        grid = replace(separation_grid(system, 4), edges=edges)
        mean = (at_twists(system, grid, snapshots.twist) * ideal).reshape(3000, -1)
        assert twists.own_mean_p_value(counts, mean) > ALPHA
        if state == FREE_COLD:  # Control: the twist of another snapshot.
            assert twists.own_mean_p_value(counts, np.roll(mean, 1, axis=0)) < ALPHA

    FEW = ((RING, (3, 1), 50, ("canonical", 0.4)), (RING, (2, 1), 120, ("grand-canonical", 0.2)))

    @pytest.mark.parametrize(
        ("gas", "largest"),
        [(GASES[0], 0), (GASES[1], 0), (GASES[3], 0), (FEW[0], 4), (FEW[1], 2)],
    )
    def test_numbers_detected(self, gas, largest):
        system = make(*gas)
        waves = thermal.box_waves((1,), largest)
        mixture = warm_mixture(system, waves) if largest else ground_mixture(*gas[:2])
        labels = draw(system, 6000, seed=203).component
        for degrees, right in ((gas[2], True), (0.5 * gas[2], False)):
            law = spinors.mixture_label_law(mixture, radians(degrees))
            cells = (labels == 0).sum(axis=1) * len(law) + (labels == 1).sum(axis=1)
            observed = np.bincount(cells, minlength=law.size)
            assert (chi_square_p_value(observed, law.ravel()) > ALPHA) == right

    def test_singlets_give_one_of_each(self):
        labels = draw(make(FLAT, (9, 9), 60), 20, seed=204).component
        assert np.array_equal(labels, np.tile(np.repeat([0, 1], 9), (20, 1)))

    @pytest.mark.parametrize("gas", [*GASES, (FLAT, (6, 3), 60, FREE, "averaged")])
    def test_three_and_four_snapshots_are_seven(self, gas):
        system = make(*gas)
        one, other = make_sampler(system, seed=214), make_sampler(system, seed=214)
        whole = one.draw(7)
        for part, rows in ((other.draw(3), slice(0, 3)), (other.draw(4), slice(3, 7))):
            width = part.component.shape[1]
            assert np.array_equal(part.component, whole.component[rows, :width])
            assert np.array_equal(part.position, whole.position[rows, :width], equal_nan=True)
        labels = np.where(whole.component == NO_COMPONENT, 2, whole.component)
        assert np.all(np.diff(labels, axis=1) >= 0)
        assert gas[3] == FREE or labels.max() < 2


KERNELS = """
    import json
    from tests.physics.gases import draw
    from tests.physics.test_spin_rotation import GASES, make

    drawn = [draw(make(*GASES[i]), 2, 215) for i in {chosen}]
    print(json.dumps([[one.position.tolist(), one.component.tolist()] for one in drawn]))
"""


@pytest.mark.parametrize(
    ("switch", "chosen"),
    [({"NUMBA_DISABLE_JIT": "1"}, [0, 2, 3]), ({"NUMBA_BOUNDSCHECK": "1", "NUMBA_OPT": "0"}, [3])],
)
def test_kernels_as_plain_python_and_with_bounds_checked(switch, chosen, tmp_path):
    script = KERNELS.format(chosen=chosen)
    found = run_python(script, tmp_path, PAIRMC_CACHE=str(tmp_path), **switch)
    for i, (position, component) in zip(chosen, found, strict=True):
        compiled = draw(make(*GASES[i]), 2, seed=215)
        assert np.array(position) == pytest.approx(compiled.position, abs=1e-12)
        assert np.array_equal(component, compiled.component)
