"""Gases in a box with twisted boundaries, by brute force: waves, fillings, and twist averages.

ψ(r + L_a) = e^{2πiτ_a} ψ, so the wave vectors are k_a = 2π(m_a + τ_a)/L_a with whole m_a; ħ = m =
1. Averages over all twists have two routes: a dense grid of twists, and, where the populations
follow the twist, a sum over the images of the box in which no wave is listed. With n f(r) =
∫ dᵈk/(2π)ᵈ n(k) e^{ik·r} of the infinite system and R the translations of the box, one twist has

    V⁻¹ Σ_k n(k) e^{ik·r} = n Σ_R f(r + R) e^{−2πiτ·R/L}

(Poisson's sum), and the mean over τ of a product of two such sums keeps equal R only.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import lru_cache
from itertools import combinations_with_replacement, pairwise, product
from math import ceil, pi, prod, sqrt

import numpy as np
from numpy.typing import NDArray
from scipy.special import j0, j1

from tests.oracles import thermal
from tests.oracles.shells import gauss_legendre, shell_rule
from tests.oracles.significance import hotelling_p_value

# e^{−x} below which an orbital is left out: some 1e-15 of a particle.
TAIL = 36.0
# Occupation below which an orbital is left out of pair correlations.
LEAST = 1e-11
CHUNK = 2**21

Amplitude = Callable[[NDArray], NDArray]


# Which waves there are, and how they are filled at one twist


def waves_below(sides: Sequence[float], twist: Sequence[float], energy: float) -> NDArray:
    """Return all m + τ with k²/2 ≤ energy, ascending in energy.

    Returns
    -------
    array (wave, axis)
    """
    spans = []
    for side, shift in zip(sides, twist, strict=True):
        reach = sqrt(2 * energy) * side / (2 * pi) + 1
        spans.append([m + shift for m in range(-ceil(reach + shift), ceil(reach - shift) + 1)])
    waves = np.array(list(product(*spans)), dtype=float)
    energies = thermal.wave_energies(waves, sides)
    order = np.argsort(energies, kind="stable")
    return waves[order[energies[order] <= energy]]


def lowest_waves(sides: Sequence[float], twist: Sequence[float], count: int) -> NDArray:
    """Return the `count` waves of lowest energy, array (wave, axis)."""
    energy = 0.5 * thermal.fermi_wavenumber(len(sides), count / prod(sides)) ** 2
    while len(waves := waves_below(sides, twist, energy)) < count:
        energy *= 1.5
    return waves[:count]


@dataclass(frozen=True)
class Filling:
    """How one component fills the waves of a box at one twist.

    Parameters
    ----------
    sides
        Of the box.
    waves : array (wave, axis)
        m + τ.
    pairs : array (wave, wave)
        ⟨n_k n_k'⟩, with ⟨n_k⟩ on the diagonal.
    """

    sides: tuple[float, ...]
    waves: NDArray
    pairs: NDArray

    @property
    def mean(self) -> NDArray:
        """⟨n_k⟩ of every wave."""
        return np.diag(self.pairs)

    @property
    def population(self) -> float:
        """Mean number of particles at this twist."""
        return float(self.mean.sum())

    @property
    def energy(self) -> float:
        """Total kinetic energy at this twist."""
        return float(self.mean @ thermal.wave_energies(self.waves, self.sides))

    def pair_correlation(self, edges: Sequence[float], population: float) -> NDArray:
        """Return g in bins of the separation, normalised by the density of `population`."""
        kept = self.mean > LEAST
        pairs = self.pairs[np.ix_(kept, kept)]
        g = thermal.pair_correlation_bins(self.waves[kept], pairs, self.sides, edges)
        return np.asarray(g * (self.population / population) ** 2)

    def structure_factor(self, transfer: Sequence[int]) -> float:
        """Return ⟨|ρ(q)|²⟩/⟨N⟩, q_a = 2π·transfer_a/L_a ≠ 0: 1 − Σ_k ⟨n_k n_{k+q}⟩/⟨N⟩."""
        whole = np.rint(self.waves - self.waves[0]).astype(int)
        place = {tuple(wave): i for i, wave in enumerate(whole.tolist())}
        together = 0.0
        for wave, i in place.items():
            moved = tuple(m + q for m, q in zip(wave, transfer, strict=True))
            together += self.pairs[i, place[moved]] if moved in place else 0.0
        return 1.0 - together / self.population


def ground(sides: Sequence[float], twist: Sequence[float], population: int) -> Filling:
    """Return the filling of the N waves of lowest energy, which must be one set."""
    waves = lowest_waves(sides, twist, population + 1)
    energies = thermal.wave_energies(waves, sides)
    if energies[population] - energies[population - 1] < 1e-9 * energies[population]:
        raise ValueError("more than one set of lowest energy")
    return Filling(tuple(sides), waves[:population], np.ones((population, population)))


def ball(sides: Sequence[float], twist: Sequence[float], fermi_wavenumber: float) -> Filling:
    """Return the filling of all waves with |k| ≤ k_F."""
    waves = waves_below(sides, twist, 0.5 * fermi_wavenumber**2)
    return Filling(tuple(sides), waves, np.ones((len(waves), len(waves))))


def canonical(
    sides: Sequence[float], twist: Sequence[float], population: int, thermal_energy: float
) -> Filling:
    """Return the warm filling of fixed population, with integers that lose nothing."""
    top = thermal.wave_energies(lowest_waves(sides, twist, population + 1), sides)[-1]
    waves = waves_below(sides, twist, top + TAIL * thermal_energy)
    energies = thermal.wave_energies(waves, sides)
    _, pairs = thermal.exact_canonical(energies, population, thermal_energy)
    return Filling(tuple(sides), waves, pairs)


def grand_canonical(
    sides: Sequence[float], twist: Sequence[float], population: float, thermal_energy: float
) -> Filling:
    """Return the warm filling of independent waves with this mean population at this twist."""
    top = thermal.wave_energies(lowest_waves(sides, twist, ceil(population) + 1), sides)[-1]
    waves = waves_below(sides, twist, top + TAIL * thermal_energy)
    energies = thermal.wave_energies(waves, sides)
    mean = thermal.fermi_occupations(energies, population, thermal_energy)
    return Filling(tuple(sides), waves, thermal.independent_pairs(mean))


def at_potential(
    sides: Sequence[float], twist: Sequence[float], potential: float, thermal_energy: float
) -> Filling:
    """Return the warm filling of independent waves at this chemical potential."""
    waves = waves_below(sides, twist, max(potential, 0.0) + TAIL * thermal_energy)
    y = (thermal.wave_energies(waves, sides) - potential) / thermal_energy
    return Filling(tuple(sides), waves, thermal.independent_pairs(1.0 / (1.0 + np.exp(y))))


def filled(
    sides: Sequence[float],
    twist: Sequence[float],
    population: int,
    thermal_energy: float,
    law: str,
) -> Filling:
    """Return the filling of one component at one twist, k_B T ≥ 0.

    Parameters
    ----------
    law
        "fixed": the population at every twist; "mean": its mean at every twist, warm only;
        "following": the infinite system's k_F or chemical potential, which give the population on
        average over twists.
    """
    if law == "fixed" and thermal_energy == 0:
        return ground(sides, twist, population)
    if law == "fixed":
        return canonical(sides, twist, population, thermal_energy)
    if law == "mean":
        return grand_canonical(sides, twist, population, thermal_energy)
    dimension, density = len(sides), population / prod(sides)
    if thermal_energy == 0:
        return ball(sides, twist, thermal.fermi_wavenumber(dimension, density))
    potential = infinite_potential(dimension, density, thermal_energy)
    return at_potential(sides, twist, potential, thermal_energy)


@lru_cache
def infinite_potential(dimension: int, density: float, thermal_energy: float) -> float:
    """Return μ of the infinite warm gas."""
    return thermal.InfiniteGas(dimension, density, thermal_energy).chemical_potential


# Averages over all twists, at fixed population: a dense grid


def twist_grid(points: int, dimension: int, offset: float = 0.5) -> NDArray:
    """Return the twists −½ + (i + offset)/points of every axis, array (twist, axis)."""
    line = (np.arange(points) + offset) / points - 0.5
    return np.array(list(product(line, repeat=dimension)))


def energy_excess(dimension: int, population: int, points: int) -> float:
    """Return E/E_infinite − 1 of a square or cube at fixed N, averaged over twists.

    The N lowest energies are added up at the twists of a grid of midpoints in [0, ½)^d, which is
    all there is: a twist −τ_a along an axis is τ_a.
    """
    half = twist_grid(points, dimension) * 0.5 + 0.25
    infinite = 0.5 * thermal.fermi_wavenumber(dimension, population) ** 2
    # the N waves nearest to the origin lie within k_F and the diagonal of a cell
    reach = sqrt(2 * infinite) / (2 * pi) + sqrt(dimension) / 2
    whole = np.array(list(product(range(-ceil(reach) - 1, ceil(reach) + 1), repeat=dimension)))
    nearest = np.maximum(np.abs(whole + 0.25) - 0.25, 0.0)  # of all twists in [0, ½)
    whole = whole[(nearest**2).sum(axis=1) <= reach**2]
    total = 0.0
    for start in range(0, len(half), max(1, CHUNK // len(whole))):
        part = half[start : start + max(1, CHUNK // len(whole))]
        squares = sum(np.add.outer(part[:, axis], whole[:, axis]) ** 2 for axis in range(dimension))
        total += np.partition(squares, population - 1, axis=1)[:, :population].sum()
    energy = total / len(half) * 2 * pi**2
    return float(energy / (population * infinite * dimension / (dimension + 2)) - 1.0)


# Averages over all twists where populations follow the twist: a sum over images


def cold_amplitude(dimension: int, density: float) -> Amplitude:
    """Return f(r) of the Fermi ball: sin z/z, 2J₁(z)/z, 3(sin z − z cos z)/z³, z = k_F r."""
    wavenumber = thermal.fermi_wavenumber(dimension, density)

    def amplitude(r: NDArray) -> NDArray:
        z = np.maximum(wavenumber * np.asarray(r, dtype=float), 1e-9)
        if dimension == 1:
            return np.asarray(np.sin(z) / z)
        if dimension == 2:
            return np.asarray(2 * j1(z) / z)
        return np.where(z < 1e-2, 1 - z * z / 10, 3 * (np.sin(z) - z * np.cos(z)) / z**3)

    return amplitude


def warm_amplitude(dimension: int, density: float, thermal_energy: float) -> Amplitude:
    """Return f(r) of the infinite warm gas by one Gauss–Legendre rule over wave numbers."""
    potential = infinite_potential(dimension, density, thermal_energy)
    largest = sqrt(2 * (max(potential, 0.0) + TAIL * thermal_energy))
    k, weights = gauss_legendre(0.0, largest, 300)
    filled = (
        weights * k ** (dimension - 1) / (1 + np.exp((0.5 * k * k - potential) / thermal_energy))
    )
    filled /= filled.sum()

    wave = {1: np.cos, 2: j0, 3: lambda z: np.sinc(z / pi)}[dimension]

    def amplitude(r: NDArray) -> NDArray:
        radii = np.asarray(r, dtype=float)
        parts = np.array_split(radii.ravel(), 1 + radii.size * len(k) // CHUNK)
        values = np.concatenate([wave(np.multiply.outer(part, k)) @ filled for part in parts])
        return values.reshape(radii.shape)

    return amplitude


def images(sides: Sequence[float], reach: float) -> NDArray:
    """Return the translations R of the box up to a length, array (image, axis); R = 0 is first."""
    spans = [range(-int(reach / side), int(reach / side) + 1) for side in sides]
    vectors = np.array(list(product(*spans)), dtype=float) * np.asarray(sides)
    lengths = np.linalg.norm(vectors, axis=1)
    order = np.argsort(lengths, kind="stable")
    return vectors[order[lengths[order] <= reach]]


def number_correlation(
    sides: Sequence[float], amplitudes: tuple[Amplitude, Amplitude], reach: float
) -> float:
    """Return ⟨N N'⟩/⟨N⟩⟨N'⟩ over twists of two mean numbers N(τ) = Σ_k n̄_k: Σ_R f(R) f'(R)."""
    lengths = np.linalg.norm(images(sides, reach), axis=1)
    first, second = amplitudes
    return float((first(lengths) * second(lengths)).sum())


