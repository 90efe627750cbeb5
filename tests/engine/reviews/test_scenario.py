"""What if, on logs where the answer is plain."""

import importlib.util
from pathlib import Path

import pandas as pd
import pytest

from engine.errors import NothingToReview, ScenarioInvalid
from engine.replay import replay, scenario_from
from engine.reviews.scenario import (
    compare_scenarios,
    compared,
    find_scenario,
    ready_scenarios,
)
from engine.stats.changes import filters_needed

_spec = importlib.util.spec_from_file_location(
    "made_month", Path(__file__).with_name("made_month.py")
)
made_month = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(made_month)
treatments = made_month.treatments


def against(done, scenario, period=(None, None)):
    then = replay(done.log, done.policy, scenario)
    try:
        return compared(done, then, scenario, period)
    finally:
        then.close()


def test_every_ready_scenario_is_valid_and_named_after_its_file():
    names = [each.name for each in ready_scenarios()]
    assert len(names) >= 5
    for name in names:
        assert find_scenario(name).name == name


def test_a_filter_everywhere_leaves_the_delivered_dose_alone(replayed):
    rows = treatments("2026-03", 40, expiratory_filter=["present", "absent"])
    done = against(replayed(treatment=rows), find_scenario("filter_on_every_treatment"))
    delivered, room = done.outcome("delivered"), done.outcome("room")
    assert delivered.changed_count == 0
    assert room.changed_count == 20
    assert room.after_where < room.before_where
    assert "cannot" not in done.sentence
    fact = done.facts.iloc[0]
    assert (fact["from_other"], fact["already"], fact["from_unknown"]) == (20, 20, 0)


def test_an_hme_taken_out_lets_more_past_the_tube(replayed):
    rows = treatments(
        "2026-03",
        30,
        humidification="hme",
        heated_humidifier_on=False,
        hme_state="in_line",
        site="wye",
    )
    done = against(replayed(treatment=rows), find_scenario("hme_out"))
    delivered = done.outcome("delivered")
    assert delivered.after > delivered.before
    flags = done.rules.set_index("rule_id").loc["HU01"]
    assert (flags["before"], flags["after"]) == (30, 0)


def test_what_was_not_recorded_is_counted_apart(replayed):
    rows = treatments("2026-03", 30, expiratory_filter=["present", "absent", None])
    done = against(replayed(treatment=rows), find_scenario("filter_on_every_treatment"))
    assert done.facts.iloc[0]["from_unknown"] == 10
    assert "were not recorded and are taken as so" in done.change


def test_a_scenario_that_touches_nothing_says_so(replayed):
    rows = treatments("2026-03", 30, generator="jet", synchrony="continuous")
    done = against(replayed(treatment=rows), find_scenario("mesh_at_humidifier_inlet"))
    assert all(each.changed_count == 0 for each in done.outcomes)
    assert "No estimated share of the dose would change" in done.sentence


def test_longer_hours_need_fewer_filters_and_change_no_dose(replayed):
    rows = treatments("2026-03", 60, drug="colistin", drug_class="anti_infective")
    done = against(replayed(treatment=rows), find_scenario("filter_hours_24"))
    assert done.filters["after"] < done.filters["before"]
    assert done.outcome("room").changed_count == 0


def test_two_ends_of_the_band_stand_around_the_figure(replayed):
    rows = treatments("2026-03", 30, bias_flow_lpm=None, expiratory_filter="absent")
    done = against(replayed(treatment=rows), find_scenario("filter_on_every_treatment"))
    for each in done.outcomes:
        assert each.before_low <= each.before <= each.before_high
        assert each.after_low <= each.after <= each.after_high


def test_an_unknown_column_or_site_is_refused_by_name():
    fact = {"column": "sight", "value": "wye"}
    with pytest.raises(ScenarioInvalid, match="sight"):
        scenario_from({"name": "a", "title": "A", "fact": [fact]})
    fact = {"column": "site", "value": "moon"}
    with pytest.raises(ScenarioInvalid, match="moon"):
        scenario_from({"name": "a", "title": "A", "fact": [fact]})


def test_a_name_that_is_no_scenario_lists_those_there_are():
    with pytest.raises(ScenarioInvalid, match="hme_out"):
        find_scenario("no_such_thing")


def test_an_empty_period_is_refused(replayed):
    done = replayed(treatment=treatments("2026-03", 20))
    with pytest.raises(NothingToReview):
        compare_scenarios(
            done.log, done.policy, find_scenario("hme_out"), ("2027-01", None), done
        )


@pytest.mark.parametrize(
    ("starts", "allowed", "needed"),
    [
        ([], [], 0),
        ([0.0], [24.0], 1),
        ([0, 10, 20, 24, 25], [24.0] * 5, 2),  # 25 h is the first past 24
        ([0, 1, 2, 3], [0.5] * 4, 4),  # a new filter each time
        ([0, 10, 30], [24, 1, 24], 2),  # the drug at 10 h needs a new one
        ([0, 100, 200], [float("nan")] * 3, 1),  # hours not known call for none
    ],
)
def test_filters_are_counted_by_hand(starts, allowed, needed):
    assert filters_needed(starts, allowed) == needed


def test_filters_are_counted_alike_over_a_long_wait():
    starts = pd.Series(range(1000), dtype=float)
    assert filters_needed(starts, [500.0] * 1000) == 2


def test_nothing_to_compare_is_said_and_no_figure_given(replayed):
    done = replayed(
        treatment=[
            {
                "treatment_id": "only",
                "status": "given",
                "started_at": "2026-07-01 08:00",
                "generator": "jet",
                "site": "wye",
                "circuit": "dual_limb",
            }
        ]
    )
    fitted = find_scenario("filter_on_every_treatment")
    found = compare_scenarios(done.log, done.policy, fitted, (None, None), before=done)
    assert found.compared == 0
    assert found.outcomes == ()
    assert "cannot be told" in found.sentence
    assert "0 %" not in found.sentence
