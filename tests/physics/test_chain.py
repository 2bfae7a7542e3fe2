"""The chain rule's kernels against plain linear algebra, compiled and as plain Python.

Nothing here is random but the inputs, which have fixed seeds; all agreement is to rounding.
"""

from __future__ import annotations

import json
import os
import subprocess
import sys
import textwrap
from itertools import product
from pathlib import Path

import numpy as np
import pytest
from scipy.stats import ttest_1samp

from pairmc.physics.axes.tables import fill_plane_waves
from pairmc.physics.sampling import acceptance, chain, complement, features, matrices
from tests.oracles import enumeration, ring
from tests.physics.gases import BRICK, FLAT, draw, make_sampler, make_system, positions_of

# Filled sets: closed (real features) and open (complex ones), with and without k = 0, one axis
# that no wave runs along, and quantum numbers far apart.
REAL = [
    enumeration.occupied_sets(7, (1,))[0],
    enumeration.occupied_sets(15, FLAT)[0],
    enumeration.occupied_sets(13, BRICK)[0],
    np.array([[2, -3], [-2, 3], [0, 41], [0, -41]]),
    np.array([[0, 0, 0]]),
    np.array([[0, 0, 5], [0, 0, -5], [0, 0, 0]]),
]
COMPLEX = [
    enumeration.occupied_sets(6, (1,))[1],
    enumeration.occupied_sets(8, FLAT)[2],
    enumeration.occupied_sets(12, BRICK)[0],
    np.array([[3, -2, 0], [0, 0, 0]]),
    np.array([[-17], [40], [2]]),
    np.array([[4, 1]]),
]
KINDS = [np.float64, np.complex128]
FORMS = list(product(KINDS, [False, True]))


def feature_block(waves: np.ndarray, points: np.ndarray) -> np.ndarray:
    """Return the feature vectors (orbital, point) of points (axis, point)."""
    filled = features.plane_waves(waves)
    block = np.full((len(waves), points.shape[1]), np.nan, dtype=filled.like.dtype)
    features.fill_features(filled, points, block)
    return block


def plane_wave_sum(waves: np.ndarray, points: np.ndarray) -> np.ndarray:
    """Return N⁻¹ Σ_k e^{ik·(x − y)} for every two points."""
    difference = points[:, :, None] - points[:, None, :]
    return np.exp(2j * np.pi * np.einsum("ka,axy->kxy", waves, difference)).mean(axis=0)


def random_matrix(rng: np.random.Generator, shape: tuple, kind: type) -> np.ndarray:
    """Return normal entries, real or complex."""
    matrix = rng.standard_normal(shape)
    return matrix + 1j * rng.standard_normal(shape) if kind is np.complex128 else matrix


def orthonormal_rows(rng: np.random.Generator, count: int, size: int, kind: type) -> np.ndarray:
    """Return random orthonormal rows, contiguous."""
    square, _ = np.linalg.qr(random_matrix(rng, (size, size), kind))
    return np.ascontiguousarray(square[:count])


