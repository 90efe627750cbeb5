"""A drop on a rise is found; a rise, straight or bent, is not called a change."""

import numpy as np
import pytest

from engine.stats.breaks import line_and_step, one_break, pettitt

# Two climbs of the same slope with a drop between them; constructed.
CLIMBS = [2.02, 2.07, 2.21, 2.33, 2.38, 2.5, 2.01, 2.08, 2.23, 2.29, 2.42, 2.47]


def test_a_drop_between_two_climbs_is_found_where_it_is():
    """Least squares by hand: slope .0975714, drop -.587095 after six readings."""
    step = line_and_step(np.arange(12), CLIMBS, seed=1)
    assert step.at == 6
    assert (step.after_x, step.before_x) == (5, 6)
    assert step.slope == pytest.approx(0.09757142857)
    assert step.drop == pytest.approx(-0.5870952381)
    assert step.p < 0.01
    assert (step.exact, step.seed) == (False, 1)


@pytest.mark.parametrize("n", [8, 12, 20, 40])
def test_a_straight_rise_is_never_a_change(n):
    """Where Pettitt's test, made for levels, does call it one."""
    rise = 2 + 0.1 * np.arange(n)
    assert line_and_step(np.arange(n), rise).p == 1.0
    if n >= 12:
        assert pettitt(rise).p < 0.05


@pytest.mark.parametrize("bend", [2.0, 3.0, 0.5])
def test_a_rise_that_only_bends_is_never_a_change(bend):
    t = np.arange(15) / 14
    step = line_and_step(t, 2 + 3 * t**bend)
    assert step.at is None
    assert step.p == 1.0


def test_a_step_up_is_not_a_filter_change():
    y = np.r_[np.full(6, 2.0), np.full(6, 3.0)] + np.tile([0.01, -0.01], 6)
    assert not line_and_step(np.arange(12), y).p < 0.05


def test_eight_readings_are_tried_in_every_order():
    y = [2.0, 2.1, 2.25, 2.3, 2.0, 2.15, 2.2, 2.33]
    step = line_and_step(np.arange(8), y)
    assert step.exact
    assert step.arrangements_count == 40_320
    assert step.seed is None


def test_the_same_seed_gives_the_same_p():
    noisy = CLIMBS + np.random.default_rng(5).normal(0, 0.2, 12)
    first = line_and_step(np.arange(12), noisy, seed=7)
    assert first == line_and_step(np.arange(12), noisy, seed=7)


def test_too_few_readings_are_not_searched():
    step = line_and_step(range(7), CLIMBS[:7])
    assert step.refusal == "too few readings to look for a change"
    assert np.isnan(step.p)


def test_readings_of_one_moment_are_not_searched():
    step = line_and_step([4.0] * 9, CLIMBS[:9])
    assert step.refusal == "all readings were taken at one time"


COURSES = {
    "straight": lambda t: 0.01 * t,
    "speeding up": lambda t: 0.00012 * t**2,
    "level": lambda t: 0 * t,
}


@pytest.mark.parametrize("course", COURSES)
def test_false_alarms_stay_near_the_level_asked_for(course):
    """300 filters without a change, the level 5 %; four standard errors."""
    rng = np.random.default_rng(11)
    t = np.arange(14) * 8.0
    alarms = sum(
        line_and_step(t, 2.2 + COURSES[course](t) + rng.normal(0, 0.1, 14)).p <= 0.05
        for _ in range(300)
    )
    assert alarms / 300 < 0.05 + 4 * np.sqrt(0.05 * 0.95 / 300)


def test_a_bend_taken_for_a_straight_line_would_read_as_a_change():
    """Why the rise may bend: the same readings alarm far too often without it."""
    rng = np.random.default_rng(11)
    t = np.arange(20) * 8.0
    alarms = sum(
        line_and_step(
            t, 2.2 + 0.00006 * t**2 + rng.normal(0, 0.1, 20), may_bend=False
        ).p
        <= 0.05
        for _ in range(100)
    )
    assert alarms > 20


def test_one_break_of_a_level_series_without_noise():
    found = one_break(np.r_[np.zeros(10), np.ones(12)])
    assert (found.at, found.low, found.high) == (10, 10, 10)
    assert (found.mean_before, found.mean_after) == (0, 1)


def test_the_interval_of_a_break_covers_as_often_as_it_says():
    """Bai's law by simulation, spreads differing: 300 series, four standard errors."""
    rng = np.random.default_rng(3)
    inside = 0
    for _ in range(300):
        y = np.r_[rng.normal(0, 1, 60), rng.normal(1.2, 1.5, 60)]
        found = one_break(y)
        inside += found.low <= 60 <= found.high
    assert inside / 300 > 0.95 - 4 * np.sqrt(0.95 * 0.05 / 300)


def test_short_level_series_have_no_break():
    assert one_break([1.0, 2.0, 3.0]).refusal == "too few values for two segments"
    assert pettitt([1.0]).refusal == "fewer than two values"
