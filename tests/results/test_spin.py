"""Runs with rotated spins: whole laws of what is drawn, coherence, results and their growth.

Statistical checks use fixed seeds; together they raise a false alarm with probability below
FAMILY_ALPHA, each with an equal share.
"""

from __future__ import annotations

from collections.abc import Callable
from itertools import product
from math import comb, radians
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from numpy.typing import NDArray
from scipy.stats import ttest_1samp

import pairmc
from pairmc.physics.grids import separation_grid
from pairmc.physics.snapshots import Snapshots
from pairmc.physics.theory.pair_correlation import expected
from pairmc.physics.theory.pair_densities import at_one_twist, detected
from pairmc.results.load import load
from pairmc.results.sample import sample_into
from pairmc.runfile.read import read_run_text
from pairmc.runfile.run import RunFile
from tests.conftest import same_data
from tests.oracles import spinors, thermal
from tests.oracles.shells import gauss_legendre
from tests.oracles.significance import hotelling_p_value
from tests.physics.test_spin_rotation import (
    PAIRS,
    TWIST,
    chi_square_p_value,
    ground_mixture,
    pairs_and_ideal,
    pairs_p_value,
    warm_mixture,
)

Variant = Callable[..., RunFile]

FAMILY_ALPHA = 1e-4
STATISTICAL_CHECKS = 40
ALPHA = FAMILY_ALPHA / STATISTICAL_CHECKS

DRAWN = """
[gas]
dimension = {dimension}
particles = {{ {particles} }}
{gas}

[spin]
rotation = {rotation}

[confinement]
sides = {sides}
{box}
"""


def run_of(
    particles: str, rotation: str = '"70 deg"', sides: str = "[1]", gas: str = "", box: str = ""
) -> RunFile:
    """Return a run of which snapshots are only drawn."""
    text = DRAWN.format(
        dimension=sides.count(",") + 1,
        particles=particles,
        gas=gas,
        rotation=rotation,
        sides=sides,
        box=box,
    )
    return read_run_text(text)


def drawn(run: RunFile, count: int, seed: int) -> Snapshots:
    """Return snapshots of a run, positions as fractions of the sides."""
    data = pairmc.draw_snapshots(run, count, seed)
    return Snapshots(data["position"].values / data["side"].values, data["component"].values)


def cells_of(positions: NDArray, labels: NDArray, count: int) -> NDArray:
    """Return the cell of a ring's particles, in order of label: ups, and bins of x_i − x_1.

    Shapes: positions (snapshot, particle), fractions of the ring; labels alike.
    """
    order = np.argsort(labels, axis=1, kind="stable")
    ordered = np.take_along_axis(positions, order, axis=1)
    places = np.floor((ordered[:, 1:] - ordered[:, :1]) % 1.0 * count).astype(int) % count
    shape = (labels.shape[1] + 1, *(count,) * places.shape[1])
    return np.ravel_multi_index(((labels == 0).sum(axis=1), *places.T), shape)


def cell_law(mixture: spinors.Mixture, theta: float, count: int) -> NDArray:
    """Return the probability of each cell, the joint density integrated over it."""
    N = sum(map(len, mixture[0][1]))
    nodes, weights = gauss_legendre(0.0, 1.0 / count, 8)
    line = (np.arange(count)[:, None] / count + nodes).ravel()
    points = np.array(list(product([0.0], *[line] * (N - 1))))
    volumes = np.prod(list(product(*[np.tile(weights, count)] * (N - 1))), axis=1)
    law = np.zeros((N + 1) * count ** (N - 1))
    for ups in range(N + 1):
        labels = np.tile(np.repeat([0, 1], [ups, N - ups]), (len(points), 1))
        given = (theta, points[..., None], labels, (1.0,))
        density = spinors.average(mixture, lambda sets, g=given: spinors.joint_density(sets, *g))
        share = comb(N, ups) * density * volumes
        law += np.bincount(cells_of(points, labels, count), share, len(law))
    return law


@pytest.mark.parametrize(
    ("populations", "gas", "box", "count"),
    [
        ((3, 1), "", "", 3),
        ((2, 1), "", "twist = [0.3]", 6),
        ((1, 2), "", "", 6),
        ((0, 3), "", "", 6),
        ((2, 1), 'temperature = "0.3 T_F"', "", 6),
    ],
)
def test_whole_law_of_a_few_particles(populations, gas, box, count):
    """Labels and all places on a ring in cells; real, complex and varying orbitals."""
    run = run_of("up = {}, down = {}".format(*populations), gas=gas, box=box)
    theta = radians(70)
    mixture = ground_mixture((1,), populations, TWIST[:1] if box else None)
    if gas:
        mixture = warm_mixture(run.system(), thermal.box_waves((1,), 3))
    law = cell_law(mixture, theta, count)

    def p_value(positions: NDArray, labels: NDArray) -> float:
        cells = cells_of(positions[..., 0], labels, count)
        return chi_square_p_value(np.bincount(cells, minlength=len(law)), law)

    snapshots = drawn(run, 20_000, seed=301)
    assert p_value(snapshots.position, snapshots.component) > ALPHA
    if len(mixture) > 1:
        return
    # Controls: plain rejection at this angle and at half of it, and labels flipped at random.
    rng, sets = np.random.default_rng(302), mixture[0][1]
    assert p_value(*spinors.draw(sets, theta, (1.0,), 20_000, rng)) > ALPHA
    assert p_value(*spinors.draw(sets, 0.5 * theta, (1.0,), 20_000, rng)) < ALPHA
    incoherent = p_value(*spinors.draw_incoherent(sets, theta, (1.0,), 20_000, rng))
    # of a polarised gas these are the rotation
    assert (incoherent > ALPHA) == (0 in populations)


