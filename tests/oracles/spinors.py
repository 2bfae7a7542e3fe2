"""Spin rotation, singlets and listed states of a two-component gas, by direct evaluation.

A snapshot's state before rotation is |K_up⟩ ⊗ |K_down⟩: two filled sets of plane waves of one
periodic box. A rotation of all spins by θ maps the spinors up → (cos θ/2, sin θ/2) and
down → (−sin θ/2, cos θ/2); the result is one determinant of N spinor orbitals

    φ_j(x, s) = V^(−1/2) e^{ik_j·x} χ_j[s],

and detection yields a position and a label s (0 up, 1 down) for every particle. Everything here
starts from these orbitals. Units: ħ = m = 1, an orbital has the energy k²/2.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from itertools import combinations, product
from math import cos, factorial, sin
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

Sides = Sequence[float]
Reals = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Integers = NDArray[np.int64]
Sets = tuple[Integers, Integers]
Mixture = list[tuple[float, Sets]]

UP, DOWN = 0, 1
MOST_SETS = 200_000
ENERGY_TOLERANCE = 1e-9

# Spin states of two particles: amplitude of (label of the first, label of the second).
TWO_SPINS: dict[str, Reals] = {
    "singlet": np.array([[0.0, 1.0], [-1.0, 0.0]]) / 2**0.5,
    "triplet +1": np.array([[1.0, 0.0], [0.0, 0.0]]),
    "triplet 0": np.array([[0.0, 1.0], [1.0, 0.0]]) / 2**0.5,
    "triplet -1": np.array([[0.0, 0.0], [0.0, 1.0]]),
}


# Orbitals


def rotation(theta: float) -> Reals:
    """Return D[s, σ]: amplitude of label s in the rotated spinor that was σ."""
    return np.array([[cos(theta / 2), -sin(theta / 2)], [sin(theta / 2), cos(theta / 2)]])


def orbital_values(
    sets: Sets, theta: float, positions: Reals, labels: Integers, sides: Sides
) -> Complexes:
    """Return φ_j(x, s) of all rotated orbitals, those of K_up first, shape (…, orbital).

    Parameters
    ----------
    sets
        K_up and K_down: arrays (particle, axis) of integer vectors, k_a = 2π m_a/L_a; may be empty.
    theta
        Angle of the rotation, radians.
    positions, labels : arrays (…, axis), (…)
        Labels are broadcast against the positions.
    sides
        Of the box, length units.
    """
    waves = np.concatenate(sets)
    spins = np.repeat([UP, DOWN], [len(one) for one in sets])
    wavenumbers = 2 * np.pi * waves / sides
    waved = np.exp(1j * (positions @ wavenumbers.T)) / float(np.prod(sides)) ** 0.5
    return np.asarray(waved * rotation(theta)[labels][..., spins], dtype=np.complex128)


def densities(sets: Sets, theta: float, sides: Sides) -> Reals:
    """Return the mean densities Σ_j |φ_j(x, s)|² of both labels; they do not depend on x."""
    origin = np.zeros((2, len(sides)))
    values = orbital_values(sets, theta, origin, np.array([UP, DOWN]), sides)
    return np.asarray((np.abs(values) ** 2).sum(axis=1))


# The whole joint law of positions and labels


def joint_density(
    sets: Sets, theta: float, positions: Reals, labels: Integers, sides: Sides
) -> Reals:
    """Return |det φ_j(x_i, s_i)|²/N!: summed over labels, integrated over the box, it is 1.

    Shapes: positions (…, particle, axis), labels (…, particle).
    """
    values = orbital_values(sets, theta, positions, labels, sides)
    return np.asarray(np.abs(np.linalg.det(values)) ** 2 / factorial(values.shape[-1]))


# Detected numbers


def label_law(sets: Sets, theta: float) -> Reals:
    """Return P(n_up), n_up = 0 … N.

    A wave filled by both components is a singlet and gives exactly one up. A wave filled once is
    detected up on its own, with probability cos²(θ/2) if it was up and sin²(θ/2) if down.
    """
    chances = rotation(theta)[UP] ** 2
    up, down = ({tuple(wave) for wave in one.tolist()} for one in sets)
    law = np.eye(len(up & down) + 1)[-1]
    for chance in [chances[UP]] * len(up - down) + [chances[DOWN]] * len(down - up):
        law = np.convolve(law, [1.0 - chance, chance])
    return np.pad(law, (0, len(up & down)))


def mixture_label_law(mixture: Mixture, theta: float) -> Reals:
    """Return P(n_up, n_down) of a mixture, a square table up to the largest total number."""
    table = np.zeros([1 + max(sum(map(len, sets)) for _, sets in mixture)] * 2)
    for weight, sets in mixture:
        law = label_law(sets, theta)
        ups = np.arange(len(law))
        table[ups, ups[::-1]] += weight * law
    return table


# Pairs


def two_body_matrix(sets: Sets, theta: float, r: Reals, sides: Sides) -> Complexes:
    """Return the spin density matrix of ordered pairs at displacements r, shape (point, 4, 4).

    Wick: ρ_{s t, s' t'} = G(1s, 1s') G(2t, 2t') − G(1s, 2t') G(2t, 1s') with the first particle at
    0, the second at r, and G(xs, x's') = Σ_j φ_j(x, s) φ_j*(x', s'). Row 2s + t, column 2s' + t'.
    """
    both = np.stack([np.zeros_like(r), r], axis=1).repeat(2, axis=1)
    values = orbital_values(sets, theta, both, np.array([UP, DOWN, UP, DOWN]), sides)
    matrix = values @ values.conj().swapaxes(1, 2)
    direct = np.einsum("pac,pbd->pabcd", matrix[:, :2, :2], matrix[:, 2:, 2:])
    exchange = np.einsum("pad,pbc->pabcd", matrix[:, :2, 2:], matrix[:, 2:, :2])
    return np.asarray((direct - exchange).reshape(-1, 4, 4))


def pair_density(
    sets: Sets, theta: float, r: Reals, sides: Sides, detected: tuple[int, int]
) -> Reals:
    """Return ρ⁽²⁾_ss'(r) of ordered pairs: first detected as s at 0, second as s' at r (point,)."""
    row = 2 * detected[0] + detected[1]
    return np.asarray(two_body_matrix(sets, theta, r, sides)[:, row, row].real)


def incoherent_pair_density(
    sets: Sets, theta: float, r: Reals, sides: Sides, detected: tuple[int, int]
) -> Reals:
    """Return ρ⁽²⁾_ss'(r) when each label of the unrotated state is flipped on its own."""
    chances = rotation(theta) ** 2
    total = np.zeros(len(r))
    for s, t in product([UP, DOWN], repeat=2):
        chance = chances[detected[0], s] * chances[detected[1], t]
        total += chance * pair_density(sets, 0.0, r, sides, (s, t))
    return total