class TestFeatures:
    @pytest.mark.parametrize("waves", REAL + COMPLEX)
    def test_reproduce_the_plain_sum_over_plane_waves(self, waves):
        points = np.random.default_rng(1).random((waves.shape[1], 40))
        points[:, 0] = 0.0
        points[:, 1] = np.nextafter(1.0, 0.0)
        block = feature_block(waves, points)
        assert np.linalg.norm(block, axis=0) == pytest.approx(np.ones(40), abs=1e-13)
        # about one rounding a step of the recurrence
        assert block.T @ block.conj() == pytest.approx(plane_wave_sum(waves, points), abs=2e-13)

    @pytest.mark.parametrize("waves", REAL + COMPLEX)
    def test_another_orbital_is_seen(self, waves):
        points = np.random.default_rng(2).random((waves.shape[1], 40))
        wrong = waves.copy()
        wrong[-1] += 1
        block = feature_block(wrong, points)
        assert np.abs(block.T @ block.conj() - plane_wave_sum(waves, points)).max() > 1e-2

    def test_real_where_the_filled_set_is_symmetric_and_only_there(self):
        assert all(features.plane_waves(waves).like.dtype == np.float64 for waves in REAL)
        assert all(features.plane_waves(waves).like.dtype == np.complex128 for waves in COMPLEX)

    def test_plane_waves_of_one_axis(self):
        coordinates = np.random.default_rng(3).random(9)
        for largest in (0, 1, 30):
            tables = np.full((2, 2 * largest + 1, 9), np.nan)
            fill_plane_waves(coordinates, largest, *tables)
            plain = np.full((2, 2 * largest + 1, 9), np.nan)
            fill_plane_waves.py_func(coordinates, largest, *plain)
            exact = np.exp(2j * np.pi * np.outer(np.arange(-largest, largest + 1), coordinates))
            assert tables[0] + 1j * tables[1] == pytest.approx(exact, abs=1e-13)
            assert plain == pytest.approx(tables, abs=1e-14)


def accept_plainly(vectors: np.ndarray, thresholds: np.ndarray, most: int) -> list[int]:
    """Return which candidates pass: the squared distance to the span of those accepted before."""
    chosen: list[int] = []
    for j, vector in enumerate(vectors):
        if len(chosen) == most:
            break
        span = vectors[chosen].T
        nearest = span @ np.linalg.lstsq(span, vector, rcond=None)[0] if chosen else 0.0
        if np.linalg.norm(vector - nearest) ** 2 > thresholds[j]:
            chosen.append(j)
    return chosen


def accept(gram: np.ndarray, thresholds: np.ndarray, most: int, plain: bool = False):
    """Return which candidates the kernel accepts, and its factor."""
    size = len(gram)
    factor = np.zeros((size + 1, size + 1), dtype=gram.dtype)
    chosen = np.full(size, -1, dtype=np.int64)
    kernel = acceptance.accept_in_order.py_func if plain else acceptance.accept_in_order
    accepted = kernel(np.ascontiguousarray(gram), thresholds, most, factor, chosen)
    return list(chosen[:accepted]), factor[:accepted, :accepted]


class TestAcceptInOrder:
    @pytest.mark.parametrize(("kind", "plain"), FORMS)
    def test_equals_projection_on_those_accepted_before(self, kind, plain):
        rng = np.random.default_rng(4)
        sizes = set()
        for _ in range(30):
            vectors = random_matrix(rng, (14, 9), kind)
            vectors /= np.linalg.norm(vectors, axis=1, keepdims=True)
            thresholds = rng.random(14)
            most = int(rng.integers(1, 10))
            chosen, factor = accept(vectors @ vectors.conj().T, thresholds, most, plain)
            assert chosen == accept_plainly(vectors, thresholds, most)
            lower = np.linalg.cholesky(vectors[chosen] @ vectors[chosen].conj().T)
            assert np.tril(factor) == pytest.approx(lower, abs=1e-12)
            sizes.add(len(chosen))
        assert len(sizes) > 3

    def test_the_residual_falls_only_for_those_that_follow(self):
        """Control: deciding each candidate alone accepts more."""
        rng = np.random.default_rng(5)
        vectors = random_matrix(rng, (30, 6), np.float64)
        vectors /= np.linalg.norm(vectors, axis=1, keepdims=True)
        thresholds = rng.random(30)
        assert len(accept(vectors @ vectors.T, thresholds, 30)[0]) <= 6
        assert np.count_nonzero(thresholds < 1.0) == 30

    @pytest.mark.parametrize(("kind", "plain"), FORMS)
    def test_a_point_proposed_twice_is_refused(self, kind, plain):
        rng = np.random.default_rng(6)
        for _ in range(50):
            vectors = random_matrix(rng, (3, 5), kind)[[0, 0, 1, 0, 1, 2]]
            chosen, factor = accept(vectors @ vectors.conj().T, np.zeros(6), 6, plain)
            assert chosen == [0, 2, 5]
            assert np.all(np.isfinite(factor))

    @pytest.mark.parametrize(("kind", "plain"), FORMS)
    def test_residuals_that_rounding_makes_negative_are_refused(self, kind, plain):
        excess = 1.0 + 4e-16
        indefinite = np.array([[1.0, excess, 0.2], [excess, 1.0, 0.2], [0.2, 0.2, 1.0]], dtype=kind)
        assert np.linalg.eigvalsh(indefinite)[0] < 0.0
        chosen, factor = accept(indefinite, np.zeros(3), 3, plain)
        assert chosen == [0, 2]
        assert np.all(np.isfinite(factor))
        assert accept(np.diag([-1e-16, 0.5, -0.3]).astype(kind), np.zeros(3), 3, plain)[0] == [1]

    def test_floor_of_the_residual(self):
        near = np.diag([0.5 * acceptance.RESIDUAL_FLOOR, 2 * acceptance.RESIDUAL_FLOOR])
        assert accept(near, np.zeros(2), 2)[0] == [1]


