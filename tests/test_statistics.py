"""Errors, intervals and p-values against scipy, against counting, and for uniformity.

Statistical checks use fixed seeds; together they raise a false alarm with probability below
FAMILY_ALPHA, each with an equal share.
"""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from pairmc.statistics import (
    MINIMUM_COUNT,
    SNAPSHOTS_PER_BIN,
    Moments,
    hotelling,
    merge_for_test,
    merge_outward,
    poisson_interval,
    standard_error,
    sum_by_group,
    t_quantile,
)
from tests.oracles.significance import hotelling_p_value

FAMILY_ALPHA = 1e-4
STATISTICAL_CHECKS = 10
ALPHA = FAMILY_ALPHA / STATISTICAL_CHECKS


def moments_of(vectors: np.ndarray) -> Moments:
    """Return the moments of integer vectors (snapshot, bin)."""
    whole = vectors.astype(np.int64)
    return Moments(len(whole), whole.sum(axis=0), whole.T @ whole)


def correlated_counts(rng: np.random.Generator, repeats: int, snapshots: int) -> np.ndarray:
    """Return vectors (repeat, snapshot, bin) of mean 4000 · (1 … 5), correlated, near Gaussian."""
    mixing = np.array([[9, 0, 0, 0, 0], [8, 4, 0, 0, 0], [-7, 3, 5, 0, 0], [2] * 4 + [0], [1] * 5])
    normal = rng.standard_normal((repeats, snapshots, 5)) @ (20.0 * mixing.T)
    return np.rint(normal + 4000 * np.arange(1, 6)).astype(np.int64)


class TestStudent:
    @pytest.mark.parametrize("batches", [2, 5, 40, 1000])
    @pytest.mark.parametrize("level", [0.5, 0.95, 1 - 1e-4])
    def test_quantile_against_the_distribution(self, batches, level):
        t = t_quantile(level, batches)
        assert stats.t(batches - 1).cdf(t) - stats.t(batches - 1).cdf(-t) == pytest.approx(level)

    def test_quantile_of_a_table(self):
        # 2.262 for 9 degrees of freedom at 95 %, 12.706 for 1: any printed table (from memory).
        assert t_quantile(0.95, 10) == pytest.approx(2.262, abs=6e-4)
        assert t_quantile(0.95, 2) == pytest.approx(12.706, abs=6e-4)

    def test_p_values_of_batch_means_are_uniform(self):
        rng = np.random.default_rng(1)
        batches = rng.standard_normal((40, 3000)) * 3.0 + 5.0
        t = (batches.mean(axis=0) - 5.0) / standard_error(batches)
        assert stats.kstest(2 * stats.t(39).sf(np.abs(t)), "uniform").pvalue > ALPHA
        covered = np.abs(t) < t_quantile(0.9, 40)
        assert stats.binomtest(int(covered.sum()), 3000, 0.9).pvalue > ALPHA
        # Control: few batches and the normal quantile.
        few = batches[:4]
        t = (few.mean(axis=0) - 5.0) / standard_error(few)
        wrong = np.abs(t) < stats.norm.ppf(0.95)
        assert stats.binomtest(int(wrong.sum()), 3000, 0.9).pvalue < ALPHA

    def test_standard_error_is_of_the_first_axis(self):
        values = np.random.default_rng(2).random((7, 3, 4))
        assert standard_error(values) == pytest.approx(stats.sem(values, axis=0))


