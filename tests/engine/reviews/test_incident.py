"""The incident review on small logs whose story is written into them."""

from datetime import UTC, datetime

import numpy as np
import pandas as pd
import pytest

from engine.errors import UnknownId
from engine.journal import open_journal
from engine.reviews.incident import incidents, review_fault, review_incident

START = pd.Timestamp("2026-03-01 00:00")
FAULT_DAY = 60.0
NOISE = np.random.default_rng(3).normal(0, 0.008, 200)


def moment(days):
    return START + pd.Timedelta(days=float(days))


def incident(day=FAULT_DAY, ventilator="V1", **changed):
    return {
        "incident_id": "INC-1",
        "ventilator_token": ventilator,
        "happened_at": moment(day),
        "sensor": "expiratory_flow",
        "harm": "none",
        **changed,
    }


def treated(days, state, ventilator="V1", tag="", **changed):
    return [
        {
            "treatment_id": f"T-{ventilator}-{tag}{state or 'unsaid'}-{n:03d}",
            "status": "given",
            "started_at": moment(day),
            "ended_at": moment(day + 0.01),
            "unit_token": "U1",
            "patient_token": f"P-{ventilator}-{n % 3}",
            "ventilator_token": ventilator,
            "drug": "salbutamol",
            "drug_class": "bronchodilator",
            "nominal_dose_mg": 2.5,
            "fill_volume_ml": 3.0,
            "generator": "vibrating_mesh",
            "gas_source": "none",
            "circuit": "dual_limb",
            "site": "inspiratory_limb",
            "humidification": "heated_humidifier",
            "heated_humidifier_on": True,
            "mode": "vcv",
            "synchrony": "continuous",
            "distance_from_wye_cm": 40.0,
            "airway": "endotracheal",
            "tube_id_mm": 8.0,
            "bias_flow_lpm": 2.0,
            "tidal_volume_ml": 480.0,
            "respiratory_rate_bpm": 16.0,
            "inspiratory_time_s": 1.0,
            "expiratory_filter": state,
            **changed,
        }
        for n, day in enumerate(days)
    ]


def checks(ratio_of, days=None, ventilator="V1", passed_until=FAULT_DAY):
    """One check a day at 500 mL; passed up to a day, not judged after it."""
    days = np.arange(1, FAULT_DAY) if days is None else np.asarray(days, float)
    return [
        {
            "check_id": f"C-{ventilator}-{n:03d}",
            "ventilator_token": ventilator,
            "sensor": "expiratory_flow",
            "checked_at": moment(day),
            "outcome": "passed" if day <= passed_until else None,
            "inspired_volume_ml": 500.0,
            "exhaled_volume_ml": 500.0 * (ratio_of(day) + NOISE[n]),
        }
        for n, day in enumerate(days)
    ]


def level(day):
    return 0.98


def falling_from_40(day):
    return 0.98 - 0.15 * np.clip((day - 40) / 20, 0, 1)


def event(kind, day, ventilator="V1", **changed):
    return {
        "event_id": f"E-{kind}-{day:g}",
        "ventilator_token": ventilator,
        "happened_at": moment(day),
        "kind": kind,
        **changed,
    }


FILMED = {
    "incident": [incident()],
    "treatment": [
        *treated(np.arange(36, 60, 0.5), "absent"),
        *treated(np.arange(5, 36, 1.0), "present"),
        *treated([50.2, 52.3], None),
        *treated(np.arange(5, 60, 1.0), "present", "V2"),
    ],
    "sensor_check": [
        *checks(falling_from_40, passed_until=38),
        *checks(level, ventilator="V2"),
    ],
    "service_event": [
        event("alarm", 59.5, code="VTE_LOW"),
        event("fault", 60.0, code="FLOW_RANGE"),
    ],
}
SUDDEN = {
    "incident": [incident()],
    "treatment": treated(np.arange(5, 60, 0.7), "present"),
    "sensor_check": checks(level),
    "service_event": [event("fault", 60.0, code="E42", note="board voltage low")],
}


def grades(review):
    return {e.id: e.grade for e in review.explanations}


def test_a_film_is_consistent_and_first_and_never_more(replayed):
    review = review_incident(replayed(**FILMED), "INC-1")
    assert review.explanations[0].id == "aerosol_film"
    assert review.explanations[0].grade == "consistent"
    assert grades(review)["electronics"] == "against"
    assert "they prove none of it" in review.sentence


def test_the_burden_is_counted_since_the_last_passed_check(replayed):
    """Passed on day 38: 43 unfiltered from day 38.5 on, two that do not say."""
    review = review_incident(replayed(**FILMED), "INC-1")
    burden = review.burden
    assert review.look_back.from_at == moment(38)
    assert (burden.absent_count, burden.unknown_count) == (43, 2)
    assert burden.present_count == 0
    assert (burden.place, burden.of) == (1, 2)
    assert burden.sensor_low_ml <= burden.sensor_ml <= burden.sensor_high_ml
    assert "absent in 43, unknown in 2" in review.sentence