class TestLinearAlgebra:
    """The small kernels, compiled and as plain Python, against numpy."""

    @pytest.mark.parametrize("kind", KINDS)
    def test_leaf_kernels(self, kind):
        rng = np.random.default_rng(7)
        rows = random_matrix(rng, (5, 11), kind)
        named = np.array([7, 0, 3])
        norms = np.empty(11)
        for form in (lambda kernel: kernel, lambda kernel: kernel.py_func):
            form(matrices.column_norms)(rows, norms)
            assert norms == pytest.approx((np.abs(rows) ** 2).sum(axis=0))
            assert np.array_equal(form(matrices.gather_columns)(rows, named), rows[:, named].T)
            few = np.array([4, 1])
            assert np.array_equal(form(matrices.gather_rows)(rows, few), rows[few])
            assert np.array_equal(form(matrices.conjugated)(rows), rows.conj())
            less = rows.copy()
            form(matrices.subtract)(less, 0.25 * rows)
            assert less == pytest.approx(0.75 * rows)
            assert form(matrices.gram_matrix)(rows) == pytest.approx(rows @ rows.conj().T)
            factor = np.linalg.cholesky(rows @ rows.conj().T)
            junk = factor + 9.0 * np.triu(np.ones((5, 5)), k=1)  # above the diagonal: not read
            inverse = form(matrices.invert_lower)(junk, 4)
            assert inverse @ factor[:4, :4] == pytest.approx(np.eye(4), abs=1e-12)

    def test_points_above_their_thresholds(self):
        residuals, thresholds = np.array([0.3, 0.1, 0.9, 0.5]), np.array([0.2, 0.2, 0.9, 0.1])
        for kernel in (acceptance.passing_points, acceptance.passing_points.py_func):
            assert list(kernel(residuals, thresholds)) == [0, 3]

    def test_block_size(self):
        for population in (1, 5, 48, 60, 515, 5000):
            size = chain.block_size(population)
            assert size == chain.block_size.py_func(population)
            assert 8 <= size <= 512

    @pytest.mark.parametrize("kind", KINDS)
    def test_extending_the_basis(self, kind):
        rng = np.random.default_rng(8)
        basis = np.zeros((6, 9), dtype=kind)
        basis[:4] = orthonormal_rows(rng, 4, 9, kind)
        vectors = random_matrix(rng, (2, 9), kind)
        held = np.ascontiguousarray((basis[:4] @ vectors.T).T)
        residual = vectors @ vectors.conj().T - held @ held.conj().T
        inverse = np.ascontiguousarray(np.linalg.inv(np.linalg.cholesky(residual)))
        chain.extend_basis(basis, 4, vectors, held, inverse)
        assert basis @ basis.conj().T == pytest.approx(np.eye(6), abs=1e-13)
        # the rows are conjugated, so that `basis @ features` are coefficients
        restored = (basis.conj().T @ (basis @ vectors.T)).T
        assert restored == pytest.approx(vectors, abs=1e-13)

    @pytest.mark.parametrize("population", [101, 301])
    def test_block_after_block_stays_orthonormal(self, population):
        """Up to two thirds of a ring's particles, seven at a time.

        The smallest residual of such a point is some 1/population, so that each block loses about
        a digit; the errors add over the blocks.
        """
        rng = np.random.default_rng([23, population])
        angles = rng.permutation(ring.ring_angles(population, 1, rng)[0])
        (waves,) = enumeration.occupied_sets(population, (1,))
        features = feature_block(waves, angles[None, :] / (2 * np.pi)).T
        basis = np.zeros((population, population))
        for placed in range(0, int(chain.SWITCH * population), 7):
            vectors = np.ascontiguousarray(features[placed : placed + 7])
            held = np.ascontiguousarray((basis[:placed] @ vectors.T).T)
            gram = matrices.gram_matrix(vectors) - matrices.gram_matrix(held)
            inverse = matrices.invert_lower(np.linalg.cholesky(gram), 7)
            chain.extend_basis(basis, placed, vectors, held, inverse)
        rows = basis[: placed + 7]
        assert rows @ rows.T == pytest.approx(np.eye(placed + 7), abs=1e-11)


