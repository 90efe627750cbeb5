"""How each explanation is graded, from evidence put together by hand."""

import pandas as pd
import pytest

from engine.reviews.explanations import (
    AGAINST,
    CONSISTENT,
    GRADES,
    NO_RECORD,
    SPECS,
    SUPPORTED,
    Condition,
    Evidence,
    explain,
    grade_of,
)

AT = pd.Timestamp("2026-05-29 02:00")
BARE = {"at": AT, "hours_since_check_h": None, "check_interval_h": 720.0}
UNFILTERED = tuple(("treatment", f"T{n}") for n in range(12))
FILMED = {
    "treatments_ever": True,
    "absent": UNFILTERED,
    "first_unfiltered_at": pd.Timestamp("2026-05-01"),
    "drifting": True,
    "drift_sudden": False,
    "drift_falling": True,
    "drift_started_at": pd.Timestamp("2026-05-08"),
    "burden_place": 1,
    "burden_of": 8,
    "hours_since_check_h": 200.0,
}
SUDDEN = {
    "treatments_ever": True,
    "present": (("treatment", "T1"),),
    "drifting": False,
    "fault_events": (("service_event", "E1"),),
    "hours_since_check_h": 200.0,
}


def told(**known):
    made = explain(Evidence(**{**BARE, **known}))
    return {e.id: e for e in made}, made


def test_nothing_on_record_is_no_record_throughout():
    by_id, made = told()
    grades = {e.grade for e in made}
    assert grades == {NO_RECORD}
    assert by_id["aerosol_film"].sentence.startswith("The records do not say whether")


def test_a_slow_drift_after_unfiltered_aerosol_puts_the_film_first():
    by_id, made = told(**FILMED)
    assert made[0].id == "aerosol_film"
    assert made[0].grade == CONSISTENT
    assert by_id["electronics"].grade == AGAINST
    assert set(UNFILTERED) <= set(made[0].rows)


def test_a_sudden_fault_with_filters_throughout_puts_electronics_first():
    by_id, made = told(**SUDDEN)
    assert made[0].id == "electronics"
    assert by_id["aerosol_film"].grade == AGAINST
    assert "every treatment since the last passed check had its filter" in (
        by_id["aerosol_film"].sentence
    )


@pytest.mark.parametrize("spec", SPECS, ids=lambda spec: spec.id)
def test_without_an_examination_nothing_is_ever_supported(spec):
    everything = {
        **FILMED,
        "humid_near": True,
        "water_events": (("service_event", "E2"),),
        "filter_state": "over_limit",
        "gas_running": True,
        "circuit_events": (("service_event", "E3"),),
        "valve_events": (("service_event", "E4"),),
        "sensor_age_rank": (1, 8),
    }
    assert told(**everything)[0][spec.id].grade != SUPPORTED


@pytest.mark.parametrize("spec", SPECS, ids=lambda spec: spec.id)
def test_an_examination_decides_either_way(spec):
    rows = (("service_event", "E9"),)
    found, _ = told(examined={spec.id: True}, examination_rows=rows)
    assert found[spec.id].grade == SUPPORTED
    assert rows[0] in found[spec.id].rows
    denied, _ = told(**FILMED, examined={spec.id: False}, examination_rows=rows)
    assert denied[spec.id].grade == AGAINST


@pytest.mark.parametrize(
    ("changed", "grade"),
    [
        ({"absent": (), "unknown": (("treatment", "T1"),)}, NO_RECORD),
        ({"absent": (), "present": (("treatment", "T1"),)}, AGAINST),
        ({"absent": ()}, AGAINST),
        ({"absent": (), "treatments_ever": False}, NO_RECORD),
        ({"drift_sudden": True}, AGAINST),
        ({"drifting": False, "drift_started_at": None}, AGAINST),
        ({"drifting": None, "drift_started_at": None}, CONSISTENT),
        ({"drift_started_at": pd.Timestamp("2026-04-01")}, AGAINST),
        (
            {"drift_started_at": pd.Timestamp("2026-04-01"), "unknown_ever": True},
            CONSISTENT,
        ),
    ],
)
def test_what_moves_the_film(changed, grade):
    assert told(**{**FILMED, **changed})[0]["aerosol_film"].grade == grade


@pytest.mark.parametrize(
    ("known", "explanation", "grade"),
    [
        ({"humid_near": True}, "condensate", NO_RECORD),
        ({"humid_near": False}, "condensate", AGAINST),
        (
            {"humid_near": True, "water_events": (("service_event", "E1"),)},
            "condensate",
            CONSISTENT,
        ),
        ({"filter_state": "near_limit"}, "filter_loading", CONSISTENT),
        ({"filter_state": "rising"}, "filter_loading", AGAINST),
        # A few unfiltered treatments, and no volume was ever written down.
        ({"absent": UNFILTERED[:3], "drifting": None}, "aerosol_film", NO_RECORD),
        ({"filter_state": "steady"}, "filter_loading", AGAINST),
        ({"filter_state": "too_few_readings"}, "filter_loading", NO_RECORD),
        ({"gas_running": True}, "external_gas", CONSISTENT),
        ({"gas_running": False}, "external_gas", AGAINST),
        (
            {"gas_running": True, "drifting": True, "drift_falling": True},
            "external_gas",
            AGAINST,
        ),
        ({"hours_since_check_h": 721.0}, "calibration_overdue", CONSISTENT),
        ({"hours_since_check_h": 720.0}, "calibration_overdue", AGAINST),
        (
            {"circuit_events": (("service_event", "E1"),)},
            "circuit_change",
            CONSISTENT,
        ),
        (
            {"kinds_ever": frozenset({"circuit_change"})},
            "circuit_change",
            AGAINST,
        ),
        (
            {"kinds_ever": frozenset({"alarm"})},
            "circuit_change",
            NO_RECORD,
        ),
        (
            {"valve_events": (("service_event", "E1"),)},
            "exhalation_valve",
            CONSISTENT,
        ),
        ({"sensor_age_rank": (1, 8)}, "sensor_age", CONSISTENT),
        ({"sensor_age_rank": (7, 8)}, "sensor_age", AGAINST),
        ({"sensor_age_rank": (1, 1)}, "sensor_age", NO_RECORD),
    ],
)
def test_each_explanation_has_its_own_conditions(known, explanation, grade):
    assert told(**known)[0][explanation].grade == grade


def test_every_explanation_says_what_would_refute_and_what_would_settle_it():
    for explanation in told()[1]:
        assert explanation.refuted_by.endswith(".")
        assert explanation.settled_by.endswith(".")


def test_grades_come_best_first():
    places = [GRADES.index(e.grade) for e in told(**FILMED)[1]]
    assert places == sorted(places)


def test_one_missing_answer_is_enough_for_no_record():
    yes = Condition(role="needed", text="a", holds=True)
    unsaid = Condition(role="needed", text="b", holds=None)
    assert grade_of([yes, unsaid]) == NO_RECORD
    assert grade_of([yes]) == CONSISTENT
    assert grade_of([]) == NO_RECORD
