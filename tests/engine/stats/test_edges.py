"""Edges another pair of eyes found: each gives a figure that holds, or none."""

import math
import warnings

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from engine.reviews.month_units import _widened
from engine.reviews.month_words import rare_events
from engine.stats.agreement import agreement
from engine.stats.breaks import one_break
from engine.stats.cells import hidden_cells
from engine.stats.drift import drift_of
from engine.stats.funnel import funnel_limits, shrunken
from engine.stats.lifetimes import kaplan_meier, log_rank
from engine.stats.odds import mantel_haenszel, odds_ratio, woolf_homogeneity_p
from engine.stats.rates import design_effect, poisson_exact, poisson_ratio
from engine.stats.sampling import charts_to_find_one, stratified_share
from engine.stats.series import segmented, step_in_counts


def test_a_funnel_line_stands_at_sizes_that_are_no_whole_numbers():
    low, high = funnel_limits(0.2, [40, 40.5, 33.33], 0.998)
    assert np.isfinite(low).all()
    assert np.isfinite(high).all()
    assert low[1] == low[0]


@pytest.mark.parametrize("target", [0.02, 0.2, 0.5, 0.95, 0.98])
@pytest.mark.parametrize("n", [10, 20, 47, 200])
def test_a_unit_is_called_outside_as_seldom_as_promised(target, n):
    """Reference: binomial tails of scipy; .001 on each side."""
    low, high = _widened(target, np.array([float(n)]), 0.998, 1.0)
    counts = np.arange(n + 1)
    chance = stats.binom.pmf(counts, n, target)
    assert chance[counts / n > high[0]].sum() <= 0.001 + 1e-12
    assert chance[counts / n < low[0]].sum() <= 0.001 + 1e-12


def test_charts_all_alike_leave_doubt():
    done = stratified_share([50, 50], [2, 2], [2, 0])
    assert done.low < 0.35
    assert done.high > 0.65
    whole = stratified_share([2, 2], [2, 2], [2, 0])
    assert whole.low == whole.high == 0.5


def test_the_log_rank_test_refuses_what_it_cannot_ask():
    hours, ended = [5, 50, 60, 70, 80, 90], [0, 1, 1, 1, 1, 1]
    group = ["unknown", "a", "a", "a", "b", "b"]
    found = log_rank(hours, ended, np.array(group))
    alone = log_rank(hours[1:], ended[1:], np.array(group[1:]))
    assert found.df == 1
    assert found.p == pytest.approx(alone.p)
    same = log_rank([9, 9, 9, 9], [1, 1, 1, 1], np.array(list("aabb")))
    assert math.isnan(same.p)
    assert same.refusal


def test_a_median_is_not_bounded_by_the_last_life_watched():
    assert kaplan_meier(np.array([10.0]), np.array([True])).median_high_h is None


def test_one_category_is_no_table_of_agreement():
    with pytest.raises(ValueError, match="2 by 2 at least"):
        agreement([[40]])
    assert math.isnan(agreement([[0, 0], [0, 40]]).kappa)


def test_all_treatments_of_one_patient_tell_as_much_as_one():
    assert float(design_effect(1, 60, 30, 3600, 15.0)) == 60.0
    assert float(design_effect(1, 1, 1, 1, 1.0)) == 1.0


def test_a_sudden_start_lies_inside_its_interval():
    rng = np.random.default_rng(5)
    for _ in range(60):
        at = np.arange(30) * 24.0
        ratio = 1 + rng.normal(0, 0.012, 30)
        ratio[18:] -= 0.1
        found = drift_of(at, ratio, 0.2, 3.0)
        if found.sudden:
            assert found.started_low_h <= found.started_h <= found.started_high_h
            assert found.started_low_h <= 17.5 * 24 <= found.started_high_h


def test_events_as_frequent_as_treatments_are_no_rare_events():
    places = np.arange(20.0)
    assert "too often" in rare_events(places, 25.0)
    assert "too often" in rare_events(np.zeros(12), 5.0)


def test_an_exact_line_has_no_change():
    for slope in np.linspace(-0.3, 0.3, 13):
        found = segmented(slope * np.arange(24), 12)
        assert not found.level_change.shown
        assert not found.slope_change.shown
    step = segmented(np.where(np.arange(24) < 12, 0.3, 0.5), 12)
    assert step.level_change.value == pytest.approx(0.2)
    assert not step.slope_change.shown


def test_small_cells_that_must_all_be_ones_are_not_left_alone():
    hidden = hidden_cells([[1, 1, 20, 30]], [[True, True, False, False]])
    assert hidden.tolist() == [[True, True, True, False]]


def test_an_odds_ratio_of_large_tables_is_finite():
    """Reference: scipy's conditional ratio."""
    found = odds_ratio([[600, 5], [5, 600]])
    reference = stats.contingency.odds_ratio([[600, 5], [5, 600]]).statistic
    assert found.ratio == pytest.approx(reference, rel=1e-6)
    assert found.low < found.ratio < found.high < math.inf
    small = odds_ratio([[8, 2], [1, 5]])
    assert small.ratio == pytest.approx(
        stats.contingency.odds_ratio([[8, 2], [1, 5]]).statistic, rel=1e-6
    )


def test_strata_without_anybody_say_nothing():
    tables = [[[8, 2], [1, 5]], [[0, 0], [0, 0]]]
    alone = mantel_haenszel(tables[:1])
    both = mantel_haenszel(tables)
    assert both.ratio == pytest.approx(alone.ratio)
    assert both.sets_dropped == 1
    assert mantel_haenszel([]).refusal
    twice = [tables[0], [[5, 5], [4, 6]]]
    assert woolf_homogeneity_p([*twice, tables[1]]) == woolf_homogeneity_p(twice)


def test_a_break_stays_inside_its_series():
    values = np.array([0, 0.01] * 4 + [5, 7, 5, 7, 5, 7, 6, 4], float)
    found = one_break(values)
    assert 0 <= found.low <= found.at <= found.high <= len(values)


def test_units_without_any_event_hold_their_estimate():
    done = shrunken([0, 0, 0], [100, 120, 90])
    assert (done.low <= done.rate).all()
    assert (done.rate <= done.high).all()


def test_exposures_of_nothing_give_no_figure():
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        assert math.isnan(poisson_ratio(3, 0.0, 2, 10.0).ratio)
        assert all(math.isnan(v) for v in step_in_counts([3, 2], [1, 0], [0, 1]))
        assert all(math.isnan(v) for v in step_in_counts([3, 0], [1, 1], [0, 1]))
        assert np.isnan(poisson_exact(np.nan, 10.0)).all()
    assert charts_to_find_one(100, 0) is None


def test_points_that_stand_on_nothing_are_left_out_of_a_fit():
    values = np.linspace(0.1, 0.4, 24)
    weights = np.full(24, 20.0)
    weights[3], weights[5] = 0.0, np.nan
    found = segmented(values, 12, weights)
    assert found.before_count == 10


def test_months_of_one_patient_are_not_called_a_change():
    from engine.policy import load_policy
    from engine.reviews.indicators import BY_ID
    from engine.reviews.month_limits import change_of

    months = pd.DataFrame(
        {
            "known": [60.0, 60.0],
            "value": [0.3, 0.72],
            "low": [0.2, 0.6],
            "high": [0.4, 0.8],
            "patients": [1, 1],
        }
    )
    change, _, _ = change_of(months, load_policy("common_practice"), BY_ID["I01"])
    assert change is None