def check_complement(basis: np.ndarray, accuracy: float) -> None:
    """Check that the complement is orthonormal and orthogonal to the basis."""
    placed, size = basis.shape
    for kernel in (complement.complement_of, complement.complement_of.py_func):
        remaining = kernel(basis)
        assert remaining.shape == (size - placed, size)
        identity = remaining @ remaining.conj().T
        assert identity == pytest.approx(np.eye(size - placed), abs=accuracy)
        assert np.abs(remaining @ basis.conj().T).max() < accuracy


class TestComplement:
    @pytest.mark.parametrize(("kind", "placed"), list(product(KINDS, [1, 10, 26, 39])))
    def test_orthonormal_and_orthogonal(self, kind, placed):
        rng = np.random.default_rng([9, placed])
        for _ in range(5):
            check_complement(orthonormal_rows(rng, placed, 40, kind), 1e-9)

    @pytest.mark.parametrize("population", [21, 101, 301])
    def test_of_a_ring_that_is_two_thirds_full(self, population):
        """Features of particles on a ring, from eigenvalues of a random unitary matrix.

        The points of a snapshot are exchangeable, so any 65 % of them are what a draw has placed
        when it turns to the complement. An error here is an error of every later residual.
        """
        rng = np.random.default_rng([21, population])
        placed = int(np.ceil(chain.SWITCH * population))
        for _ in range(3):
            angles = rng.permutation(ring.ring_angles(population, 1, rng)[0])[:placed]
            waves = enumeration.occupied_sets(population, (1,))[0]
            vectors = feature_block(waves, angles[None, :] / (2 * np.pi))
            basis = np.ascontiguousarray(np.linalg.qr(vectors)[0].T)
            check_complement(basis, 1e-9)

    @pytest.mark.parametrize("kind", KINDS)
    def test_unit_vectors_that_are_spanned_already(self, kind):
        """Most unit vectors tried lie in the basis, so that others must be found."""
        basis = np.ascontiguousarray(np.eye(20, dtype=kind)[5:])
        check_complement(basis, 1e-14)
        # all but one of those tried
        basis = np.ascontiguousarray(np.eye(20, dtype=kind)[[*range(4), *range(9, 20)]])
        check_complement(basis, 1e-14)

    @pytest.mark.parametrize("kind", KINDS)
    @pytest.mark.parametrize("tilt", [1e-2, 1e-4, 4e-5, 2e-5, 1e-6, 1e-9])
    def test_unit_vectors_that_are_nearly_spanned(self, kind, tilt):
        """Most unit vectors tried stand out of the basis by about `tilt` only."""
        rng = np.random.default_rng(10)
        generator = tilt * random_matrix(rng, (20, 20), kind)
        rotation = np.linalg.qr(np.eye(20) + generator - generator.conj().T)[0]
        basis = np.ascontiguousarray((np.eye(20) @ rotation)[5:])
        check_complement(basis, complement.COMPLEMENT_ERROR)

    def test_a_complement_that_is_not_orthonormal_is_noticed(self):
        rng = np.random.default_rng(12)
        rows = orthonormal_rows(rng, 40, 40, np.float64)
        basis, remaining = rows[:26].copy(), rows[26:].copy()
        assert complement.orthonormality_error(basis, remaining) < 1e-13
        remaining[3] += 1e-6 * remaining[5]
        assert 1e-7 < complement.orthonormality_error(basis, remaining) < 1e-5
        remaining[3] = rows[29] + 1e-6 * rows[2]
        assert 1e-7 < complement.orthonormality_error(basis, remaining) < 1e-5

    @pytest.mark.parametrize("kind", KINDS)
    @pytest.mark.parametrize(("left", "accepted"), [(12, 1), (12, 5), (12, 12), (7, 3), (1, 1)])
    def test_reflections_take_out_the_accepted_span_and_no_more(self, kind, left, accepted):
        rng = np.random.default_rng([11, left, accepted])
        for kernel in (complement.reflect, complement.reflect.py_func):
            remaining = orthonormal_rows(rng, 12, 30, kind)
            before = remaining[:left].copy()
            vectors = random_matrix(rng, (accepted, left), kind)
            vectors[0, 0] *= 1e-9 if accepted > 1 else 1.0
            points = before.conj().T @ vectors.T  # their feature vectors, as far as held
            kernel(remaining, left, vectors.copy())
            after = remaining[: left - accepted]
            identity = after @ after.conj().T
            assert identity == pytest.approx(np.eye(left - accepted), abs=1e-13)
            assert np.abs(after @ points).max(initial=0.0) < 1e-12
            span = np.linalg.qr(points)[0]
            kept = before.conj().T @ before - span @ span.conj().T
            assert after.conj().T @ after == pytest.approx(kept, abs=1e-12)

    def test_a_head_of_exactly_zero(self):
        remaining = np.eye(4)
        vectors = np.array([[0.0, 0.6, 0.8, 0.0]])
        complement.reflect(remaining, 4, vectors.copy())
        assert np.abs(remaining[:3] @ vectors[0]).max() < 1e-15
        assert remaining[:3] @ remaining[:3].T == pytest.approx(np.eye(3), abs=1e-15)

    def test_many_reflections_stay_orthonormal(self):
        """One point at a time from 200 down to 1: the error of each step adds, none grows."""
        rng = np.random.default_rng(12)
        remaining = orthonormal_rows(rng, 200, 260, np.float64)
        for left in range(200, 1, -1):
            complement.reflect(remaining, left, rng.standard_normal((1, left)))
        assert np.linalg.norm(remaining[0]) == pytest.approx(1.0, abs=1e-13)