class TestPoissonInterval:
    @pytest.mark.parametrize("level", [0.68, 0.95, 0.9999])
    def test_against_chi_square_and_tails(self, level):
        count = np.array([0, 1, 2, 7, 40, 10_000])
        lower, upper = poisson_interval(count, level)
        tail = 0.5 * (1 - level)
        # Garwood, Biometrika 28, 437 (1936), in the form of half quantiles of χ² (from memory).
        assert upper == pytest.approx(0.5 * stats.chi2(2 * count + 2).ppf(1 - tail), rel=1e-9)
        assert lower[1:] == pytest.approx(0.5 * stats.chi2(2 * count[1:]).ppf(tail), rel=1e-9)
        assert lower[0] == 0.0
        # by definition: as few as the count have the chance `tail` at the upper limit
        assert stats.poisson(upper).cdf(count) == pytest.approx(np.full(6, tail), rel=1e-6)
        assert stats.poisson(lower[1:]).sf(count[1:] - 1) == pytest.approx(np.full(5, tail), 1e-6)

    @pytest.mark.parametrize("mean", [0.3, 3.0, 30.0])
    def test_coverage_is_at_least_the_level(self, mean):
        """Exactly, by summing over counts; and not much more where counts are many."""
        count = np.arange(200)
        lower, upper = poisson_interval(count, 0.95)
        covered = stats.poisson(mean).pmf(count)[(lower <= mean) & (mean <= upper)].sum()
        assert covered >= 0.95
        assert covered < 0.97 or mean < 10

    def test_shape_is_kept(self):
        lower, upper = poisson_interval(np.zeros((2, 3), dtype=np.int64), 0.95)
        assert lower.shape == upper.shape == (2, 3)
        assert upper == pytest.approx(np.full((2, 3), 3.6889), abs=5e-5)


class TestMoments:
    def test_covariance_is_that_of_numpy(self):
        vectors = np.random.default_rng(3).poisson((3.0, 40.0, 0.2), (500, 3))
        moments = moments_of(vectors)
        assert moments.covariance == pytest.approx(np.cov(vectors, rowvar=False), rel=1e-12)
        assert moments.mean == pytest.approx(vectors.mean(axis=0))

    def test_nothing_cancels_in_large_sums(self):
        """Small spread on a large mean: exact in whole numbers, lost in floating point."""
        base = 2_000_000_000
        offsets = [(0, 1), (1, 1), (2, -3), (-3, 1)]
        vectors = [(base + a, base + b) for a, b in offsets]
        total = np.array([sum(v[i] for v in vectors) for i in range(2)])
        # Σxxᵀ beyond 64 bits would not fit; four squares of 2·10⁹ are 1.6·10¹⁹ > 2⁶³
        with pytest.raises(OverflowError):
            np.array([sum(v[0] * v[0] for v in vectors)] * 2, dtype=np.int64)
        vectors = vectors[:2]
        total = np.array([sum(v[i] for v in vectors) for i in range(2)], dtype=np.int64)
        product = np.array(
            [[sum(v[i] * v[j] for v in vectors) for j in range(2)] for i in range(2)],
            dtype=np.int64,
        )
        covariance = Moments(2, total, product).covariance
        exact = [[Fraction(1, 2), 0], [0, 0]]
        assert covariance == pytest.approx(np.array(exact, dtype=float), abs=1e-12)
        plain = product.astype(float) - np.outer(total, total.astype(float)) / 2
        assert abs(plain[0, 0] - 0.5) > 0.4  # control

    def test_merging_sums_and_leaves_out(self):
        vectors = np.random.default_rng(4).poisson(5.0, (50, 6))
        groups = np.array([-1, 0, 0, 2, 1, 2])
        merged = moments_of(vectors).merged(groups)
        by_hand = np.stack([vectors[:, groups == g].sum(axis=1) for g in range(3)], axis=1)
        plain = moments_of(by_hand)
        assert np.array_equal(merged.total, plain.total)
        assert np.array_equal(merged.product, plain.product)

    def test_sum_by_group(self):
        values = np.array([[1.5, 2.0, 4.0], [8.0, 16.0, 32.0]])
        groups = np.array([[0, -1, 2], [2, 0, -1]])
        assert sum_by_group(values, groups, 4) == pytest.approx([17.5, 0.0, 12.0, 0.0])
        assert sum_by_group(np.array([], dtype=float), np.array([], dtype=np.int64), 2).size == 2


