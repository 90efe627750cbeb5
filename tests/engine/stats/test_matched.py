"""Matched comparisons against scipy and statsmodels, and in words where few."""

import numpy as np
import pytest
import statsmodels.api as sm
from scipy.stats import binomtest, fisher_exact
from scipy.stats.contingency import odds_ratio as scipy_odds_ratio
from statsmodels.stats.contingency_tables import StratifiedTable

from engine.stats.matched import (
    NO_DISCORDANT,
    RUNS_AWAY,
    comparable_windows,
    conditional_logistic,
    matched_pairs,
    mcnemar,
    self_controlled,
    sign_flip_p,
    smallest_matched_p,
)
from engine.stats.odds import (
    NO_INFORMATION,
    exact_common_odds_ratio,
    mantel_haenszel,
    odds_ratio,
    woolf_homogeneity_p,
)

RNG = np.random.default_rng(9)
TABLES = RNG.integers(1, 15, size=(4, 2, 2)).tolist()


@pytest.mark.parametrize("table", TABLES)
def test_one_table_agrees_with_scipy(table):
    ours, theirs = odds_ratio(table), scipy_odds_ratio(table)
    ends = theirs.confidence_interval(0.95)
    assert ours.ratio == pytest.approx(theirs.statistic, rel=1e-6)
    assert (ours.low, ours.high) == pytest.approx((ends.low, ends.high), rel=1e-5)
    assert ours.p == pytest.approx(fisher_exact(table).pvalue)


def test_strata_agree_with_statsmodels():
    theirs = StratifiedTable([np.array(t) for t in TABLES])
    ours = mantel_haenszel(TABLES)
    assert ours.ratio == pytest.approx(theirs.oddsratio_pooled)
    assert (ours.low, ours.high) == pytest.approx(theirs.oddsratio_pooled_confint())
    corrected = theirs.test_null_odds(correction=True)
    assert ours.statistic_corrected == pytest.approx(corrected.statistic)


@pytest.mark.parametrize(("b", "c"), [(5, 1), (0, 7), (12, 12)])
def test_pairs_agree_with_the_binomial_test(b, c):
    done = matched_pairs(b, c)
    law = binomtest(b, b + c)
    ends = law.proportion_ci(0.95)
    assert done.p == pytest.approx(law.pvalue)
    assert done.low == pytest.approx(ends.low / (1 - ends.low))
    expected = ends.high / (1 - ends.high) if ends.high < 1 else np.inf
    assert done.high == pytest.approx(expected)


def test_few_faults_can_never_reach_a_small_p():
    """2 / 2^m: five differing pairs stop at .0625."""
    assert smallest_matched_p(5) == 0.0625
    assert smallest_matched_p(6) == 0.03125
    assert matched_pairs(5, 0).p == 0.0625


def test_pairs_that_do_not_differ_say_nothing():
    done = matched_pairs(0, 0)
    assert done.refusal == NO_DISCORDANT
    assert (done.low, done.high, done.p) == (0.0, np.inf, 1.0)
    assert mcnemar([[5, 0], [0, 5]]).refusal == NO_DISCORDANT


def test_strata_without_information_are_counted_out():
    done = exact_common_odds_ratio([[[0, 0], [3, 4]], [[2, 5], [0, 0]]])
    assert done.refusal == NO_INFORMATION
    assert done.sets_dropped == 2
    assert mantel_haenszel([[[0, 0], [3, 4]]]).refusal == NO_INFORMATION


def test_an_empty_cell_leaves_one_end_open():
    done = odds_ratio([[5, 0], [3, 4]])
    assert done.high == np.inf
    assert np.isfinite(done.low)


def test_strata_that_differ_are_not_alike():
    assert woolf_homogeneity_p([[[20, 2], [2, 20]], [[2, 20], [20, 2]]]) < 0.001
    assert woolf_homogeneity_p([[[9, 3], [4, 8]], [[9, 3], [4, 8]]]) > 0.99