class TestWholeSnapshots:
    @pytest.mark.parametrize("population", [514, 515])
    def test_the_last_points_of_a_large_snapshot(self, population):
        """Every point stands out of the span of those before: the determinant is finite.

        The squared diagonal of the triangular factor of the plane waves, in the order drawn, is
        the residual that each point was accepted with.
        """
        system = make_system((1, 1, 1), (population,))
        position = draw(system, 1, seed=13).position[0]
        assert np.all((position >= 0.0) & (position < 1.0))
        assert len(np.unique(position, axis=0)) == population
        filled = _filled_waves(system, seed=13)
        waves = np.exp(2j * np.pi * filled @ position.T) / np.sqrt(population)
        sign, logarithm = np.linalg.slogdet(waves)
        assert np.isfinite(logarithm)
        assert abs(sign) == pytest.approx(1.0)
        residuals = np.abs(np.diag(np.linalg.qr(waves)[1])) ** 2
        assert np.all(residuals > acceptance.RESIDUAL_FLOOR)
        assert residuals.max() <= 1.0 + 1e-12
        assert np.log(residuals).sum() == pytest.approx(2 * logarithm, rel=1e-9)
        # Control: independent uniform points come closer to a vanishing determinant.
        uniform = np.random.default_rng(14).random((population, 3))
        other = np.linalg.slogdet(np.exp(2j * np.pi * filled @ uniform.T) / np.sqrt(population))
        assert other[1] < logarithm - 50.0

    def test_three_and_four_snapshots_are_seven(self):
        """Three components, closed and open shells, uneven sides."""
        system = make_system(FLAT, (9, 7, 1))
        assert [state.closed for state in system.occupations] == [True, False, True]
        whole = draw(system, 7, seed=15)
        sampler = make_sampler(system, seed=15)
        parts = [sampler.draw(count) for count in (3, 0, 4)]
        assert np.array_equal(np.concatenate([part.position for part in parts]), whole.position)
        assert np.array_equal(np.concatenate([part.component for part in parts]), whole.component)
        assert len(np.unique(whole.position[..., 0])) == 7 * 17
        for other in (make_sampler(system, seed=16), make_sampler(system, seed=15, batch=1)):
            assert not np.isin(other.draw(7).position, whole.position).any()

    def test_particles_are_ordered_by_component(self):
        system = make_system(FLAT, (3, 5, 2))
        snapshots = draw(system, 4, seed=17)
        assert snapshots.position.shape == (4, 10, 2)
        assert np.array_equal(snapshots.component, np.tile([0] * 3 + [1] * 5 + [2] * 2, (4, 1)))
        assert snapshots.component.dtype == np.int8
        shapes = [positions_of(snapshots, part, system.sides).shape[1] for part in range(3)]
        assert shapes == [3, 5, 2]


