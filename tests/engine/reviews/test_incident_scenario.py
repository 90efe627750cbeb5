"""The same history with filters on: less at the sensor, never more."""

import pandas as pd
import pytest

from engine.reviews.incident import review_fault
from engine.reviews.incident_scenario import other_history

START = pd.Timestamp("2026-03-01")
SETUP = {
    "status": "given",
    "unit_token": "U1",
    "patient_token": "P1",
    "ventilator_token": "V1",
    "drug_class": "bronchodilator",
    "nominal_dose_mg": 2.5,
    "fill_volume_ml": 3.0,
    "generator": "vibrating_mesh",
    "synchrony": "continuous",
    "circuit": "dual_limb",
    "site": "inspiratory_limb",
    "distance_from_wye_cm": 40.0,
    "humidification": "heated_humidifier",
    "heated_humidifier_on": True,
    "airway": "endotracheal",
    "tube_id_mm": 8.0,
    "mode": "vcv",
    "bias_flow_lpm": 2.0,
    "tidal_volume_ml": 480.0,
    "respiratory_rate_bpm": 16.0,
    "inspiratory_time_s": 1.0,
}
FACTS = {"ventilator_token": "V1", "happened_at": START + pd.Timedelta(days=30)}


def treated(count, state, **changed):
    return [
        {
            **SETUP,
            "treatment_id": f"T-{state}-{n:02d}",
            "started_at": START + pd.Timedelta(days=n + 1),
            "ended_at": START + pd.Timedelta(days=n + 1, minutes=20),
            "expiratory_filter": state,
            **changed,
        }
        for n in range(count)
    ]


def of(replayed, **tables):
    done = replayed(**tables)
    return other_history(done, review_fault(done, FACTS))


def test_filters_on_lower_what_reached_the_sensor(replayed):
    other = of(replayed, treatment=treated(10, "absent"))
    was, fitted = other.table["sensor_ml"]
    assert fitted < was
    assert other.sentence.startswith("With a filter on every treatment ")


def test_where_filters_were_on_nothing_changes(replayed):
    other = of(replayed, treatment=treated(10, "present"))
    was, fitted = other.table["sensor_ml"]
    assert fitted == pytest.approx(was)
    assert "no difference is shown" in other.sentence


def test_treatments_without_an_estimate_are_counted_in_both(replayed):
    rows = treated(4, "absent") + treated(2, "present", fill_volume_ml=None)
    other = of(replayed, treatment=rows)
    assert other.table["not_estimated_count"].tolist() == [2, 2]


def test_changing_on_time_is_counted_in_treatments_and_filters(replayed):
    """One filter in for 20 days of bronchodilator, allowed 24 h: 19 late treatments."""
    use = {
        "filter_id": "F1",
        "ventilator_token": "V1",
        "filter_kind": "pleated",
        "installed_at": START + pd.Timedelta(hours=20),
    }
    rows = treated(20, "present", filter_id="F1")
    other = of(replayed, treatment=rows, filter_use=[use])
    assert other.past_hours_count == 19
    assert other.extra_filters_count == 19
    assert other.past_limit_count == 0


def test_no_treatments_nothing_to_change(replayed):
    other = of(replayed, treatment=[])
    assert other.table.empty
    assert other.sentence == (
        "No treatment is recorded in the look-back: nothing to change."
    )