class TestHotelling:
    SNAPSHOTS = 60
    MEAN = 4000.0 * np.arange(1, 6)

    def test_same_as_another_implementation(self):
        vectors = correlated_counts(np.random.default_rng(5), 1, 80)[0]
        test = hotelling(moments_of(vectors), self.MEAN)
        assert test.p_value == pytest.approx(hotelling_p_value(vectors, self.MEAN), rel=1e-6)
        assert (test.dimensions, test.snapshots) == (5, 80)
        difference = vectors.mean(axis=0) - self.MEAN
        squared = 80 * difference @ np.linalg.solve(np.cov(vectors.T), difference)
        assert test.statistic == pytest.approx(squared, rel=1e-8)

    def test_uniform_for_correlated_bins(self):
        samples = correlated_counts(np.random.default_rng(6), 1500, self.SNAPSHOTS)
        p = [hotelling(moments_of(sample), self.MEAN).p_value for sample in samples]
        assert stats.kstest(p, "uniform").pvalue > ALPHA
        # Control: the same T² taken for χ², as if the covariance were known.
        few = samples[:, :20]
        squared = [hotelling(moments_of(sample), self.MEAN).statistic for sample in few]
        assert stats.kstest(stats.chi2(5).sf(squared), "uniform").pvalue < ALPHA

    def test_uniform_for_counts(self):
        """Poisson counts, 100 and more expected in each bin of the whole run."""
        rng = np.random.default_rng(7)
        mean = np.array([0.2, 0.5, 3.0])
        samples = rng.poisson(mean, (1500, 500, 3))
        p = [hotelling(moments_of(sample), mean).p_value for sample in samples]
        assert stats.kstest(p, "uniform").pvalue > ALPHA

    def test_a_shift_is_seen(self):
        """Of half a standard deviation in one bin, hidden in none of the others' noise."""
        vectors = correlated_counts(np.random.default_rng(8), 1, 400)[0]
        shift = np.array([0, 0, 0.5 * vectors[:, 2].std(), 0, 0])
        assert hotelling(moments_of(vectors), self.MEAN).p_value > ALPHA
        assert hotelling(moments_of(vectors), self.MEAN + shift).p_value < ALPHA

    def test_a_fixed_sum_is_one_direction_less(self):
        rng = np.random.default_rng(9)
        chances = np.array([0.1, 0.2, 0.3, 0.4])
        samples = rng.multinomial(50, chances, (1500, self.SNAPSHOTS))
        tests = [hotelling(moments_of(sample), 50 * chances) for sample in samples]
        assert {test.dimensions for test in tests} == {3}
        p = [test.p_value for test in tests]
        assert stats.kstest(p, "uniform").pvalue > ALPHA
        # leaving one bin out is the same test
        without = hotelling_p_value(samples[0][:, :3], 50 * chances[:3])
        assert p[0] == pytest.approx(without, rel=1e-6)

    def test_a_wrong_fixed_sum_is_impossible(self):
        rng = np.random.default_rng(10)
        chances = np.array([0.1, 0.2, 0.3, 0.4])
        moments = moments_of(rng.multinomial(50, chances, 500))
        assert hotelling(moments, 50 * chances).p_value > ALPHA
        for wrong in (51 * chances, 50 * chances + [0, 0, 1e-3, 0], 50 * 49 / 50 * chances):
            test = hotelling(moments, wrong)
            assert (test.p_value, test.statistic) == (0.0, np.inf)

    def test_bins_that_never_vary(self):
        vectors = np.column_stack([np.arange(10), np.full(10, 4), np.zeros(10)])
        moments = moments_of(vectors)
        test = hotelling(moments, np.array([4.0, 4.0, 0.0]))
        assert test.dimensions == 1
        assert test.p_value == pytest.approx(stats.ttest_1samp(np.arange(10), 4.0).pvalue)
        assert hotelling(moments, np.array([4.5, 4.0, 0.1])).p_value == 0.0
        still = moments_of(np.full((10, 2), 3))
        assert np.isnan(hotelling(still, np.array([3.0, 3.0])).p_value)
        assert hotelling(still, np.array([3.0, 3.1])).p_value == 0.0

    def test_too_few_snapshots_give_no_number(self):
        rng = np.random.default_rng(11)
        for snapshots in (1, 2):
            vectors = rng.poisson(5.0, (snapshots, 2))
            assert np.isnan(hotelling(moments_of(vectors), np.full(2, 5.0)).p_value)
        vectors = rng.poisson(5.0, (6, 9))
        assert hotelling(moments_of(vectors), vectors.mean(axis=0)).dimensions == 5
        assert np.isfinite(hotelling(moments_of(vectors), vectors.mean(axis=0)).p_value)
        empty = Moments(9, np.zeros(0, dtype=np.int64), np.zeros((0, 0), dtype=np.int64))
        assert np.isnan(hotelling(empty, np.zeros(0)).p_value)