def _filled_waves(system, seed: int) -> np.ndarray:
    """Return the orbitals that the first snapshot fills."""
    state = system.occupations[0]
    if state.closed:
        return state.orbitals.numbers
    sampler = make_sampler(system, seed)
    return state.orbitals.numbers[state.draw(sampler._occupation[0], 1)[0]]


SMALL = [((1,), 5), ((1,), 6), (FLAT, 5), (FLAT, 6), (BRICK, 5), (BRICK, 6)]

PLAIN = """
    import json
    import numpy as np
    from pairmc.compiled import kernel
    from pairmc.physics.sampling import chain, features
    from tests.physics.gases import draw, make_system
    from tests.physics.test_chain import SMALL

    assert not hasattr(chain.draw_positions, "py_func")

    class Scripted:
        \"\"\"Says every proposal twice, each time to be accepted if it can be.\"\"\"

        def __init__(self):
            self.rng = np.random.default_rng(18)
            self.script = []

        def random(self):
            if not self.script:
                self.script = [self.rng.random(), 0.0] * 2
                self.script[2] = self.script[0]
            return self.script.pop(0)

    twice = np.empty((13, 1))
    waves = features.plane_waves(np.arange(-6, 7)[:, None])
    chain.draw_positions(Scripted(), waves, twice)
    print(json.dumps({
        "drawn": [draw(make_system(*case), 3, 19).position.tolist()
                  for case in [(ratio, (population,)) for ratio, population in SMALL]],
        "twice": twice[:, 0].tolist(),
    }))
"""