def test_one_exposure_one_control_is_the_matched_odds_ratio():
    """1:1 conditional likelihood has b / c as its maximum: 9 and 3."""
    pairs = [(1, 0)] * 9 + [(0, 1)] * 3 + [(1, 1)] * 4
    stratum = np.repeat(np.arange(16), 2)
    case = np.tile([1, 0], 16)
    done = conditional_logistic(stratum, case, np.array(pairs).ravel())
    assert done.ratio[0] == pytest.approx(3)
    assert (done.sets_used, done.sets_dropped) == (12, 4)


def test_a_separated_comparison_has_no_estimate():
    stratum, case = np.repeat(np.arange(8), 3), np.tile([1, 0, 0], 8)
    done = conditional_logistic(stratum, case, case.astype(float))
    assert done.refusal == RUNS_AWAY
    alike = conditional_logistic(stratum, case, np.ones(24))
    assert alike.refusal == NO_DISCORDANT


def test_self_controlled_rates_agree_with_a_poisson_fit_with_one_level_a_unit():
    """The conditional and the fixed-effects Poisson likelihoods share their maximum."""
    unit, time = np.repeat(np.arange(20), 4), RNG.uniform(5, 50, 80)
    x = np.column_stack([np.tile([0, 1, 0, 1], 20), np.tile([0, 0, 1, 1], 20)])
    events = RNG.poisson(time * 0.05 * np.exp(x @ [1.0, 0.4]))
    done = self_controlled(unit, events, time, x)
    with_events = [u for u in range(20) if events[unit == u].sum()]
    kept = np.isin(unit, with_events)
    levels = np.column_stack([unit == u for u in with_events]).astype(float)
    theirs = sm.GLM(
        events[kept],
        np.column_stack([x, levels])[kept],
        family=sm.families.Poisson(),
        offset=np.log(time[kept]),
    ).fit()
    assert done.beta == pytest.approx(theirs.params[:2], rel=1e-5)
    assert done.se == pytest.approx(theirs.bse[:2], rel=1e-4)


def test_all_signs_are_tried_where_they_are_few():
    """Six differences all positive: 2 of 64 sign patterns do as well."""
    assert sign_flip_p([1.0, 2, 1, 3, 1, 2]) == (2 / 64, 64, True)


def test_darwins_plants_over_all_signs():
    """Fisher 1935, section 21 (from memory): 863 of 32,768 on one side, p .0527."""
    eighths = [49, -67, 8, 16, 6, 23, 28, 41, 14, 29, 56, 24, 75, 60, -48]
    p, tried, whole = sign_flip_p(eighths)
    assert whole
    assert tried == 32_768
    assert round(p * tried) == 2 * 863


def test_convictions_of_twins_both_ways():
    """Fisher 1962 (from memory): 2, 15 / 10, 3; p .0005367, less .0004652."""
    done = odds_ratio([[2, 15], [10, 3]])
    assert done.p == pytest.approx(0.0005367, abs=5e-8)
    assert done.p_less == pytest.approx(0.0004652, abs=5e-8)
    # The printed ratio comes from a search that stops in the seventh place.
    assert done.ratio == pytest.approx(0.04693661, abs=5e-8)


def test_many_differences_are_sampled_with_a_seed():
    values = RNG.normal(0.3, 1, 40)
    p, tried, whole = sign_flip_p(values, seed=1)
    assert (tried, whole) == (9999, False)
    assert sign_flip_p(values, seed=1)[0] == p


@pytest.mark.parametrize(
    ("windows", "before", "sentence"),
    [
        (
            [1, 1, 0, 0, -1],
            True,
            "An unfiltered treatment stood in the window before the fault; it was"
            " present in 2 of 4 comparable windows; 1 more does not say.",
        ),
        (
            [0],
            False,
            "An unfiltered treatment did not stand in the window before the fault; it"
            " was present in 0 of 1 comparable window.",
        ),
        (
            [],
            None,
            "Whether an unfiltered treatment stood in the window before the fault is"
            " not recorded; there is no comparable window of this ventilator to hold"
            " it against.",
        ),
    ],
)
def test_one_fault_is_told_in_words(windows, before, sentence):
    done = comparable_windows(
        np.array(windows, dtype=int), before, "an unfiltered treatment"
    )
    assert done.sentence == sentence
