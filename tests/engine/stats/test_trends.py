"""Trends against permutation by brute force and two reference libraries."""

from collections import Counter
from itertools import permutations

import numpy as np
import pymannkendall
import pytest
from scipy.stats import kendalltau, theilslopes

from engine.stats.trends import (
    kendall_steps,
    mann_kendall,
    pairwise_slopes,
    s_distribution,
    theil_sen,
)

RNG = np.random.default_rng(20)
LONG = [RNG.normal(size=n).round(places) for n in (12, 25, 60) for places in (1, 6)]


@pytest.mark.parametrize("values", LONG, ids=lambda v: f"{len(v)}")
def test_long_series_agree_with_a_reference_library(values):
    """Normal form with ties: pymannkendall gives S, its variance, z and p."""
    ours, theirs = mann_kendall(values), pymannkendall.original_test(values)
    assert ours.s == theirs.s
    assert ours.var_s == pytest.approx(theirs.var_s)
    assert ours.z == pytest.approx(theirs.z)
    assert ours.p == pytest.approx(theirs.p)


@pytest.mark.parametrize("n", [5, 7, 9])
def test_short_series_without_ties_agree_with_scipy_exactly(n):
    values = RNG.normal(size=n)
    theirs = kendalltau(np.arange(n), values, method="exact")
    ours = mann_kendall(values)
    assert ours.p == pytest.approx(theirs.pvalue)
    assert ours.tau_b == pytest.approx(theirs.statistic)


@pytest.mark.parametrize(
    ("values", "times"),
    [
        ([1, 2, 2, 3, 3], [0, 1, 2, 3, 4]),
        ([1, 1, 1, 2, 5, 5], [0, 1, 2, 3, 4, 5]),
        ([1, 2, 2, 3, 3], [0, 0, 1, 2, 2]),
        ([4, 1, 2, 2, 6, 3], [0, 0, 0, 1, 2, 2]),
    ],
)
def test_ties_of_values_and_times_are_counted_exactly(values, times):
    """Every arrangement, counted one by one."""
    y, x = np.array(values, float), np.array(times, float)
    tally = Counter(
        int(kendall_steps(y[list(order)], x).sum())
        for order in permutations(range(len(y)))
    )
    total = sum(tally.values())
    seen = int(kendall_steps(y, x).sum())
    expected = sum(n for s, n in tally.items() if abs(s) >= abs(seen)) / total
    assert mann_kendall(y, x).p == pytest.approx(expected)
    mean_square = sum(s * s * n for s, n in tally.items()) / total
    assert mann_kendall(y, x).var_s == pytest.approx(mean_square)


def test_the_smallest_p_of_four_and_five_readings():
    """One order in 4! and 5! rises throughout: 2/24 and 2/120 two-sided."""
    assert mann_kendall(np.arange(4)).p == pytest.approx(2 / 24)
    assert mann_kendall(np.arange(5)).smallest_p == pytest.approx(2 / 120)


def test_the_null_counts_add_to_every_order():
    scores, chances = s_distribution(8)
    assert chances.sum() == pytest.approx(1)
    assert (scores * chances).sum() == pytest.approx(0)


def test_the_slope_is_that_of_scipy_at_uneven_times():
    x = np.sort(RNG.uniform(0, 100, 15))
    y = RNG.normal(size=15)
    theirs = theilslopes(y, x, 0.9)
    ours = theil_sen(x, y, 0.9, ranks="whole")
    assert ours.slope == pytest.approx(theirs.slope)
    assert (ours.low, ours.high) == pytest.approx((theirs.low_slope, theirs.high_slope))


def test_two_readings_bound_no_slope():
    slope = theil_sen([0, 1], [2.0, 2.5])
    assert slope.slope == pytest.approx(0.5)
    assert slope.low == -np.inf
    assert slope.high == np.inf


@pytest.mark.parametrize(
    ("values", "why"),
    [
        ([], "no readings"),
        ([2.0], "one reading"),
        ([2.0, 2.0, 2.0], "all readings are equal"),
    ],
)
def test_a_series_that_cannot_speak_says_why(values, why):
    trend = mann_kendall(values)
    assert trend.refusal == why
    assert not trend.p < 0.05


def test_readings_at_one_time_give_no_slope():
    slope = theil_sen([3, 3, 3], [1.0, 2.0, 3.0])
    assert slope.refusal == "fewer than two readings at different times"
    assert mann_kendall([1.0, 2.0, 3.0], [3, 3, 3]).refusal == "all times are equal"


def test_a_reading_over_range_ranks_on_top_and_takes_no_part_in_the_slope():
    y = [2.0, 2.1, 2.2, 2.3, np.inf, np.inf]
    trend = mann_kendall(y)
    assert trend.s == 14  # 15 pairs, the two over range tie
    assert theil_sen(range(6), y).slope == pytest.approx(0.1)


def test_missing_readings_are_counted_not_ranked():
    trend = mann_kendall([1.0, np.nan, 2.0, 3.0], [0, 1, 2, np.nan])
    assert (trend.readings_count, trend.missing_count) == (2, 2)


def test_order_of_the_rows_does_not_matter():
    x, y = np.array([5.0, 1, 3, 9, 7]), np.array([3.0, 1, 2, 6, 4])
    assert mann_kendall(y, x).s == 10
    assert theil_sen(x, y).slope == theil_sen(np.sort(x), np.sort(y)).slope


def test_slopes_of_the_cloud_seeding_data():
    """Hollander, Wolfe and Chicken, example 9.1: ten slopes, sorted."""
    slopes = pairwise_slopes([1, 2, 3, 4, 5], [1.26, 1.27, 1.12, 1.16, 1.03])
    printed = [-0.15, -0.13, -0.08, -0.07, -0.0575, -0.055, -0.045, -0.0333, 0.01, 0.04]
    assert slopes == pytest.approx(printed, abs=5e-5)


def test_an_unknown_way_to_take_ranks_is_named():
    with pytest.raises(ValueError, match="ranks must be interpolated or whole"):
        theil_sen([0, 1], [0, 1], ranks="odd")