class TestCoherence:
    """Rotated spins against labels that are flipped at random, and against independent gases."""

    SIDES = "[1, 1.5]"

    @staticmethod
    def flipped(snapshots: Snapshots, seed: int) -> Snapshots:
        """Return each label flipped with probability ½, as by a rotation of 90°."""
        flips = np.random.default_rng(seed).random(snapshots.component.shape) < 0.5
        labels = snapshots.component ^ flips
        order = np.argsort(labels, axis=1, kind="stable")
        position = np.take_along_axis(snapshots.position, order[:, :, None], axis=1)
        return Snapshots(position, np.take_along_axis(labels, order, axis=1))

    def test_two_components(self):
        """9 + 5 at 90°; planted: flips, half the angle, a cross term of the wrong sign."""
        particles = "up = 9, down = 5"
        run, plain, half = (
            run_of(particles, rotation, self.SIDES) for rotation in ('"90 deg"', "0", '"45 deg"')
        )
        snapshots, system = drawn(run, 3000, seed=303), run.system()
        assert pairs_p_value(snapshots, system) > ALPHA
        assert pairs_p_value(self.flipped(drawn(plain, 3000, seed=304), 305), system) < ALPHA
        assert pairs_p_value(snapshots, half.system()) < ALPHA
        assert pairs_p_value(drawn(half, 3000, seed=306), system) < ALPHA
        edges, counts, ideal = pairs_and_ideal(snapshots, system)
        parts = at_one_twist(system, edges, cross=True)
        for cross, right in ((parts.cross, True), (-parts.cross, False)):
            both = parts._replace(cross=cross)
            g = np.array([detected(system, both, *pair) for pair in PAIRS]) / 7**2
            assert (hotelling_p_value(counts, (g * ideal).ravel()) > ALPHA) == right

    def test_polarised_gas(self):
        """Labels flipped at random are the same law; independent components are not."""
        run = run_of("up = 10, down = 0", '"90 deg"', self.SIDES)
        alone = run_of("up = 10", "0", self.SIDES)
        apart = run_of("up = 5, down = 5", "0", self.SIDES)
        system = run.system()
        assert pairs_p_value(self.flipped(drawn(alone, 3000, seed=307), 308), system) > ALPHA
        independent = drawn(apart, 3000, seed=309)
        assert pairs_p_value(independent, apart.system()) > ALPHA
        assert pairs_p_value(independent, system) < ALPHA
        # g = 1 between the labels is not what a rotation leaves
        _, counts, ideal = pairs_and_ideal(drawn(run, 3000, seed=310), system)
        assert hotelling_p_value(counts[:, 4:8], ideal[1]) < ALPHA


# Populations, ensemble, temperature and twist.
STATES = (
    ("up = 9, down = 5", "canonical", "0", '"none"'),
    ("up = 9, down = 0", "canonical", "0", "[0.3, -0.2]"),
    ("up = 8, down = 3", "canonical", "0", '"none"'),
    ("up = 8, down = 4", "canonical", '"0.4 T_F"', '"none"'),
    ("up = 8, down = 4", "grand-canonical", '"0.4 T_F"', '"none"'),
    ("up = 8, down = 4", "canonical", "0", '"averaged"'),
    ("up = 0, down = 8", "grand-canonical", "0", '"averaged"'),
    ("up = 8, down = 0", "grand-canonical", '"0.4 T_F"', '"averaged"'),
)


def sampled_run(variant: Variant, state: tuple[str, ...], batches: int = 8) -> RunFile:
    """Return the small run in an uneven box, spins rotated by 60°, all snapshots kept."""
    particles, ensemble, temperature, twist = state
    gas = f'temperature = {temperature}\nensemble = "{ensemble}"\n'
    spin = '[spin]\nrotation = "60 deg"\n'
    box = f"[confinement]\nsides = [1.0, 1.5]\ntwist = {twist}\n"
    return variant(
        ("up = 9, down = 5", particles),
        ("\n[sampling]\n", f"{gas}\n{spin}\n{box}\n[sampling]\n"),
        ("snapshots = 400", f"snapshots = {50 * batches}"),
        ("batches = 8", f"batches = {batches}"),
        ("keep_snapshots = 70", 'keep_snapshots = "all"'),
    )