def singlet_pair_density(sets: Sets, r: Reals, sides: Sides, theta: float = 0.0) -> Reals:
    """Return ⟨S| ρ |S⟩, S = (up down − down up)/√2: density of ordered pairs in the singlet."""
    singlet = TWO_SPINS["singlet"].ravel()
    return np.asarray((singlet @ two_body_matrix(sets, theta, r, sides) @ singlet).real)


def singlet_fraction(states: Sets | Mixture, r: Reals, sides: Sides, theta: float = 0.0) -> Reals:
    """Return the probability that a pair at displacement r is a spin singlet; nan without pairs.

    Of a mixture: averaged density of singlets over averaged density of all pairs.
    """
    mixture = states if isinstance(states, list) else [(1.0, states)]
    singlets = average(mixture, lambda sets: singlet_pair_density(sets, r, sides, theta))
    pairs = average(
        mixture, lambda sets: np.einsum("pii->p", two_body_matrix(sets, theta, r, sides)).real
    )
    independent = average(mixture, lambda sets: densities(sets, theta, sides)).sum() ** 2
    fraction = np.full(len(r), np.nan)
    np.divide(singlets, pairs, out=fraction, where=pairs > 1e-12 * independent)
    return fraction


# Mixtures


def canonical_mixture(
    orbitals: Integers, sides: Sides, populations: tuple[int, int], thermal_energy: float
) -> Mixture:
    """Return all pairs of filled sets of some waves, populations fixed, weights Π e^{−ε/k_B T}."""
    up, down = (_fillings(orbitals, sides, [n], 0.0, thermal_energy) for n in populations)
    return _pairs(up, down)


def grand_canonical_mixture(
    orbitals: Integers, sides: Sides, potentials: tuple[float, float], thermal_energy: float
) -> Mixture:
    """Return all pairs of filled sets of every size, weights Π e^{(μ_s − ε)/k_B T}."""
    sizes = range(len(orbitals) + 1)
    up, down = (_fillings(orbitals, sides, sizes, mu, thermal_energy) for mu in potentials)
    return _pairs(up, down)


def _fillings(
    orbitals: Integers, sides: Sides, sizes: Sequence[int], mu: float, thermal_energy: float
) -> list[tuple[float, Integers]]:
    """Return all fillings of one component of the given sizes, with probabilities."""
    fillings = [list(f) for n in sizes for f in combinations(range(len(orbitals)), n)]
    energies = wave_energies(orbitals, sides)
    exponents = np.array([(mu - energies[filled]).sum() / thermal_energy for filled in fillings])
    weights = np.exp(exponents - exponents.max())
    weights /= weights.sum()
    return [(float(w), orbitals[filled]) for w, filled in zip(weights, fillings, strict=True)]


