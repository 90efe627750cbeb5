"""A date with its interval, or the reason there is none."""

import numpy as np
import pytest

from engine.stats.forecast import (
    ALREADY_THERE,
    BEYOND_HORIZON,
    NO_SPREAD,
    SLOPE_MAY_BE_ZERO,
    TOO_FEW,
    fieller_forecast,
    pivot_forecast,
)

HOURS = np.arange(10) * 6.0
WOBBLE = 0.02 * np.tile([1, -1], 5)


def test_a_straight_line_reaches_the_limit_where_it_must():
    """2 + .04 h reaches 5 at hour 75."""
    ahead = pivot_forecast(HOURS, 2 + 0.04 * HOURS, 5.0)
    assert ahead.at == pytest.approx(75)
    assert ahead.refusal == ""


def test_robust_and_least_squares_forms_agree_on_clean_readings():
    y = 2 + 0.04 * HOURS + WOBBLE
    pivot, line = pivot_forecast(HOURS, y, 5.0), fieller_forecast(HOURS, y, 5.0)
    assert pivot.at == pytest.approx(line.at, rel=0.02)
    assert pivot.low < line.at < pivot.high


@pytest.mark.parametrize(
    ("times", "values", "limit", "why"),
    [
        (HOURS[:5], 2 + 0.04 * HOURS[:5], 5, TOO_FEW),
        (HOURS, 2 + WOBBLE, 5, SLOPE_MAY_BE_ZERO),
        (HOURS, 2 - 0.01 * HOURS, 5, SLOPE_MAY_BE_ZERO),
        (HOURS, 2 + 0.04 * HOURS, 4, ALREADY_THERE),
        (HOURS, 2 + 0.01 * HOURS, 5, BEYOND_HORIZON),
        (np.full(10, 3.0), 2 + 0.04 * HOURS, 5, NO_SPREAD),
    ],
)
def test_each_refusal_has_its_name_and_no_date(times, values, limit, why):
    ahead = pivot_forecast(times, values, limit)
    assert ahead.refusal == why
    assert np.isnan(ahead.at)


def test_the_horizon_can_be_lifted():
    ahead = pivot_forecast(HOURS, 2 + 0.01 * HOURS, 5, horizon_spans=np.inf)
    assert ahead.at == pytest.approx(300)


def test_an_end_beyond_the_horizon_is_open():
    y = 2 + 0.03 * HOURS + 0.2 * np.tile([1, -1, -1, 1, 0], 2)
    ahead = pivot_forecast(HOURS, y, 4.8)
    assert ahead.refusal == ""
    assert ahead.high == np.inf


def test_a_slope_that_may_be_zero_has_no_finite_answer():
    """Fieller's g is at least 1: the whole line or two half-lines; constructed."""
    ahead = fieller_forecast(range(5), [1.0, 1.3, 0.9, 1.2, 1.1], 3)
    assert ahead.refusal == SLOPE_MAY_BE_ZERO
    assert ahead.g > 1


def test_a_single_reading_is_less_certain_than_the_mean():
    y = 2 + 0.04 * HOURS + WOBBLE
    mean = fieller_forecast(HOURS, y, 5)
    single = fieller_forecast(HOURS, y, 5, single=True)
    assert single.high - single.low > mean.high - mean.low


def test_several_readings_of_one_time_tighten_it():
    y = 2 + 0.04 * HOURS + WOBBLE
    one = fieller_forecast(HOURS, y, [3.5], single=True)
    four = fieller_forecast(HOURS, y, [3.49, 3.51, 3.52, 3.48], single=True)
    assert four.high - four.low < one.high - one.low