@pytest.fixture(scope="module", params=STATES, ids=" ".join)
def result(
    request: pytest.FixtureRequest, variant: Variant, tmp_path_factory: pytest.TempPathFactory
) -> tuple[RunFile, Path]:
    """Return a run of every state and its result file."""
    run = sampled_run(variant, request.param)
    path = tmp_path_factory.mktemp("spin") / "run.nc"
    sample_into(run, path)
    return run, path


class TestResult:
    def test_what_is_said_of_the_rotation(self, result: tuple[RunFile, Path]) -> None:
        run, data = result[0], load(result[1])
        assert float(data["rotation"]) == 60
        assert data["rotation"].attrs["units"] == "degree"
        up, down = run.gas.populations
        means = np.array([0.75 * up + 0.25 * down, 0.25 * up + 0.75 * down])
        assert data["detected_population"].dims == ("spin",)
        assert data["detected_population"].values == pytest.approx(means)
        assert data["population"].values.tolist() == [up, down]
        assert "rotated by 60 degrees" in data.attrs["ensemble"]
        # the hole is n'(g − 1), n' the mean density detected
        volume = float(data["side"].prod())
        seen = means[[0, 1, 1]] / volume
        hole = seen[:, None] * (data["pair_correlation_expected"].values - 1)
        assert data["exchange_hole_expected"].values == pytest.approx(hole)

    def test_sample_and_expectation_agree(self, result: tuple[RunFile, Path]) -> None:
        run, data = result[0], load(result[1])
        assert ALPHA < float(data["pair_correlation_p_value"]) <= 1
        assert int(data["pair_correlation_p_value"].attrs["dimensions_tested"]) > 20
        if not run.system().averaged:
            exact = expected(run.system(), separation_grid(run.system(), 20))
            found = data["pair_correlation_expected"].values
            assert found == pytest.approx(exact["pair_correlation"], abs=1e-12)

    def test_mean_populations(self, result: tuple[RunFile, Path]) -> None:
        run, data = result[0], load(result[1])
        found, means = data["mean_population"].values, data["detected_population"].values
        if run.gas.ensemble == "canonical":
            assert found.sum(axis=1) == pytest.approx(np.full(8, run.gas.particles))
        for label in (0, 1):
            numbers = (data["component"] == label).sum("particle").values
            assert found[:, label] == pytest.approx(numbers.reshape(8, 50).mean(axis=1))
            assert np.ptp(numbers) > 0
            assert ttest_1samp(numbers, means[label]).pvalue > ALPHA

    def test_kept_snapshots(self, result: tuple[RunFile, Path]) -> None:
        """In order of the label; empty places behind, where numbers fluctuate at all."""
        run, data = result[0], load(result[1])
        component = data["component"].values
        assert np.array_equal(np.isnan(data["position"].values).all(axis=2), component == -1)
        assert np.all(np.diff(np.where(component == -1, 2, component), axis=1) >= 0)
        assert (component == -1).any() == (run.gas.ensemble == "grand-canonical")
        again = pairmc.draw_snapshots(run, 120)
        width = again.sizes["particle"]
        assert np.array_equal(component[:120, :width], again["component"])
        np.testing.assert_allclose(data["position"][:120, :width], again["position"], rtol=1e-6)

    def test_a_plain_reader_finds_units(self, result: tuple[RunFile, Path]) -> None:
        with xr.open_dataset(result[1]) as plain:
            for name in ("rotation", "detected_population", "mean_population"):
                assert plain[name].attrs["units"]
                assert plain[name].attrs["long_name"]


class TestGrowth:
    @pytest.mark.parametrize("state", [STATES[1], STATES[4], STATES[6]])
    def test_more_equals_one_longer_run_on_two_workers(
        self, variant: Variant, tmp_path: Path, state: tuple[str, ...]
    ) -> None:
        path = tmp_path / "run.nc"
        pairmc.sample(sampled_run(variant, state), into=path, workers=1)
        grown = pairmc.sample(sampled_run(variant, state), into=path, workers=1, more=200)
        whole = pairmc.sample(sampled_run(variant, state, 12), workers=2)
        assert same_data(grown, whole) == []
        assert grown.sizes["batch"] == 12

    def test_another_angle_is_another_run(self, variant: Variant, tmp_path: Path) -> None:
        path = tmp_path / "run.nc"
        sample_into(sampled_run(variant, STATES[0]), path)
        before = path.read_bytes()
        other = variant(
            (
                "\n[sampling]\n",
                '\n[spin]\nrotation = "300 deg"\n[confinement]\nsides = [1, 1.5]\n\n[sampling]\n',
            ),
            ("keep_snapshots = 70", 'keep_snapshots = "all"'),
        )
        with pytest.raises(pairmc.errors.InputError, match=r"spin\.rotation"):
            sample_into(other, path)
        assert path.read_bytes() == before