def image_pair_correlation(
    sides: Sequence[float],
    amplitude: Amplitude,
    edges: Sequence[float],
    reach: float,
    wavenumber: float,
) -> NDArray:
    """Return g of like particles over all twists, in bins: Σ_R [f(R)² − f(|r + R|)²].

    Populations follow the twist, and waves are filled independently or all up to k_F, so that
    ρ⁽²⁾ = V⁻² [N(τ)² − |Σ_k n̄_k e^{ik·r}|²]; normalised by the mean density.

    Parameters
    ----------
    sides, edges
        Box and bins.
    amplitude
        f of the infinite system.
    reach
        Images up to this length count.
    wavenumber
        Largest |k − k'|, to choose the points of a bin by.
    """
    translations = images(sides, reach)
    constant = (amplitude(np.linalg.norm(translations, axis=1)) ** 2).sum()
    means = []
    for inner, outer in pairwise(edges):
        points, volumes = shell_rule(len(sides), inner, outer, wavenumber)
        moved = np.linalg.norm(points[:, None] + translations, axis=2)
        means.append(((constant - (amplitude(moved) ** 2).sum(axis=1)) @ volumes) / volumes.sum())
    return np.array(means)


def following_pair_correlation(
    sides: Sequence[float],
    densities: Sequence[float],
    thermal_energy: float,
    edges: Sequence[float],
) -> NDArray:
    """Return g of components 0-0, 0-1, …, 1-1, … over all twists, in bins (pair, bin).

    All components have the same twist; with as many images as an error of some 1e-4 allows, for
    boxes of a few particles.
    """
    dimension, cold = len(sides), thermal_energy == 0
    amplitudes = [
        cold_amplitude(dimension, density)
        if cold
        else warm_amplitude(dimension, density, thermal_energy)
        for density in densities
    ]
    reach = (12.0 if cold else 2.5) * max(sides)
    wavenumber = (2.0 if cold else 3.0) * thermal.fermi_wavenumber(dimension, max(densities))
    rows = []
    for i, j in combinations_with_replacement(range(len(densities)), 2):
        if i == j:
            rows.append(image_pair_correlation(sides, amplitudes[i], edges, reach, wavenumber))
        else:
            both = number_correlation(sides, (amplitudes[i], amplitudes[j]), 4 * reach)
            rows.append(np.full(len(edges) - 1, both))
    return np.array(rows)


