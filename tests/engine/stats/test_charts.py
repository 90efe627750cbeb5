"""False alarms counted beside what is claimed, and edge cases of the charts."""

import math

import numpy as np
import pytest
from scipy import stats

from engine.stats.charts import (
    exact_p_limits,
    exact_u_limits,
    g_limits,
    p_limits,
    run_false_alarm,
    run_rules,
)
from engine.stats.cusum import share_cusum

TAIL = 0.00135  # beyond one three-sigma limit of a normal


@pytest.mark.parametrize("p0", [0.02, 0.05, 0.1, 0.5, 0.9])
@pytest.mark.parametrize("n", [8, 15, 30, 60, 120])
def test_exact_limits_keep_their_chance_on_each_side(p0, n):
    """By the binomial itself (scipy)."""
    limits = exact_p_limits([0], [n], p0)
    above = stats.binom.sf(round(limits.high[0] * n), n, p0)
    below = stats.binom.cdf(round(limits.low[0] * n) - 1, n, p0)
    assert above <= TAIL
    assert below <= TAIL
    # One count nearer would alarm too often.
    assert stats.binom.sf(round(limits.high[0] * n) - 1, n, p0) > TAIL


def test_three_sigma_limits_of_small_months_alarm_too_often():
    """The reason for exact limits: 15 a month at 10 % alarm .0127, not .00135."""
    high = p_limits([0], [15], 0.1).high[0]
    alarm = stats.binom.sf(math.floor(high * 15), 15, 0.1)
    assert alarm == pytest.approx(0.0127, abs=5e-5)


def test_exact_rates_keep_their_chance():
    limits = exact_u_limits([0, 0], [2.0, 10.0], 3.0)
    for exposure, high in zip([2.0, 10.0], limits.high, strict=True):
        assert stats.poisson.sf(round(high * exposure), 3 * exposure) <= TAIL


def test_a_month_of_none_has_no_limits():
    limits = exact_p_limits([0], [0], 0.1)
    assert np.isnan(limits.high[0])
    assert not limits.outside[0]


@pytest.mark.parametrize("n", [12, 16, 24])
def test_the_run_rules_signal_as_often_as_said(n):
    """20,000 series without a change; 4 standard errors."""
    draw = np.random.default_rng(3)
    above = draw.random((20_000, n)) < 0.5
    claimed = run_false_alarm(n, own_median=False)
    seen = np.mean([bool(run_rules(row * 2.0 - 1, 0.0).signal) for row in above])
    assert seen == pytest.approx(claimed, abs=4 * math.sqrt(claimed / 20_000))


def test_ten_points_are_needed_before_runs_are_read():
    assert run_rules([1, 2, 1, 2, 1, 2]).signal is None
    assert run_rules([]).signal is None


def test_a_shift_halfway_is_signalled():
    values = [1, 2, 1, 2, 1, 2, 1, 2, 5, 6, 5, 6, 5, 6, 5, 6]
    assert run_rules(values, 2.5).signal


def test_points_on_the_line_are_passed_over():
    assert run_rules([3.0] * 20, 3.0).useful_count == 0


def test_the_textbook_g_limit_alarms_far_too_often():
    """Mean gap 129: beyond 517 lie .0179 of gaps, not .00135 (scipy geometric)."""
    plain, exact = g_limits([129.0], exact=False), g_limits([129.0])
    assert stats.geom.sf(math.floor(plain.high), 1 / 129) == pytest.approx(0.0179, 3e-2)
    assert stats.geom.sf(exact.high, 1 / 129) <= TAIL


def test_the_share_cusum_cries_as_seldom_as_asked():
    """Fresh series without a change: months to the first signal, on average."""
    n, p0 = 60, 0.1
    limit = share_cusum([6], [n], p0, upward=True).limit
    draw = np.random.default_rng(99)
    hit, miss = _weights(p0)
    sums, alive = np.zeros(1000), np.ones(1000, bool)
    months = np.zeros(1000)
    for month in range(1, 1500):
        x = draw.binomial(n, p0, 1000)
        sums = np.maximum(0, sums + x * hit + (n - x) * miss)
        over = alive & (sums > limit)
        months[over] = month
        alive &= ~over
    months[alive] = 1500
    assert months.mean() == pytest.approx(100, rel=0.15)


def test_the_share_cusum_finds_a_doubling_within_a_few_months():
    """60 a month, 10 % to 20 %: about two months by an independent simulation."""
    draw = np.random.default_rng(4)
    waits = []
    for _ in range(60):
        counts = draw.binomial(60, 0.2, 24)
        done = share_cusum(counts, np.full(24, 60), 0.1, upward=True)
        waits.append(int(np.argmax(done.sums > done.limit)) + 1)
    assert np.mean(waits) < 4


def test_a_baseline_of_nothing_has_no_cusum():
    with pytest.raises(ValueError, match="between 0 and 1"):
        share_cusum([0], [10], 0.0, upward=True)


def _weights(p0):
    bottom = 1 - p0 + 2 * p0
    return math.log(2 / bottom), -math.log(bottom)
