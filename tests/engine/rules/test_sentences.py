"""What a finding says, whole, as people act on it."""

import math
import re

import pytest

from engine.evidence import sources
from engine.policy import load_policy
from engine.rules import ALL_RULES, rule_of
from engine.rules.wording import cited, is_logged, label_of, published, shown

COMMON = load_policy()
BENCH = load_policy("bench_2024")
MESH_AT_THE_Y = {
    "generator": "vibrating_mesh",
    "synchrony": "continuous",
    "bias_flow_lpm": 3.0,
    "mode": "vcv",
    "circuit": "dual_limb",
    "site": "wye",
}

SAID = {
    "PL01": (
        {**MESH_AT_THE_Y, "generator": "jet"},
        "Jet nebulizer at the Y; in this setup the department's table puts it at the "
        "ventilator outlet or at the humidifier inlet (bias flow sweeps aerosol made "
        "near the Y past it; upstream it is stored).",
    ),
    "PL04": (
        {
            "generator": "jet",
            "bias_flow_lpm": 0.0,
            "site": "inspiratory_limb",
            "distance_from_wye_cm": 20.0,
        },
        "Jet nebulizer in the inspiratory limb, 20 cm from the Y; the table's reach is "
        "46 to 61 cm.",
    ),
    "PL05": (
        {
            **MESH_AT_THE_Y,
            "generator": "jet",
            "best_site": "humidifier_inlet",
            "best_ratio": 1.91,
            "delivered_frac": 0.0447,
            "best_delivered_frac": 0.0854,
        },
        "Jet nebulizer at the Y: by the estimate 4.5 % passes the tube; at the "
        "humidifier inlet it would be 8.5 %, 1.91 times as much. In the department's "
        "table that site is preferred. A model estimate from bench work; sources "
        "differ on how much the site matters.",
    ),
    "HU01": (
        {
            "generator": "jet",
            "site": "wye",
            "humidification": "hmef",
            "hme_state": "in_line",
        },
        "Jet nebulizer at the Y with the filter-HME in line: it stands between "
        "generator and airway and catches most of the aerosol.",
    ),
    "HU02": (
        {
            "humidification": "hme",
            "hme_state": "removed",
            "humidification_resumed": False,
        },
        "For the treatment the HME was removed; resumed afterwards: no. Gas at the Y "
        "dries within minutes.",
    ),
    "GE04": (
        {
            "generator": "jet",
            "synchrony": "continuous",
            "fill_volume_ml": 3.0,
            "duration_min": 120.0,
        },
        "120 min charted for 3 mL in the jet nebulizer; its output would take 2 to "
        "30 min.",
    ),
    "GE06": (
        {"generator": "jet", "fill_volume_ml": 2.0},
        "2 mL in the jet nebulizer, of which 0.8 to 2 mL stay behind; the department's "
        "smallest fill is 3 mL.",
    ),
    "FI02": (
        {
            "filter_in_use_id": "F17",
            "filter_reading_cmh2o_per_lps": 6.13,
            "filter_reading_age_h": 5.5,
        },
        "Filter F17 last read 6.13 cmH2O/(L/s) (age of the reading: 5.5 h); the "
        "department's limit is 5 cmH2O/(L/s). No published bedside limit exists.",
    ),
    "FI04": (
        {
            "filter_in_use_id": "F17",
            "filter_age_h": 30.0,
            "drug": None,
            "drug_class": "bronchodilator",
        },
        "Filter F17 had been in use for 30 h at the start; for a bronchodilator the "
        "department allows 24 h.",
    ),
    "EX02": (
        {
            "nominal_dose_mg": 150.0,
            "room_frac": 0.3,
            "room_low_frac": 0.12,
            "room_high_frac": 0.5,
        },
        "By the estimate 45 mg of 150 mg reached the room (band 18 mg to 75 mg); the "
        "department's level is 1 mg. A model estimate from bench work.",
    ),
    "SE02": (
        {"unfiltered_since_check_count": 14},
        "Unfiltered treatments on this ventilator since its sensor last passed: 14; "
        "the department checks at 10.",
    ),
    "RE01": (
        {
            "generator": "jet",
            "mode": "vcv",
            "started_at": "2026-03-04 08:00",
            "ended_at": "2026-03-04 08:12",
            "expiratory_filter": "present",
        },
        "Not logged: site and humidification.",
    ),
    "RE02": (
        {"ended_at": "2026-03-05 08:12", "duration_min": 1452.0},
        "The charted times give a run of 1452 min; beyond 720 min only a pump is "
        "likely.",
    ),
    "RE03": (
        {"mode_text": "AC"},
        "Mode charted as “AC”, which does not name one mode.",
    ),
    "RE04": (
        {"clock_offset_s": -1440.0},
        "The ventilator's clock stood 24 min behind the reference; the department "
        "allows 5 min. Times taken from it are moved by as much.",
    ),
    "RE05": (
        {"respiratory_rate_bpm": 30.0, "inspiratory_time_s": 2.5, "generator": "jet"},
        "The entry holds what cannot both be true: inspiration lasts as long as the "
        "whole breath.",
    ),
}


