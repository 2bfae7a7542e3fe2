"""Warm gases by brute force: every occupied set, exact integers, plain integrals over wave numbers.

ħ = m = 1: an orbital of wave number k has the energy k²/2, and temperatures are thermal energies
k_B T. Canonical: N particles, a set K of orbitals has the weight Π_{k∈K} x_k, x = e^{−ε/k_B T}.
Grand canonical: every orbital is filled on its own with n̄ = 1/(e^{(ε−μ)/k_B T} + 1).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from decimal import Decimal, localcontext
from fractions import Fraction
from itertools import combinations, pairwise, product
from math import comb, cos, exp, fsum, log, pi, sin, sqrt

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import quad
from scipy.optimize import brentq
from scipy.special import j0

from tests.oracles.shells import shell_rule

MOST_SETS = 100_000
DIGITS = 60


# All sets of orbitals, listed


def canonical_sets(
    energies: Sequence[float], population: int, thermal_energy: float
) -> tuple[NDArray[np.int64], NDArray]:
    """Return all C(M, N) sets of orbitals and the probability of each.

    Parameters
    ----------
    energies
        Of the M orbitals, in any order.
    population
        Particles N.
    thermal_energy
        k_B T > 0.

    Returns
    -------
    sets : array (set, particle) of int64
        Indices of the filled orbitals, ascending.
    probabilities : array (set,)
    """
    if comb(len(energies), population) > MOST_SETS:
        raise ValueError("too many to list")
    sets = list(combinations(range(len(energies)), population))
    totals = [fsum(energies[i] for i in filled) for filled in sets]
    lowest = min(totals)
    weights = [exp(-(total - lowest) / thermal_energy) for total in totals]
    indices = np.array(sets, dtype=np.int64).reshape(len(sets), population)
    return indices, np.array(weights) / fsum(weights)


def grand_canonical_sets(
    energies: Sequence[float], mean_population: float, thermal_energy: float
) -> tuple[list[tuple[int, ...]], NDArray]:
    """Return all 2^M sets of orbitals and the probability of each, as products of n̄ or 1 − n̄.

    Parameters
    ----------
    energies
        Of the M orbitals, in any order.
    mean_population
        Σ n̄, which settles μ.
    thermal_energy
        k_B T > 0.
    """
    if 2 ** len(energies) > MOST_SETS:
        raise ValueError("too many to list")
    mean = fermi_occupations(energies, mean_population, thermal_energy)
    sets, probabilities = [], []
    for flags in product([False, True], repeat=len(energies)):
        sets.append(tuple(i for i, flag in enumerate(flags) if flag))
        probabilities.append(float(np.prod(np.where(flags, mean, 1.0 - mean))))
    return sets, np.array(probabilities)


def restricted(
    sets: Sequence[tuple[int, ...]], probabilities: NDArray, population: int
) -> tuple[NDArray[np.int64], NDArray]:
    """Return the sets of one population among all, and their conditional probabilities."""
    chosen = [i for i, filled in enumerate(sets) if len(filled) == population]
    indices = np.array([sets[i] for i in chosen], dtype=np.int64).reshape(len(chosen), population)
    return indices, probabilities[chosen] / probabilities[chosen].sum()


def averages(
    sets: Sequence[Sequence[int]] | NDArray[np.int64], probabilities: NDArray, orbitals: int
) -> tuple[NDArray, NDArray]:
    """Return ⟨n_i⟩ and ⟨n_i n_j⟩ over listed sets; the diagonal of the latter is ⟨n_i⟩."""
    filled = np.zeros((len(sets), orbitals))
    for row, members in zip(filled, sets, strict=True):
        row[list(members)] = 1.0
    return probabilities @ filled, (filled * probabilities[:, None]).T @ filled


def fermi_occupations(
    energies: Sequence[float], mean_population: float, thermal_energy: float
) -> NDArray:
    """Return n̄ = ½(1 − tanh((ε − μ)/2k_B T)) of every orbital, μ by halving an interval."""
    scaled = np.asarray(energies, dtype=float) / thermal_energy
    lower, upper = scaled.min() - 800.0, scaled.max() + 800.0
    for _ in range(200):
        middle = 0.5 * (lower + upper)
        if (0.5 * (1.0 - np.tanh(0.5 * (scaled - middle)))).sum() < mean_population:
            lower = middle
        else:
            upper = middle
    # e^{−y}/(1 + e^{−y}) keeps the digits of a small occupation
    y = scaled - 0.5 * (lower + upper)
    small = np.exp(-np.abs(y))
    return np.where(y > 0, small, 1.0) / (1.0 + small)


# Fixed population: exact integers, and a method not to use


def exact_canonical(
    energies: Sequence[float], population: int, thermal_energy: float
) -> tuple[NDArray, NDArray]:
    """Return ⟨n_i⟩ and ⟨n_i n_j⟩ at fixed population from polynomials with integer coefficients.

    With integers X_i = x_i 2^B, rounded once to 60 digits of the smallest, Z_n 2^{Bn} is the
    coefficient of zⁿ in Π(1 + X_i z). One or two orbitals are left out by exact division, q_n =
    e_n − X q_{n−1}: integers lose nothing in a difference. ⟨n_i n_j⟩ = X_i X_j q^{ij}_{N−2}/e_N.

    Parameters
    ----------
    energies
        Of all orbitals; equal numbers are one level.
    population
        Particles N.
    thermal_energy
        k_B T > 0.

    Returns
    -------
    mean : array (orbital,)
    pairs : array (orbital, orbital)
        The diagonal is ⟨n_i⟩.
    """
    distinct, level = np.unique(np.asarray(energies, dtype=float), return_inverse=True)
    degeneracies = np.bincount(level)
    weights = _integer_weights(distinct, thermal_energy)
    whole = [1] + [0] * population
    for weight, degeneracy in zip(weights, degeneracies, strict=True):
        for _ in range(degeneracy):
            for n in range(population, 0, -1):
                whole[n] += weight * whole[n - 1]
    mean = np.zeros(len(distinct))
    pairs = np.zeros((len(distinct), len(distinct)))
    for a, first in enumerate(weights):
        without = _without(whole, first)
        mean[a] = _ratio(first * without[population - 1], whole[population])
        if population < 2:
            continue
        for b in range(a, len(weights)):
            if a == b and degeneracies[a] == 1:
                continue
            second = weights[b]
            both = first * second * _without(without, second)[population - 2]
            pairs[a, b] = pairs[b, a] = _ratio(both, whole[population])
    together = pairs[np.ix_(level, level)]
    np.fill_diagonal(together, mean[level])
    return mean[level], together


def _integer_weights(energies: NDArray, thermal_energy: float) -> list[int]:
    """Return e^{−(ε − ε_0)/k_B T} of ascending energies in units so small that all are integers."""
    with localcontext() as context:
        context.prec = DIGITS
        lowest, temperature = Decimal(float(energies[0])), Decimal(float(thermal_energy))
        factors = [
            Fraction(((lowest - Decimal(float(energy))) / temperature).exp()) for energy in energies
        ]
    unit = 10**DIGITS * int(1 / factors[-1] + 1)
    return [int(factor * unit) for factor in factors]


def _without(coefficients: Sequence[int], weight: int) -> list[int]:
    """Divide a polynomial by 1 + weight · z."""
    quotient: list[int] = []
    for coefficient in coefficients:
        quotient.append(coefficient - weight * (quotient[-1] if quotient else 0))
    return quotient


def _ratio(numerator: int, denominator: int) -> float:
    return numerator / denominator


def alternating_canonical(
    energies: Sequence[float], population: int, thermal_energy: float
) -> NDArray:
    """Return ⟨n_i⟩ by the recursion with alternating signs, which fails in a cold gas.

    Z_N = N⁻¹ Σ_{k=1}^N (−1)^{k+1} z_k Z_{N−k}, z_k = Σ_i x_i^k, and ⟨n_i⟩ = Z_N⁻¹ Σ_k (−1)^{k+1}
    x_i^k Z_{N−k} (Borrmann & Franke, J. Chem. Phys. 98, 2484, 1993). A negative example.
    """
    x = np.exp((min(energies) - np.asarray(energies, dtype=float)) / thermal_energy)
    powers = x[:, None] ** np.arange(1, population + 1)
    signs = (-1.0) ** np.arange(population)
    sums = [1.0]
    for n in range(1, population + 1):
        terms = signs[:n] * powers[:, :n].sum(axis=0) * np.array(sums[::-1])
        sums.append(float(terms.sum() / n))
    earlier = np.array(sums[population - 1 :: -1])
    return np.asarray((powers * signs * earlier).sum(axis=1) / sums[population])


# What follows from occupations on a torus


def box_waves(ratio: Sequence[float], largest: int) -> NDArray[np.int64]:
    """Return all integer vectors m inside the ellipsoid Σ (m_a/ratio_a)² ≤ largest²."""
    spans = [range(-int(largest * side), int(largest * side) + 1) for side in ratio]
    vectors = np.array(list(product(*spans)), dtype=np.int64)
    return vectors[((vectors / np.asarray(ratio)) ** 2).sum(axis=1) <= largest**2 + 1e-9]


def wave_energies(waves: NDArray[np.int64], sides: Sequence[float]) -> NDArray:
    """Return k²/2 with k_a = 2πm_a/L_a; in a square or cube equal energies are equal numbers."""
    ratio = sides[0] / np.asarray(sides, dtype=float)
    return ((waves * ratio) ** 2).sum(axis=1) * (2 * pi**2 / sides[0] ** 2)


def box_window_variance(
    waves: NDArray[np.int64], pairs: NDArray, fractions: Sequence[float]
) -> float:
    """Return the variance of the number of particles in a box-shaped window of the torus.

    The number is Σ M_kk' c†_k c_k' over all orbitals, M_kk' = ∫_W φ_k* φ_k'. Filled ones suffice in
    a mixture of occupied sets, since Σ_k' |M_kk'|² = M_kk:

        ⟨n²⟩ = Σ_k M_kk ⟨n_k⟩ + Σ_{k≠k'} (M_kk M_k'k' − |M_kk'|²) ⟨n_k n_k'⟩.

    Parameters
    ----------
    waves : array (orbital, axis) of int64
    pairs : array (orbital, orbital)
        ⟨n_k n_k'⟩ with ⟨n_k⟩ on the diagonal.
    fractions
        Extent of the window along each axis, as a fraction of the side.
    """
    mean = np.diag(pairs)
    share = float(np.prod(fractions))
    overlap = np.ones(pairs.shape)
    for axis, fraction in enumerate(fractions):
        steps = np.subtract.outer(waves[:, axis], waves[:, axis])
        overlap *= fraction * np.sinc(steps * fraction)  # |M| of one axis: sin(πmf)/(πm)
    together = (share**2 - overlap**2) * pairs
    np.fill_diagonal(together, 0.0)
    expected = share * mean.sum()
    return float(expected + together.sum() - expected**2)


def independent_pairs(mean: NDArray) -> NDArray:
    """Return ⟨n_i n_j⟩ = n̄_i n̄_j with n̄_i on the diagonal."""
    pairs = np.outer(mean, mean)
    np.fill_diagonal(pairs, mean)
    return pairs


def pair_correlation(
    displacements: NDArray, waves: NDArray[np.int64], pairs: NDArray, sides: Sequence[float]
) -> NDArray:
    """Return g(r) = ⟨N⟩⁻² Σ_{k≠k'} ⟨n_k n_k'⟩ [1 − cos((k − k')·r)] at displacement vectors.

    Parameters
    ----------
    displacements : array (point, axis)
        Length units.
    waves, pairs
        As in `box_window_variance`.
    sides
        Sides of the box, length units.
    """
    off = pairs - np.diag(np.diag(pairs))
    population = np.trace(pairs)
    phases = 2 * pi * (np.asarray(displacements) / np.asarray(sides, dtype=float)) @ waves.T
    real, imaginary = np.cos(phases), np.sin(phases)
    cosines = ((real @ off) * real + (imaginary @ off) * imaginary).sum(axis=1)
    return (off.sum() - cosines) / population**2


def pair_correlation_bins(
    waves: NDArray[np.int64], pairs: NDArray, sides: Sequence[float], edges: Sequence[float]
) -> NDArray:
    """Return `pair_correlation` averaged over the volume of each separation bin."""
    sides = np.asarray(sides, dtype=float)
    wavenumber = float(np.linalg.norm(2 * pi * np.ptp(waves, axis=0) / sides))
    means = []
    for inner, outer in pairwise(edges):
        points, volumes = shell_rule(len(sides), inner, outer, wavenumber)
        values = pair_correlation(points, waves, pairs, sides)
        means.append(values @ volumes / volumes.sum())
    return np.array(means)


# The infinite gas, one component: plain integrals of the Fermi function


def fermi_wavenumber(dimension: int, density: float) -> float:
    """Return π n, √(4π n) or (6π² n)^(1/3)."""
    return {
        1: pi * density,
        2: sqrt(4 * pi * density),
        3: (6 * pi**2 * density) ** (1 / 3),
    }[dimension]


class InfiniteGas:
    """Averages over the occupation 1/(e^{(k²/2 − μ)/k_B T} + 1) of wave vectors.

    Parameters
    ----------
    dimension
        1, 2 or 3.
    density
        Of the component.
    thermal_energy
        k_B T > 0.
    """

    def __init__(self, dimension: int, density: float, thermal_energy: float) -> None:
        self.dimension, self.density, self.thermal_energy = dimension, density, thermal_energy
        self.fermi_wavenumber = fermi_wavenumber(dimension, density)
        self.fermi_energy = 0.5 * self.fermi_wavenumber**2
        self.chemical_potential = self._solve()

    def _solve(self) -> float:
        """Return μ, the root of the density."""
        thermal_length = sqrt(2 * pi / self.thermal_energy)
        lower = self.thermal_energy * log(self.density * thermal_length**self.dimension)
        lower = min(lower, self.fermi_energy) - self.thermal_energy
        upper = self.fermi_energy + 3 * self.thermal_energy

        def excess(potential: float) -> float:
            return self._integral(lambda k: 1.0, potential) / self.density - 1.0

        return float(brentq(excess, lower, upper, xtol=1e-14 * self.fermi_energy, rtol=1e-14))

    def _occupation(self, k: float, potential: float) -> float:
        y = (0.5 * k * k - potential) / self.thermal_energy
        return exp(-y) / (1.0 + exp(-y)) if y > 0 else 1.0 / (1.0 + exp(y))

    def _integral(
        self, function: Callable[[float], float], potential: float, wavelengths: float = 0.0
    ) -> float:
        """Return ∫ dᵈk/(2π)ᵈ n_F(k) · function(k), split where the occupation changes.

        Parts of 3 k_B T from −36 to 39 k_B T round μ, one below; each is split again for an
        integrand that oscillates.
        """
        T, d = self.thermal_energy, self.dimension
        shell = {1: 1 / pi, 2: 1 / (2 * pi), 3: 1 / (2 * pi**2)}[d]
        bounds = [potential + 3 * i * T for i in range(-12, 14)]
        if potential < 0:
            bounds = [3 * i * T for i in range(1, 14)]
        edges = [0.0, *(sqrt(2 * bound) for bound in bounds if bound > 0)]
        total = []
        for lower, upper in pairwise(edges):
            parts = 1 + int((upper - lower) * wavelengths / (2 * pi))
            for left, right in pairwise(np.linspace(lower, upper, parts + 1)):
                value, _ = quad(
                    lambda k: k ** (d - 1) * self._occupation(k, potential) * function(k),
                    left,
                    right,
                    epsabs=1e-14 * self.density / shell,
                    epsrel=1e-10,
                )
                total.append(value)
        return shell * fsum(total)

    def mean(self, function: Callable[[float], float], wavelengths: float = 0.0) -> float:
        """Return the average of a function of k over the particles."""
        return self._integral(function, self.chemical_potential, wavelengths) / self.density

    def energy(self) -> float:
        """Return E/N = ⟨k²⟩/2."""
        return self.mean(lambda k: 0.5 * k * k)

    def long_wavelength_structure_factor(self) -> float:
        """Return S(q → 0) = Σ n̄(1 − n̄)/Σ n̄: independent orbitals, each varying on its own."""
        return self.mean(lambda k: 1.0 - self._occupation(k, self.chemical_potential))

    def amplitude(self, r: float) -> float:
        """Return f(r), the average of e^{ik·r}: cos kr (1D), J₀(kr) (2D), sin kr/kr (3D)."""
        wave = {
            1: lambda k: cos(k * r),
            2: lambda k: float(j0(k * r)),
            3: lambda k: sin(k * r) / (k * r) if k * r > 0 else 1.0,
        }[self.dimension]
        return self.mean(wave, r)

    def pair_correlation(self, r: float) -> float:
        """Return g = 1 − f²."""
        return 1.0 - self.amplitude(r) ** 2


def plane_closed_forms(reduced_temperature: float) -> tuple[float, float]:
    """Return μ/E_F = t ln(e^{1/t} − 1) and S(0) = t(1 − e^{−1/t}) of two dimensions, t = T/T_F."""
    t = reduced_temperature
    return 1.0 + t * log(1.0 - exp(-1.0 / t)), t * (1.0 - exp(-1.0 / t))


def fugacity_amplitude(dimension: int, density: float, thermal_energy: float, r: float) -> float:
    """Return f(r) from the expansion in powers of the fugacity z = e^{μ/k_B T}, for z < 0.9.

    n λᵈ f(r) = Σ_j (−1)^{j+1} z^j j^{−d/2} e^{−πr²/(jλ²)}, λ² = 2π/k_B T, and z from f(0) = 1.
    """
    squared = 2 * pi / thermal_energy
    target = density * squared ** (dimension / 2)

    def series(z: float, separation: float) -> float:
        return fsum(
            -((-z) ** j) * j ** (-dimension / 2) * exp(-pi * separation**2 / (j * squared))
            for j in range(1, 400)
        )

    if series(0.9, 0.0) < target:
        raise ValueError("too cold for the series")
    fugacity = brentq(lambda z: series(z, 0.0) - target, 0.0, 0.9, xtol=1e-15, rtol=1e-14)
    return series(fugacity, r) / target
