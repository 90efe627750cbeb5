"""Readings on one footing: Rohrer's identities and every reason for doubt."""

import numpy as np
import pytest

from engine.stats.footing import (
    DOUBTS,
    at_reference_flow,
    flow_implied_lps,
    k2_from_sittings,
    pressure_drop_of,
    rohrer_fit,
    rohrer_from_pair,
    with_doubts_in_place,
)

NAN = np.nan


def doubts(readings):
    return [DOUBTS[code] for code in readings["doubt"]]


def test_the_pair_goes_through_both_points():
    """K2 = (R60 - R30) / .5 and K1 = 2 R30 - R60, at .5 and 1 L/s: algebra."""
    pair = rohrer_from_pair(0.5, 1.8, 1.0, 2.4)
    assert pair.k2_cmh2o_per_lps2 == pytest.approx((2.4 - 1.8) / 0.5)
    assert pair.k1_cmh2o_per_lps == pytest.approx(2 * 1.8 - 2.4)
    assert flow_implied_lps(1.2, 1.2, 1.8) == pytest.approx(0.5)


def test_two_equal_flows_give_no_pair():
    with pytest.raises(ValueError, match="two different flows are needed"):
        rohrer_from_pair(0.5, 1.8, 0.5, 1.9)


def test_a_fit_through_clean_points_gives_the_pair_back():
    flows = np.array([0.25, 0.5, 0.75, 1.0])
    done = rohrer_fit(flows, pressure_drop_of(1.2, 0.8, flows))
    assert done.k1_cmh2o_per_lps == pytest.approx(1.2)
    assert done.k2_cmh2o_per_lps2 == pytest.approx(0.8)
    assert done.k2_low <= done.k2_high


def test_a_negative_k2_keeps_its_sign_and_its_interval():
    flows = np.array([0.25, 0.5, 0.75, 1.0])
    drops = pressure_drop_of(2.0, -0.05, flows) + 0.02 * np.array([1, -1, 1, -1])
    done = rohrer_fit(flows, drops)
    assert done.k2_cmh2o_per_lps2 < 0
    assert done.k2_low < done.k2_cmh2o_per_lps2 < done.k2_high


def test_with_k2_readings_at_any_flow_give_one_resistance():
    """R(1 L/s) = K1 + K2 whatever the flow it was read at."""
    flow = np.array([20.0, 30, 45, 60, 75])
    drop = pressure_drop_of(1.4, 0.9, flow / 60)
    done = at_reference_flow(flow, drop, 60, 0.1, 0.9)
    assert done["resistance_cmh2o_per_lps"] == pytest.approx(np.full(5, 2.3))
    assert set(done["footing"]) == {1}


def test_without_k2_only_flows_near_the_reference_are_compared():
    done = at_reference_flow([54, 66, 53.9, 66.1, 60], [2.0] * 5, 60, 0.1)
    assert [bool(text) for text in doubts(done)] == [False, False, True, True, False]
    assert doubts(done)[2].startswith("taken at another flow")


@pytest.mark.parametrize(
    ("flow", "drop", "why"),
    [
        (60, NAN, "no pressure drop was written down"),
        (NAN, 2.0, "no flow was written down"),
        (0, 2.0, "no flow was written down"),
        (60, 0.0, "the pressure drop reads zero"),
        (60, 99.0, "the pressure drop is beyond what can be measured"),
    ],
)
def test_each_doubt_has_its_name_and_no_resistance(flow, drop, why):
    done = at_reference_flow([flow], [drop], 60, 0.1, 0.5)
    assert doubts(done) == [why]
    assert np.isnan(done["resistance_cmh2o_per_lps"][0])


def placed(values, from_ventilator, hours=None, code=None, **more):
    n = len(values)
    return with_doubts_in_place(
        np.zeros(n, int) if code is None else np.asarray(code),
        np.arange(n, dtype=float) if hours is None else np.asarray(hours, float),
        at_reference_flow([60] * n, values, 60, 0.1),
        np.broadcast_to(np.asarray(from_ventilator, bool), (n,)),
        **more,
    )


TUBE = "looks like the resistance of tube and airways, not of the filter"


def test_a_high_value_between_two_low_ones_is_doubted():
    assert doubts(placed([2.2, 12, 2.3], False)) == ["", TUBE, ""]


def test_a_high_last_value_counts_unless_the_ventilator_showed_it():
    assert doubts(placed([2.2, 2.3, 12], False)) == ["", "", ""]
    assert doubts(placed([2.2, 2.3, 12], True)) == ["", "", TUBE]


def test_a_filter_that_runs_away_is_believed():
    assert doubts(placed([2.2, 3.5, 5.5, 7.9, 8.5, 11], True)) == [""] * 6


def test_readings_of_the_airway_throughout_are_doubted_throughout():
    assert doubts(placed([11, 12, 13], True)) == [TUBE] * 3


def test_neighbours_on_another_filter_do_not_count():
    done = placed([2.2, 9, 9.5, 2.1], False, code=[0, 1, 1, 2])
    assert doubts(done) == [""] * 4


def test_readings_outside_the_filters_time_are_named():
    done = placed([2.2, 2.3, 2.4], False, hours=[-1, 5, 30], removed_h=24.0)
    assert doubts(done) == [
        "taken before the filter was installed",
        "",
        "taken after the filter was removed",
    ]


def test_k2_comes_from_the_new_filter_or_from_its_class():
    """Two filters of class 0 read at two flows when new; a third never was."""
    flow = np.array([30.0, 60, 30, 60, 60, 60])
    seen = np.array([1.8, 2.3, 1.9, 2.2, 2.4, 2.5])
    done = k2_from_sittings(
        np.array([0, 0, 1, 1, 2, 3]),
        np.zeros(6),
        flow,
        seen,
        np.array([0, 0, 0, 0, 0, 1]),
        new_within_h=1.0,
    )
    k2 = done["k2_cmh2o_per_lps2"]
    assert k2[:5] == pytest.approx([1.0, 1.0, 0.6, 0.6, 0.8])
    assert np.isnan(k2[5])
    assert list(done["k2_of"]) == [2, 2, 2, 2, 1, 0]


def test_no_readings_at_all_are_no_trouble():
    empty = np.empty(0)
    done = at_reference_flow(empty, empty, 60, 0.1)
    with_doubts_in_place(empty.astype(int), empty, done, empty.astype(bool))
    k2_from_sittings(empty.astype(int), empty, empty, empty, empty.astype(int), 1.0)