def _pairs(up: list[tuple[float, Integers]], down: list[tuple[float, Integers]]) -> Mixture:
    """Return every pair of fillings of two independent components."""
    if len(up) * len(down) > MOST_SETS:
        raise ValueError("too many pairs of sets to list")
    return [(a * b, (first, second)) for a, first in up for b, second in down]


def average(mixture: Mixture, function: Callable[[Sets], Reals]) -> Reals:
    """Return Σ w f(K_up, K_down)."""
    return np.asarray(sum(weight * function(sets) for weight, sets in mixture), dtype=float)


def pair_correlation(
    mixture: Mixture, theta: float, r: Reals, sides: Sides, detected: tuple[int, int]
) -> Reals:
    """Return averaged ρ⁽²⁾_ss'(r) over the product of the averaged densities of both labels."""
    mean = average(mixture, lambda sets: densities(sets, theta, sides))
    pairs = average(mixture, lambda sets: pair_density(sets, theta, r, sides, detected))
    return np.asarray(pairs / mean[list(detected)].prod())


# Two particles in two waves


class TwoParticles(NamedTuple):
    """A singlet or triplet of two particles in the waves a and b, both spins rotated by theta.

    Kinds are the keys of `TWO_SPINS`. A singlet is symmetric in space and may have a = b.
    """

    kind: str
    waves: Integers
    theta: float = 0.0


def two_particle_density(
    pair: TwoParticles, positions: Reals, labels: Integers, sides: Sides
) -> Reals:
    """Return |ψ(x_1 s_1, x_2 s_2)|²; summed over labels, integrated over the box, it is 1."""
    same = bool((pair.waves[0] == pair.waves[1]).all())
    if same and pair.kind != "singlet":
        raise ValueError("two particles in one wave are a singlet")
    wavenumbers = 2 * np.pi * pair.waves / sides
    values = np.exp(1j * (positions @ wavenumbers.T)) / float(np.prod(sides)) ** 0.5
    sign = 1.0 if pair.kind == "singlet" else -1.0
    space = values[..., 0, 0] * values[..., 1, 1] + sign * values[..., 0, 1] * values[..., 1, 0]
    turned = rotation(pair.theta) @ TWO_SPINS[pair.kind] @ rotation(pair.theta).T
    spin = turned[labels[..., 0], labels[..., 1]]
    return np.asarray(np.abs(space * spin) ** 2 / (4.0 if same else 2.0))


def two_particle_pair_density(
    pair: TwoParticles, r: Reals, sides: Sides, detected: tuple[int, int]
) -> Reals:
    """Return ρ⁽²⁾_ss'(r) = 2 V⁻¹ ∫ |ψ(x s, (x + r) s')|² dx, by the trapezoid rule."""
    first = _grid(pair.waves, sides)
    positions = np.stack(np.broadcast_arrays(first, first + r[:, None]), axis=2)
    values = two_particle_density(pair, positions, np.array(detected), sides)
    return np.asarray(2.0 * values.mean(axis=1))


def two_particle_correlation(
    pair: TwoParticles, r: Reals, sides: Sides, detected: tuple[int, int]
) -> Reals:
    """Return ρ⁽²⁾_ss'(r)/(n_s n_s'), n_s = Σ_s' ∫ ρ⁽²⁾_ss' dr; a label never seen is refused."""
    grid, volume = _grid(pair.waves, sides), float(np.prod(sides))
    every = [[two_particle_pair_density(pair, grid, sides, (s, t)) for t in (0, 1)] for s in (0, 1)]
    mean = volume * np.array(every).sum(axis=1).mean(axis=1)[list(detected)]
    if mean.min() * volume < 1e-12:
        raise ValueError("a label that is never detected has no pair correlation")
    return np.asarray(two_particle_pair_density(pair, r, sides, detected) / mean.prod())


def _grid(waves: Integers, sides: Sides) -> Reals:
    """Return points (point, axis) whose mean is exact for products of four of these waves."""
    counts = 2 * np.ptp(waves, axis=0) + 1
    axes = [side * np.arange(n) / n for side, n in zip(sides, counts, strict=True)]
    return np.array(list(product(*axes)))


# Listed occupations


class ListedState(NamedTuple):
    """What a listed occupation is, and how many others of the same populations look like it."""

    energy: float
    wave_vector: Reals
    same_energy: int
    same_energy_and_wave_vector: int


def wave_energies(waves: Integers, sides: Sides) -> Reals:
    """Return k²/2 of each wave."""
    return np.asarray(0.5 * ((2 * np.pi * waves / sides) ** 2).sum(axis=1))