BOUNDS = """
    import json
    import numpy as np
    from pairmc.compiled import kernel
    from pairmc.physics.grids import separation_grid
    from pairmc.physics.observables import pair_correlation
    from tests.physics.gases import FLAT, draw, make_system

    @kernel
    def too_far(values):
        return values[values.size]

    try:
        too_far(np.zeros(3))
    except IndexError:
        pass
    else:
        raise SystemExit("bounds are not checked")

    drawn = []
    for populations in ((9,), (7,)):
        system = make_system(FLAT, populations)
        snapshots = draw(system, 20, 20)
        grid = separation_grid(system, 12)
        tallies = pair_correlation.empty(grid)
        pair_correlation.tally(snapshots, grid, tallies)
        drawn.append([snapshots.position.tolist(), tallies["count"].tolist()])
    print(json.dumps(drawn))
"""


LARGE_RING = """
    import json
    from pairmc.running.batch import limit_blas_threads
    from tests.physics.gases import draw, make_system

    limit_blas_threads()
    print(json.dumps(draw(make_system((1,), (501,)), 60, 5).position[..., 0].tolist()))
"""


def run_python(script: str, folder: Path, timeout: int = 300, **environment: str):
    """Run a script in a process of its own and return what it prints as JSON."""
    root = str(Path(__file__).resolve().parents[2])
    file = folder / "script.py"
    file.write_text(textwrap.dedent(script))
    result = subprocess.run(
        [sys.executable, str(file)],
        capture_output=True,
        text=True,
        cwd=root,
        env={**os.environ, "PYTHONPATH": root, **environment},
        timeout=timeout,
        check=False,
    )
    assert result.returncode == 0, result.stderr
    return json.loads(result.stdout)


def test_plain_python_makes_the_same_decisions(tmp_path):
    """Whole draws without compilation; and a point proposed twice is placed once."""
    plain = run_python(PLAIN, tmp_path, NUMBA_DISABLE_JIT="1", PAIRMC_CACHE=str(tmp_path))
    for (ratio, population), position in zip(SMALL, plain["drawn"], strict=True):
        compiled = draw(make_system(ratio, (population,)), 3, seed=19).position
        assert np.array(position) == pytest.approx(compiled, abs=1e-12)
    assert len(set(plain["twice"])) == 13
    assert np.all(np.isfinite(plain["twice"]))


def test_no_kernel_reaches_out_of_bounds(tmp_path):
    """Real and complex features and the tally, every index checked; and the same snapshots."""
    checked = run_python(
        BOUNDS, tmp_path, NUMBA_BOUNDSCHECK="1", NUMBA_OPT="0", PAIRMC_CACHE=str(tmp_path)
    )
    for population, (position, count) in zip((9, 7), checked, strict=True):
        compiled = draw(make_system(FLAT, (population,)), 20, seed=20).position
        assert np.array(position) == pytest.approx(compiled, abs=1e-12)
        assert 0 < np.sum(count) <= 20 * population * (population - 1) / 2


def test_a_large_ring(tmp_path):
    """501 particles in a row: the span that remains is hardest to keep apart here.

    In a process of its own, since a draw that goes wrong may never end (60 snapshots take seconds).
    Mean square spacing over snapshots, Student's t, one check, a false alarm in 10⁴; the infinite
    value 0.1799938776918 is Bornemann, Markov Process. Relat. Fields 16, 803 (2010), tables 7–8,
    and N = 501 differs by less than 1e-6 (the difference at N = 51, 8e-5, falls as 1/N²).
    """
    angles = 2 * np.pi * np.array(run_python(LARGE_RING, tmp_path, timeout=60))
    squares = (ring.spacings(angles) ** 2).mean(axis=1) - 1.0
    assert ttest_1samp(squares, 0.1799938776918).pvalue > 1e-4
    # Controls: one particle in fifty moved to a place of its own; the value of another law.
    planted = angles.copy()
    planted[:, ::50] = 2 * np.pi * np.random.default_rng(22).random(planted[:, ::50].shape)
    squares = (ring.spacings(planted) ** 2).mean(axis=1) - 1.0
    assert ttest_1samp(squares, 0.1799938776918).pvalue < 1e-4
