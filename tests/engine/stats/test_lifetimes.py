"""Lives of filters: the curve by hand, and every way to have none."""

import numpy as np
import pytest

from engine.stats.lifetimes import kaplan_meier, log_rank


def test_a_small_curve_by_hand():
    """Ends at 2, 4, 4; changed early at 3 and 6: 4/5, then 4/5 x 1/3."""
    lives = kaplan_meier([2, 3, 4, 4, 6], [True, False, True, True, False])
    assert list(lives.curve["hours"]) == [2, 4]
    assert lives.curve["surviving_frac"].to_numpy() == pytest.approx([0.8, 4 / 15])
    assert lives.median_h == 4
    assert (lives.lives_count, lives.ended_count) == (5, 3)


def test_greenwoods_variance_by_hand():
    """First step: se = S sqrt(d / (n (n - d))) = .8 sqrt(1 / 20)."""
    lives = kaplan_meier([2, 3, 4, 4, 6], [True, False, True, True, False])
    assert lives.curve["se"].iloc[0] == pytest.approx(0.8 * np.sqrt(1 / 20))


def test_the_interval_stays_between_none_and_all():
    lives = kaplan_meier(np.arange(1, 9), np.ones(8, bool))
    assert (lives.curve["low"] >= 0).all()
    assert (lives.curve["high"] <= 1).all()


def test_a_median_not_reached_is_none():
    lives = kaplan_meier([5, 9, 9, 9], [True, False, False, False])
    assert lives.median_h is None


@pytest.mark.parametrize(
    ("hours", "ended", "why"),
    [
        ([], [], "no lives to follow"),
        ([4.0, 5.0], [False, False], "no life ended while watched"),
        ([0.0, np.nan], [True, True], "no lives to follow"),
    ],
)
def test_no_curve_has_its_reason(hours, ended, why):
    lives = kaplan_meier(hours, ended)
    assert lives.refusal == why
    assert lives.curve.empty


def test_groups_that_cannot_be_compared_say_so():
    assert log_rank([1, 2], [True, True], ["a", "a"]).refusal == "only one group"
    none = log_rank([1, 2], [False, False], ["a", "b"])
    assert none.refusal == "no life ended while watched"