def test_the_drift_has_its_start_within_three_days(replayed):
    review = review_incident(replayed(**FILMED), "INC-1")
    assert abs((review.drift_started_at - moment(40)).total_seconds()) <= 3 * 86400
    assert review.drift.falling


def test_the_rows_behind_the_film_are_those_treatments(replayed):
    review = review_incident(replayed(**FILMED), "INC-1")
    behind = {row for table, row in review.explanations[0].rows if table == "treatment"}
    unfiltered = review.treatments[
        review.treatments["since_check"]
        & (review.treatments["filter_state"] == "absent")
    ]
    assert behind == set(unfiltered["treatment_id"])


def test_a_sudden_fault_puts_electronics_first(replayed):
    review = review_incident(replayed(**SUDDEN), "INC-1")
    assert review.explanations[0].id == "electronics"
    assert grades(review)["aerosol_film"] == "against"
    assert "kept its level up to the fault" in review.sentence


def test_only_an_examination_makes_it_supported(replayed):
    repair = event("repair", 61, note="White residue on the sensor, cleaned")
    review = review_incident(replayed(**{**FILMED, "service_event": [repair]}), "INC-1")
    assert review.explanations[0].grade == "supported"
    assert ("service_event", "E-repair-61") in review.explanations[0].rows
    assert "An engineering record supports aerosol film" in review.sentence


def test_an_examination_that_found_nothing_speaks_against(replayed):
    repair = event("repair", 61, note="No residue seen; loose connector reseated")
    review = review_incident(replayed(**{**FILMED, "service_event": [repair]}), "INC-1")
    assert grades(review)["aerosol_film"] == "against"
    assert grades(review)["electronics"] == "supported"


def test_an_unknown_incident_is_named(replayed):
    with pytest.raises(UnknownId, match="no incident INC-9 in the log"):
        review_incident(replayed(**SUDDEN), "INC-9")


def test_a_fault_that_is_not_in_the_log_can_be_entered(replayed):
    facts = {"ventilator_token": "V1", "happened_at": moment(55)}
    review = review_fault(replayed(**FILMED), facts)
    assert review.sentence.startswith("Ventilator V1, expiratory flow sensor, ")
    assert review.burden.absent_count == 34


def test_no_checks_ever(replayed):
    story = {**FILMED, "sensor_check": []}
    review = review_incident(replayed(**story), "INC-1")
    assert review.look_back.hours_h is None
    assert review.look_back.opened_by == (
        "no passed check of this sensor stands in the log before the fault; the"
        " look-back begins at the ventilator's first record"
    )
    assert review.burden.treatments_count == 48 + 31 + 2
    assert grades(review)["calibration_overdue"] == "no record"
    assert grades(review)["aerosol_film"] == "consistent"
    assert "How long the sensor had been unchecked." in review.not_supported


def test_no_treatments(replayed):
    story = {**SUDDEN, "treatment": []}
    review = review_incident(replayed(**story), "INC-1")
    assert "no treatment is recorded on it" in review.sentence
    assert review.burden.treatments_count == 0
    assert grades(review)["aerosol_film"] in {"no record", "against"}
    assert "no comparable window" in review.windows.sentence


def test_a_fault_before_the_log_begins(replayed):
    story = {**FILMED, "incident": [incident(day=-5)]}
    review = review_incident(replayed(**story), "INC-1")
    assert review.look_back.opened_by == (
        "the fault lies before the ventilator's first record in the log"
    )
    assert review.burden.treatments_count == 0
    assert set(grades(review).values()) <= {"no record", "against"}


def test_a_ventilator_the_log_knows_nothing_else_of(replayed):
    story = {"incident": [incident(ventilator="V7")]}
    review = review_incident(replayed(**story), "INC-1")
    assert review.look_back.opened_by == (
        "the log holds no other record of this ventilator"
    )
    assert {g for e, g in grades(review).items() if e != "external_gas"} == {
        "no record"
    }


def test_clocks_an_hour_apart_are_moved_and_said(replayed):
    """The ventilator's clock an hour slow: its alarm of 11:00 was at 12:00."""
    offset = {
        "ventilator_token": "V1",
        "measured_at": moment(30),
        "offset_s": -3600.0,
    }
    review = review_incident(replayed(**FILMED, clock_offset=[offset]), "INC-1")
    alarm = review.timeline[review.timeline["row_id"] == "E-alarm-59.5"].iloc[0]
    assert alarm["at"] - alarm["at_logged"] == pd.Timedelta(hours=1)
    assert alarm["offset_s"] == -3600
    assert review.clock.over_limit
    assert "clock ran 60 min behind the site's" in review.sentence
    checks_moved = review.timeline[review.timeline["lane"] == "checks"]
    assert (checks_moved["at"] == checks_moved["at_logged"]).all()