@pytest.mark.parametrize("rule_id", SAID)
def test_a_finding_is_told_in_whole_sentences(rule_id):
    row, sentence = SAID[rule_id]
    assert rule_of(rule_id).sentence(row, COMMON) == sentence


def test_where_sources_differ_both_sides_are_told_under_either_policy():
    rule = rule_of("PL02")
    common = rule.sentence(MESH_AT_THE_Y, COMMON)
    at_inlet = {**MESH_AT_THE_Y, "site": "humidifier_inlet"}
    bench = rule.sentence(at_inlet, BENCH)
    for text in (common, bench):
        assert "Sources differ here, so this is no error." in text
    assert "Found otherwise by Hou and others 2022" in common
    assert "The table follows Hou and others 2022" in bench
    assert "Berlinski and others 2013" in bench.split("Found otherwise")[1]


@pytest.mark.parametrize("rule", ALL_RULES, ids=lambda rule: rule.id)
@pytest.mark.parametrize("policy", [COMMON, BENCH], ids=lambda policy: policy.name)
def test_a_sentence_about_nothing_logged_says_so_and_breaks_nowhere(rule, policy):
    of_a_data_frame = type("NAType", (), {})()
    for value in (None, math.nan, of_a_data_frame):
        text = rule.sentence(dict.fromkeys(rule.columns, value), policy)
        assert not re.search(r"\bnan\b|\bNone\b|NAType|[{}]", text), text
        assert text[0].isupper() or text[0].isdigit()


@pytest.mark.parametrize("rule", ALL_RULES, ids=lambda rule: rule.id)
def test_what_is_not_logged_is_listed_by_its_label(rule):
    blank = rule.not_logged({})
    assert len(blank) == len(rule.columns)
    assert all(text and "_" not in text for text in blank)
    assert rule.not_logged(dict.fromkeys(rule.columns, 1)) == ()


@pytest.mark.parametrize(
    ("name", "value", "text"),
    [
        ("bias_flow_lpm", 2.0, "2 L/min"),
        ("bias_flow_lpm", 0.0, "0 L/min"),
        ("nominal_dose_mg", 1500.0, "1500 mg"),
        ("room_frac", 0.0028, "0.28 %"),
        ("room_frac", 1.0, "100 %"),
        ("heated_humidifier_on", True, "yes"),
        ("heated_humidifier_on", 0, "no"),
        ("hme_state", "in_line", "in line"),
        ("mode", "aprv", "APRV"),
        ("mode", "other", "other"),
        ("best_site", "airway_side", "between the Y and the airway"),
        ("filter_trend", "over_limit", "over its limit"),
        ("drug", "Colistin", "Colistin"),
        ("fill_volume_ml", None, "not logged"),
        ("fill_volume_ml", math.nan, "not logged"),
    ],
)
def test_a_value_reads_as_people_write_it(name, value, text):
    assert shown(name, value) == text


def test_a_false_value_is_logged():
    assert is_logged(False)
    assert is_logged(0.0)
    assert is_logged("")


@pytest.mark.parametrize(
    ("key", "text"),
    [
        ("HOU_2022", "Hou and others 2022"),
        ("MIURA_2026", "Miura and others 2026"),
        ("KELLY_ABSTRACT", "Kelly and others"),
        ("FDA_2009", "US Food and Drug Administration 2009"),
        ("COMMON_PRACTICE", "common practice of respiratory care"),
        (
            "INSPSYNC_2024",
            "“Inspiration-synchronised against continuous vibrating mesh, adult, bench”"
            " 2024",
        ),
    ],
)
def test_a_work_is_named_by_its_first_author_and_year(key, text):
    assert cited(sources()[key]) == text


def test_a_number_reads_with_its_range_and_unit():
    from engine.evidence import practice

    assert published(practice.JET_RESIDUAL_ML) == "0.8 to 2 mL"
    assert published(practice.JET_FROM_PATIENT_CM) == "46 to 61 cm"
    assert published(practice.UNFILTERED_OUTLET_FRAC) == "45 %"
    assert published(practice.POORLY_SET_DEPOSITED_FRAC) == "1.5 to 3 %"


def test_labels_of_estimates_and_columns_are_words():
    assert label_of("bias_flow_lpm") == "Bias flow, L/min"
    assert label_of("best_site") == "Best site by the estimate"
