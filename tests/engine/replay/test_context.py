"""What stood around a treatment: the last record before it, and no guess."""

import pandas as pd
import pytest

from engine.policy import load_policy
from engine.replay import replay

from .conftest import STARTED, treatments

POLICY = load_policy()


def at(hours):
    return STARTED + pd.Timedelta(hours=hours)


@pytest.fixture
def context(logged):
    done = []

    def run(**tables):
        done.append(replay(logged(**tables), POLICY))
        return done[-1].frame("FROM context ORDER BY treatment_id").astype(object)

    yield run
    for one in done:
        one.close()


def missing(values):
    return [pd.isna(value) for value in values]


def test_month_and_shift_are_local(context):
    rows = treatments(1, started_at=pd.Timestamp("2026-06-30 23:30"), ended_at=None)
    found = context(treatment=rows).iloc[0]
    # 23:30 UTC is 00:30 in Dublin's summer time (tz database, by zoneinfo).
    assert (found["local_month"], found["shift"]) == ("2026-07", "night")


def test_a_filter_is_found_by_name_or_by_being_mounted_then(context):
    uses = [
        {"filter_id": "old", "ventilator_token": "v1", "installed_at": at(-50)}
        | {"removed_at": at(2)},
        {"filter_id": "new", "ventilator_token": "v1", "installed_at": at(3)}
        | {"removed_at": None},
    ]
    rows = treatments(3, filter_id=[None, None, "old"])
    found = context(treatment=rows, filter_use=uses)
    assert found["filter_in_use_id"].tolist() == ["old", "new", "old"]
    assert found["filter_age_h"].tolist() == [50.0, 1.0, 58.0]


def test_no_filter_is_guessed_between_two_or_for_an_absent_one(context):
    uses = [
        {"filter_id": "old", "ventilator_token": "v1", "installed_at": at(-50)}
        | {"removed_at": at(-1)},
        {"filter_id": "new", "ventilator_token": "v1", "installed_at": at(3)}
        | {"removed_at": None},
    ]
    rows = treatments(2, expiratory_filter=["present", "absent"])
    found = context(treatment=rows, filter_use=uses)
    assert all(missing(found["filter_in_use_id"]))


def test_the_last_reading_before_the_start_counts_not_the_next(context):
    uses = [{"filter_id": "f", "ventilator_token": "v1", "installed_at": at(-10)}]
    readings = [
        {"reading_id": f"r{n}", "filter_id": "f", "read_at": at(hours)}
        | {"flow_lpm": 60.0, "pressure_drop_cmh2o": drop}
        for n, (hours, drop) in enumerate([(-1, 2.5), (1, 3.5)])
    ]
    found = context(treatment=treatments(2), filter_use=uses, filter_reading=readings)
    # dP / V at 60 L/min, that is 1 L/s: the figure is the pressure drop itself.
    assert found["filter_reading_cmh2o_per_lps"].tolist() == [2.5, 3.5]
    assert found["filter_reading_in_window"].tolist() == [True, True]


def test_unfiltered_treatments_are_counted_from_the_last_check_that_put_it_right(
    context,
):
    rows = treatments(4, expiratory_filter="absent")
    checks = [
        {"check_id": "c", "ventilator_token": "v1", "sensor": "expiratory_flow"}
        | {"checked_at": at(5), "outcome": "passed"}
    ]
    found = context(treatment=rows, sensor_check=checks)
    counts = found["unfiltered_since_check_count"]
    assert missing(counts) == [True, True, False, False]
    assert counts.tolist()[2:] == [1, 2]


def test_a_count_that_silence_could_lift_over_the_limit_is_not_known(context):
    limit = POLICY.sensors.unfiltered_since_check_count
    states = ["absent"] * (limit - 1) + [None]
    rows = treatments(limit, every_h=1.0, expiratory_filter=states)
    checks = [
        {"check_id": "c", "ventilator_token": "v1", "sensor": "expiratory_flow"}
        | {"checked_at": at(-1), "outcome": "passed"}
    ]
    counts = context(treatment=rows, sensor_check=checks).set_index("treatment_id")[
        "unfiltered_since_check_count"
    ]
    assert counts[f"t{limit - 2}"] == limit - 1
    assert pd.isna(counts[f"t{limit - 1}"])


def test_no_fault_is_only_said_where_later_records_show_none(context):
    rows = treatments(2, ventilator_token=["v1", "v2"])
    events = [
        {"event_id": "e", "ventilator_token": "v1", "kind": "self_test"}
        | {"happened_at": at(200)}
    ]
    soon = context(treatment=rows, service_event=events)["fault_soon_after"]
    assert soon.iloc[0] is False or soon.iloc[0] == False  # noqa: E712
    assert pd.isna(soon.iloc[1])


def test_the_clock_offset_is_the_last_measured_else_the_first_after(context):
    offsets = [
        {"ventilator_token": "v1", "measured_at": at(hours), "offset_s": offset}
        for hours, offset in [(1, -1440.0), (5, 0.0)]
    ]
    found = context(treatment=treatments(3), clock_offset=offsets)
    assert found["clock_offset_s"].tolist() == [-1440.0, -1440.0, 0.0]


def test_one_row_a_treatment_even_with_records_at_one_moment(context):
    checks = [
        {"check_id": f"c{n}", "ventilator_token": "v1", "sensor": "expiratory_flow"}
        | {"checked_at": at(-1), "outcome": outcome}
        for n, outcome in enumerate(["failed", "passed"])
    ]
    uses = [
        {"filter_id": f"f{n}", "ventilator_token": "v1", "installed_at": at(-10)}
        for n in range(2)
    ]
    found = context(treatment=treatments(3), sensor_check=checks, filter_use=uses)
    assert len(found) == 3