def test_a_clock_never_compared_is_said(replayed):
    review = review_incident(replayed(**FILMED), "INC-1")
    assert "was never compared" in review.clock.sentence
    assert any("to the minute" in line for line in review.not_supported)


def test_drained_water_near_a_humid_fault_is_consistent_with_condensate(replayed):
    story = {**SUDDEN, "service_event": [event("drain", 60.1)]}
    assert grades(review_incident(replayed(**story), "INC-1"))["condensate"] == (
        "consistent"
    )


def test_external_gas_running_at_the_fault(replayed):
    story = {
        **SUDDEN,
        "treatment": treated([59.995], "present", gas_source="external"),
    }
    review = review_incident(replayed(**story), "INC-1")
    assert grades(review)["external_gas"] == "consistent"


def test_one_fault_is_told_in_windows_not_in_p(replayed):
    review = review_incident(replayed(**FILMED), "INC-1")
    assert review.windows.sentence.startswith(
        "An unfiltered treatment stood in the window before the fault; it was present"
        " in "
    )
    assert review.pairs.sets_used == 0
    assert any("too few for any test" in line for line in review.not_supported)


def test_ventilators_with_the_same_exposure_are_listed(replayed):
    story = {
        **FILMED,
        "treatment": [
            *FILMED["treatment"],
            *treated(np.arange(40, 60, 1.0), "absent", "V3"),
        ],
    }
    review = review_incident(replayed(**story), "INC-1")
    assert review.exposed_ventilators["ventilator_token"].tolist() == ["V3"]
    assert len(review.patients) == 3


def test_two_raters_and_what_was_decided_come_from_the_journal(replayed, tmp_path):
    journal = open_journal(tmp_path / "journal.jsonl")
    at = datetime(2026, 6, 2, 9, tzinfo=UTC)
    for actor, harm in (("reviewer a", "mild"), ("reviewer b", "moderate")):
        journal.append(
            at=at,
            actor=actor,
            role="therapist",
            action="note",
            object="incident:INC-1",
            new={"harm": harm},
        )
    journal.append(
        at=at,
        actor="reviewer a",
        role="quality lead",
        action="decision",
        object="incident:INC-1",
        new={
            "text": "Circuits with the filter fitted",
            "strength": "stronger",
            "owner_role": "equipment lead",
            "measure": "share with a filter",
            "due": "2026-09-01",
        },
    )
    review = review_incident(replayed(**FILMED), "INC-1", journal)
    assert (
        review.harm_sentence == "2 raters differ: mild, moderate. Settle it together."
    )
    assert review.actions["strength"].tolist() == ["stronger"]
    assert review.actions["owner_role"].tolist() == ["equipment lead"]


@pytest.mark.parametrize(
    ("ratings", "sentence"),
    [
        ([], "Harm as logged: none. Nobody has rated it yet; two should."),
        (["mild"], "One rater says mild; a second rating is missing."),
        (["mild", "mild"], "2 raters agree: mild."),
    ],
)
def test_harm_is_told_as_far_as_it_was_rated(replayed, tmp_path, ratings, sentence):
    journal = open_journal(tmp_path / "journal.jsonl")
    for number, harm in enumerate(ratings):
        journal.append(
            at=datetime(2026, 6, 2, tzinfo=UTC),
            actor=f"reviewer {number}",
            role="therapist",
            action="note",
            object="incident:INC-1",
            new={"harm": harm},
        )
    review = review_incident(replayed(**SUDDEN), "INC-1", journal)
    assert review.harm_sentence == sentence


def test_actions_come_strongest_first_and_none_is_decided(replayed):
    review = review_incident(replayed(**FILMED), "INC-1")
    strengths = review.suggested_actions["strength"].tolist()
    order = ["stronger", "intermediate", "weaker"]
    assert strengths == sorted(strengths, key=order.index)
    assert review.actions.empty


def test_many_faults_allow_a_matched_comparison(replayed):
    """Eight faults, each after an unfiltered day that followed a filtered one: 8, 0."""
    faults, rows = [], []
    for n in range(8):
        ventilator = f"V{n}"
        faults.append(incident(ventilator=ventilator, incident_id=f"INC-{n}"))
        rows += treated([59.5], "absent", ventilator)
        rows += treated([58.5], "present", ventilator)
    review = review_incident(replayed(incident=faults, treatment=rows), "INC-3")
    assert review.faults_count == 8
    assert review.pairs.p == pytest.approx(2 * 0.5**8)
    assert not any("too few for any test" in line for line in review.not_supported)


def test_all_incidents_are_listed_latest_first(replayed):
    story = [incident(), incident(day=10, incident_id="INC-0")]
    listed = incidents(replayed(incident=story))
    assert listed["incident_id"].tolist() == ["INC-1", "INC-0"]