# Snapshots that have a twist, and so an expectation, of their own


def pair_counts(
    position: NDArray, component: NDArray, sides: Sequence[float], edges: Sequence[float]
) -> NDArray[np.int64]:
    """Return unordered pairs of each snapshot, by looking at all pairs of particles.

    Parameters
    ----------
    position : array (snapshot, particle, axis)
        Fractions of the sides; NaN where there is no particle.
    component : array (snapshot, particle)
        Ascending from 0 in every snapshot, then negative where there is no particle.
    sides
        Of the box.
    edges
        Of the bins of the separation.

    Returns
    -------
    array (snapshot, pair · bin) of int64
        Pairs of components in the order 0-0, 0-1, …, 1-1, …
    """
    step = position[:, :, None] - position[:, None]
    distance = np.sqrt((((step - np.round(step)) * np.asarray(sides)) ** 2).sum(axis=3))
    bin_of = np.searchsorted(edges, distance, side="right") - 1  # NaN comes last
    bin_of[:, *np.tril_indices(bin_of.shape[1])] = len(edges)
    columns = []
    for i, j in combinations_with_replacement(range(component.max() + 1), 2):
        both = (component[:, :, None] == i) & (component[:, None] == j)
        columns += [((bin_of == b) & both).sum(axis=(1, 2)) for b in range(len(edges) - 1)]
    return np.stack(columns, axis=1)


def own_mean_p_value(found: NDArray, mean: NDArray) -> float:
    """Return the p-value of "each snapshot has its own mean", arrays (snapshot, feature).

    Differences average to zero for any twists of the right law; differences times how far the mean
    lies from the average mean do so only where each snapshot's own twist gives its mean.
    """
    difference, away = found - mean, mean - mean.mean(axis=0)
    varying = away.std(axis=0) > 1e-9
    features = np.hstack([difference, difference[:, varying] * away[:, varying]])
    return hotelling_p_value(features, np.zeros(features.shape[1]))