COUNTS = st.lists(st.floats(0.0, 300.0), min_size=1, max_size=40)


class TestMerging:
    @settings(max_examples=300, deadline=None, derandomize=True)
    @given(COUNTS, st.lists(st.integers(0, 3), min_size=40, max_size=40), st.floats(1.0, 500.0))
    def test_properties(self, expected, blocks, minimum):
        expected = np.array(expected)
        blocks = np.sort(np.array(blocks[: len(expected)]))
        merged = merge_outward(expected, blocks, minimum)
        used = merged[merged >= 0]
        assert np.all(np.diff(used) >= 0)  # order kept, so merged bins are runs of neighbours
        assert np.array_equal(np.unique(used), np.arange(used.max(initial=-1) + 1))
        for number in np.unique(used):
            members = np.flatnonzero(merged == number)
            assert len(set(blocks[members])) == 1
            assert expected[members].sum() >= minimum * (1 - 1e-12)
            # no more bins than needed, unless what is left over has joined
            last = members[-1] == np.flatnonzero(blocks == blocks[members[0]])[-1]
            assert last or expected[members[:-1]].sum() < minimum
        for block in np.unique(blocks):
            alone = merged[blocks == block] == -1
            assert alone.all() or not alone.any()
            assert alone.all() == _falls_short(expected[blocks == block], minimum)

    def test_by_hand(self):
        expected = np.array([10, 60, 50, 90, 20, 99, 100, 5, 40, 40, 130, 7])
        blocks = np.array([0, 0, 0, 0, 0, 1, 1, 1, 2, 2, 3, 3])
        merged = merge_outward(expected, blocks, 100.0)
        assert merged.tolist() == [0, 0, 0, 1, 1, 2, 2, 2, -1, -1, 3, 3]

    @settings(max_examples=100, deadline=None, derandomize=True)
    @given(COUNTS, st.integers(1, 400))
    def test_few_snapshots_merge_further(self, expected, snapshots):
        expected = np.array(expected) * 10
        blocks = np.repeat([0, 1], [len(expected) // 2, len(expected) - len(expected) // 2])
        merged = merge_for_test(expected, blocks, snapshots)
        size = merged.max(initial=-1) + 1
        assert size * SNAPSHOTS_PER_BIN <= snapshots or size == 0
        plain = merge_outward(expected, blocks)
        if (plain.max() + 1) * SNAPSHOTS_PER_BIN <= snapshots:
            assert np.array_equal(merged, plain)
        for number in range(size):
            assert expected[merged == number].sum() >= MINIMUM_COUNT * (1 - 1e-12)

    def test_no_bins(self):
        none = np.zeros(0, dtype=np.int64)
        assert merge_outward(np.zeros(0), none).size == 0
        assert merge_for_test(np.zeros(0), none, 10).size == 0


def _falls_short(expected: np.ndarray, minimum: float) -> bool:
    """Return whether adding up from the first bin never reaches the minimum."""
    total = 0.0
    for value in expected:
        total += value
    return total < minimum
