"""Differences of filled wave vectors: grids, folded and whole, against plain sums."""

from __future__ import annotations

from dataclasses import replace
from itertools import product

import numpy as np
import pytest

from pairmc.physics.gas import Gas
from pairmc.physics.system import System, build_listed, build_system
from pairmc.physics.theory import overlaps as module
from pairmc.physics.theory.overlaps import cross_overlaps, overlaps
from tests.oracles import thermal


def system_of(ratio, populations, reduced=0.0, ensemble="canonical", twist=None) -> System:
    names = ("up", "down")[: len(populations)]
    gas = Gas(len(ratio), names, tuple(populations), 0.83, ensemble=ensemble)
    thermal_energy = reduced * 0.5 * gas.fermi_wavenumbers[gas.majority] ** 2
    return build_system(replace(gas, thermal_energy=thermal_energy), ratio, twist)


SYSTEMS = [
    system_of((1.0,), (5, 3), 0.3),
    system_of((1.0, 1.5), (9, 4)),
    system_of((1.0, 1.5), (9, 4), 0.4),
    system_of((1.0, 1.0), (5, 5), 0.4, "grand-canonical"),
    system_of((1.0, 1.5, 1.75), (7, 4), 0.2),
    system_of((1.0, 1.0, 1.0), (7, 1)),
]


@pytest.fixture
def folding(monkeypatch: pytest.MonkeyPatch) -> None:
    """Fold every grid that can be folded."""
    monkeypatch.setattr(module, "FOLD_ABOVE", 0)


def plain(pairs: np.ndarray, one: np.ndarray, other: np.ndarray, step: tuple[int, ...]) -> float:
    """Return Σ ⟨n_k n_{k+q}⟩ over a table of pair probabilities."""
    difference = other[None] - one[:, None]
    return float(pairs[(difference == np.array(step)).all(axis=2)].sum())


def own_pairs(system: System) -> np.ndarray:
    """Return ⟨n_i n_j⟩ of the first component: of the oracle where it is warm."""
    state = system.occupations[0]
    energies, T = state.orbitals.energies, system.gas.thermal_energy
    if T == 0:
        weights, factors = state.pair_factors()
        return ((weights[:, None] * factors).T @ factors).real
    if state.fixed:
        return thermal.exact_canonical(energies, state.population, T)[1]
    return thermal.independent_pairs(thermal.fermi_occupations(energies, state.population, T))


@pytest.mark.parametrize("system", SYSTEMS, ids=range(len(SYSTEMS)))
@pytest.mark.parametrize("fold", [False, True])
def test_every_difference_is_a_plain_sum(system, fold, request):
    if fold:
        request.getfixturevalue("folding")
    one, other = system.occupations
    found, between = overlaps(one), cross_overlaps(one, other)
    assert (found.folded, between.folded) == (fold, fold)
    pairs = own_pairs(system)
    np.fill_diagonal(pairs, 0.0)
    means = np.outer(one.mean(), other.mean())
    first, second = one.orbitals.numbers, other.orbitals.numbers
    reach = range(-3, 4)
    for step in product(reach, repeat=system.gas.dimension):
        scale = one.population**2
        assert found.at(step)[0] == pytest.approx(
            plain(pairs, first, first, step), abs=1e-11 * scale
        )
        wanted = plain(means, first, second, step)
        assert between.at(step)[0] == pytest.approx(wanted, abs=1e-11 * scale)
    assert found.at_zero[0] == 0.0
    assert between.total[0] == pytest.approx(means.sum(), rel=1e-12)
    # a step far beyond all orbitals
    assert found.at((10_000,) * system.gas.dimension)[0] == 0.0


@pytest.mark.parametrize("system", SYSTEMS, ids=range(len(SYSTEMS)))
def test_folded_and_whole_grids_agree_by_length(system, monkeypatch):
    one, other = system.occupations
    whole = [overlaps(one), cross_overlaps(one, other)]
    monkeypatch.setattr(module, "FOLD_ABOVE", 0)
    folded = [overlaps(one), cross_overlaps(one, other)]
    for left, right in zip(whole, folded, strict=True):
        assert right.folded
        assert not left.folded
        scale = left.total[0]
        assert right.total[0] == pytest.approx(scale, rel=1e-12)
        lengths, sums = left.by_length(system.axes)
        again, others = right.by_length(system.axes)
        # entries next to nothing may be in one list and not in the other
        kept = sums[0] > 1e-7 * scale
        near = np.searchsorted(again, lengths[kept] * (1 - 1e-9))
        assert np.allclose(again[near], lengths[kept], rtol=1e-9)
        assert np.allclose(others[0][near], sums[0][kept], rtol=0, atol=1e-10 * scale)


def test_what_is_not_even_is_not_folded(folding):
    twisted = system_of((1.0, 1.5), (9, 4), 0.4, twist=(0.1, 0.0))
    assert not overlaps(twisted.occupations[0]).folded
    gas = Gas(2, ("up",), (3,), 0.83)
    axes = build_system(gas, (1.0, 1.0)).axes
    # as wide to both sides, but not alike
    listed = build_listed(gas, axes, [[(-1, 0), (0, 0), (1, 1)]])
    assert not overlaps(listed.occupations[0]).folded
    lopsided = build_listed(gas, axes, [[(-1, -1), (0, 0), (1, 1)]])
    assert not overlaps(lopsided.occupations[0]).folded