def listed_state(sets: Sets, sides: Sides) -> ListedState:
    """Return energy, wave vector and degeneracies (itself counted) of a pair of filled sets.

    Every pair of sets of the same two populations is compared; energies within `ENERGY_TOLERANCE`
    of each other, as a fraction, are equal. One component alone: pass an empty set as the other.
    """
    waves = np.concatenate(sets)
    energy = float(wave_energies(waves, sides).sum())
    allowed = ENERGY_TOLERANCE * max(energy, 0.5 * (2 * np.pi / max(sides)) ** 2)
    lowest = wave_energies(_waves_below(sides, energy + allowed), sides)
    # the other component has at least the energy of its ground state
    spare = [energy + allowed - lowest[: len(other)].sum() for other in sets[::-1]]
    up, down = (sets_below(len(one), sides, most) for one, most in zip(sets, spare, strict=True))
    same = alike = 0
    for part, vector in zip(*up, strict=True):
        equal = np.abs(part + down[0] - energy) <= allowed
        same += int(equal.sum())
        alike += int((vector + down[1][equal] == waves.sum(axis=0)).all(axis=1).sum())
    wave_vector = 2 * np.pi * waves.sum(axis=0) / sides
    return ListedState(energy, wave_vector, same, alike)


def sets_below(population: int, sides: Sides, most: float) -> tuple[Reals, Integers]:
    """Return energies (set,) and Σm (set, axis) of every set of total energy up to `most`."""
    waves = _waves_below(sides, most)
    running = np.concatenate([[0.0], np.cumsum(wave_energies(waves, sides))])
    energies, vectors = [], []

    def fill(start: int, left: int, energy: float, vector: Integers) -> None:
        if left == 0:
            energies.append(energy)
            vectors.append(vector)
            if len(energies) > MOST_SETS:
                raise ValueError("too many sets to list")
        for i in range(start, len(waves) - left + 1 if left else 0):
            # the cheapest way on is the next `left` waves; later starts cost more
            if energy + running[i + left] - running[i] > most:
                break
            fill(i + 1, left - 1, energy + running[i + 1] - running[i], vector + waves[i])

    fill(0, population, 0.0, np.zeros(len(sides), dtype=np.int64))
    return np.array(energies), np.array(vectors)


def _waves_below(sides: Sides, most: float) -> Integers:
    """Return all waves of energy up to `most`, ascending: |m_a| ≤ L_a √(2 most)/2π.

    No energy is negative, so no other wave is filled in a set of total energy up to `most`.
    """
    reach = [int(side * (2 * most) ** 0.5 / (2 * np.pi)) + 1 for side in sides]
    waves = np.array(list(product(*(range(-n, n + 1) for n in reach))), dtype=np.int64)
    energies = wave_energies(waves, sides)
    order = np.argsort(energies, kind="stable")
    return np.asarray(waves[order[energies[order] <= most]])


# Draws of tiny systems


def draw(
    sets: Sets, theta: float, sides: Sides, snapshots: int, rng: np.random.Generator
) -> tuple[Reals, Integers]:
    """Return independent positions (snapshot, particle, axis) and labels (snapshot, particle).

    Plain rejection: positions uniform, labels s with probability M_s/N, M_s = Σ_j |χ_j[s]|². By
    Hadamard the row of a particle with label s has the square M_s/V, so that |det|² is at most
    Π_i M_{s_i}/V. One proposal in N^N/N! is kept: 4.5 for N = 3, 10.7 for N = 4.
    """
    particles, block = sum(map(len, sets)), 50_000
    rows = densities(sets, theta, sides)
    kept: list[tuple[Reals, Integers]] = []
    while sum(len(labels) for _, labels in kept) < snapshots:
        labels = (rng.random((block, particles)) * rows.sum() >= rows[UP]).astype(np.int64)
        positions = rng.random((block, particles, len(sides))) * sides
        values = orbital_values(sets, theta, positions, labels, sides)
        ratio = np.abs(np.linalg.det(values)) ** 2 / rows[labels].prod(axis=1)
        if ratio.max() > 1.0 + 1e-9:
            raise AssertionError("the bound does not hold")
        accepted = rng.random(block) < ratio
        kept.append((positions[accepted], labels[accepted]))
    positions, labels = (np.concatenate(parts)[:snapshots] for parts in zip(*kept, strict=True))
    return positions, labels


def draw_incoherent(
    sets: Sets, theta: float, sides: Sides, snapshots: int, rng: np.random.Generator
) -> tuple[Reals, Integers]:
    """Return draws of the unrotated state, every label then flipped on its own by sin²(θ/2)."""
    positions, labels = draw(sets, 0.0, sides, snapshots, rng)
    return positions, labels ^ (rng.random(labels.shape) < sin(theta / 2) ** 2)
