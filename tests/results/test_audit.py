"""Every run audits itself: right results pass, planted errors do not.

The check that right results pass raises a false alarm in one of 10⁴ seeds; the seed was chosen
before looking.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from pairmc.physics.observables import pair_correlation
from pairmc.physics.theory import pair_correlation as theory
from pairmc.results.audit import Audit, audit, count_errors
from pairmc.results.collect import Collected
from pairmc.runfile.run import RunFile
from pairmc.running.batch import run_batch
from pairmc.statistics import poisson_interval

Variant = Callable[..., RunFile]

FALSE_ALARM = 1e-4


@pytest.fixture(scope="module")
def long_run(variant: Variant) -> RunFile:
    return variant(("snapshots = 400", "snapshots = 12000"), ("seed = 11", "seed = 4711"))


@pytest.fixture(scope="module")
def collected(long_run: RunFile) -> Collected:
    collected = Collected()
    for number in range(long_run.batches):
        collected.add_part(["pair_correlation"], run_batch(long_run, number), {})
    return collected


def judge(run: RunFile, collected: Collected, expected: dict[str, np.ndarray]) -> Audit:
    grid = pair_correlation.grid(run.observables["pair_correlation"], run.system())
    tallies = collected.tallies["pair_correlation"]
    counts = run.batch_size * pair_correlation.mean_counts(expected, grid)
    return audit(grid, tallies.stacked(), tallies.moments(run.snapshots), counts)


def exact(run: RunFile) -> dict[str, np.ndarray]:
    system = run.system()
    return theory.expected(
        system, pair_correlation.grid(run.observables["pair_correlation"], system)
    )


def test_a_right_sample_passes(long_run: RunFile, collected: Collected) -> None:
    judged = judge(long_run, collected, exact(long_run))
    assert judged.test.dimensions == len(judged.value) > 20
    assert judged.test.p_value > FALSE_ALARM
    assert np.abs(judged.difference).max() < 15  # t with 7 degrees of freedom, 60 bins: P = 1e-4


def without_exchange(run: RunFile) -> dict[str, np.ndarray]:
    expected = exact(run)
    return {"pair_correlation": np.ones_like(expected["pair_correlation"])}


def components_swapped(run: RunFile) -> dict[str, np.ndarray]:
    return {"pair_correlation": exact(run)["pair_correlation"][::-1]}


def infinite(run: RunFile) -> dict[str, np.ndarray]:
    system = run.system()
    return theory.bulk(system, pair_correlation.grid(run.observables["pair_correlation"], system))


def one_bin_further(run: RunFile) -> dict[str, np.ndarray]:
    return {"pair_correlation": np.roll(exact(run)["pair_correlation"], 1, axis=1)}


def by_number_of_pairs(run: RunFile) -> dict[str, np.ndarray]:
    factors = np.array([9 / 8, 1.0, 5 / 4])
    return {"pair_correlation": exact(run)["pair_correlation"] * factors[:, None]}


@pytest.mark.parametrize(
    "mistake",
    [without_exchange, components_swapped, infinite, one_bin_further, by_number_of_pairs],
)
def test_a_wrong_expectation_is_seen(
    long_run: RunFile, collected: Collected, mistake: Callable[[RunFile], dict[str, np.ndarray]]
) -> None:
    assert judge(long_run, collected, mistake(long_run)).test.p_value < FALSE_ALARM


def test_the_sample_of_another_gas_is_seen(long_run: RunFile, variant: Variant) -> None:
    other = variant(
        ("up = 9, down = 5", "up = 5, down = 9"), ("snapshots = 400", "snapshots = 4000")
    )
    run = variant(("snapshots = 400", "snapshots = 4000"))
    collected = Collected()
    for number in range(8):
        collected.add_part(["pair_correlation"], run_batch(other, number), {})
    assert judge(run, collected, exact(run)).test.p_value < FALSE_ALARM


def test_every_merged_bin_holds_whole_bins_of_one_pair(
    long_run: RunFile, collected: Collected
) -> None:
    judged = judge(long_run, collected, exact(long_run))
    for number in range(len(judged.value)):
        rows, columns = np.nonzero(judged.merged == number)
        assert len(set(rows)) == 1
        assert list(columns) == list(range(columns[0], columns[-1] + 1))


def test_errors_of_sparse_bins_are_poisson_and_of_full_ones_from_batches() -> None:
    rng = np.random.default_rng(2)
    counts = np.stack([rng.poisson(0.05, 16), rng.poisson(40, 16)], axis=1)
    errors = count_errors(counts, np.array([0.8, 640.0]))
    total = counts.sum(axis=0)
    assert errors.error[1] == pytest.approx(np.sqrt(16) * counts[:, 1].std(ddof=1))
    low, high = poisson_interval(total[:1], 0.682689492137086)
    assert errors.error[0] == pytest.approx(max(total[0] - low[0], high[0] - total[0]))
    empty = count_errors(np.zeros((8, 1), dtype=np.int64), np.array([0.1]))
    assert empty.error[0] == pytest.approx(1.841, abs=1e-3)  # −ln 0.1587, Garwood (1936)
    assert empty.lower[0] == 0
    assert empty.upper[0] == pytest.approx(3.689, abs=1e-3)  # −ln 0.025
