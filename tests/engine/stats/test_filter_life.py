"""One filter's life, told from made readings whose truth is known."""

import numpy as np
import pytest

from engine.stats.filter_life import life_of

HOURS = np.arange(12) * 6.0
NOISE = np.random.default_rng(4).normal(0, 0.04, 12)


def life(hours, resistance, **changed):
    asked = {
        "limit": 5.0,
        "near_frac": 0.8,
        "min_readings": 6,
        "rising_p": 0.05,
        "change_p": 0.05,
        "seed": 3,
    }
    return life_of(np.asarray(hours), np.asarray(resistance), **{**asked, **changed})


def test_a_steady_filter_is_steady():
    done = life(HOURS, 2.3 + NOISE)
    assert done.state == "steady"
    assert done.rising_since_h is None
    assert done.suspected_change_h is None
    assert done.forecast_refusal == "the slope's lower bound is not above zero"


def test_a_loading_filter_rises_and_has_a_date():
    """2.2 + .028 h reaches 5 at hour 100, 34 h after the last reading."""
    done = life(HOURS, 2.2 + 0.028 * HOURS + NOISE, near_frac=0.99)
    assert done.state == "rising"
    assert done.time_to_limit_low_h < 34 < done.time_to_limit_high_h
    assert done.slope_low < 0.028 < done.slope_high
    assert 30 <= done.rising_since_h <= 42


@pytest.mark.parametrize(
    ("last", "state"), [(5.1, "over_limit"), (4.2, "near_limit"), (4.0, "near_limit")]
)
def test_the_last_reading_decides_near_and_over(last, state):
    assert life([0, 10], [2.2, last]).state == state


def test_exactly_at_the_limit_is_not_over_it():
    assert life([0, 10], [2.2, 5.0]).state == "near_limit"


def test_an_unlogged_change_splits_the_life():
    y = 2.2 + 0.05 * (HOURS % 36) + NOISE
    done = life(HOURS, y)
    assert done.suspected_change_h == 36
    assert done.change_p < 0.01
    assert done.change_drop_cmh2o_per_lps == pytest.approx(-1.8, abs=0.2)
    assert [s.begins_with for s in done.segments] == [
        "installation",
        "suspected change",
    ]
    assert done.segments[1].from_h == 36


def test_a_logged_change_splits_the_life_without_suspicion():
    y = 2.2 + 0.05 * (HOURS % 36) + NOISE
    done = life(HOURS, y, logged_changes_h=[33.0])
    assert done.suspected_change_h is None
    assert done.segments[1].begins_with == "logged change"


def test_two_unlogged_changes_are_both_found():
    hours = np.arange(30) * 6.0
    noise = np.random.default_rng(8).normal(0, 0.03, 30)
    done = life(hours, 2.2 + 0.05 * (hours % 60) + noise)
    assert done.suspected_changes_h == (60.0, 120.0)


def test_a_straight_rise_is_not_a_change():
    done = life(HOURS, 2 + 0.04 * HOURS)
    assert done.change_p == 1.0
    assert done.suspected_change_h is None


@pytest.mark.parametrize(
    ("hours", "values", "note"),
    [
        ([], [], "no readings that can be used"),
        ([4.0], [2.2], "one reading: nothing can be said of a trend"),
        ([4.0, 4.0, 4.0], [2.2, 2.2, 2.2], "every reading is the same"),
        ([1.0, 2.0], [2.2, 2.3], "too few readings to look for an unlogged change"),
    ],
)
def test_a_life_too_short_says_so(hours, values, note):
    done = life(hours, values)
    assert done.state == "too_few_readings"
    assert done.note == note
    assert done.slope_per_h is None


def test_readings_before_installation_and_missing_ones_are_counted_not_used():
    done = life([-5.0, 0, 6, 12, np.nan], [9.0, 2.2, 2.3, np.nan, 2.2])
    assert (done.readings_count, done.left_out_count) == (2, 3)


def test_readings_over_range_are_over_the_limit_and_out_of_the_slope():
    y = np.r_[2.2 + 0.02 * HOURS[:10], np.inf, np.inf]
    done = life(HOURS, y)
    assert done.state == "over_limit"
    assert done.over_range_count == 2
    assert done.slope_per_h == pytest.approx(0.02)
    assert done.forecast_refusal == "the limit is already reached"


def test_a_flag_that_later_readings_do_not_bear_out_is_withdrawn():
    y = np.r_[2.0 + 0.1 * np.arange(6), 2.2, 2.0, 2.3, 2.1, 2.2, 2.0]
    assert life(HOURS, y, change_p=1e-6).rising_since_h is None


def test_only_ties_with_one_step_do_not_break_it():
    done = life(HOURS, np.r_[np.full(6, 2.3), np.full(6, 2.2)])
    assert done.state in {"steady", "rising"}
    assert done.readings_count == 12
