"""Topics on logs whose best set is known."""

import importlib.util
from datetime import datetime
from pathlib import Path

import pandas as pd
import pytest

from engine.errors import NothingToReview
from engine.journal import open_journal
from engine.reviews.sessions import session_effect
from engine.reviews.topic_catalogue import BY_ID, TOPIC_OF, TOPICS
from engine.reviews.topics import review_topics
from engine.rules import ALL_RULES

_spec = importlib.util.spec_from_file_location(
    "made_month", Path(__file__).with_name("made_month.py")
)
made_month = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(made_month)
treatments = made_month.treatments

WHO_OR_WHEN = (
    "treatment_id",
    "patient_token",
    "ventilator_token",
    "bed_token",
    "unit_token",
    "started_at",
    "ended_at",
    "charted_at",
    "note",
    "filter_id",
    "local_month",
)


def jets_outside_gas(month, count, **changed):
    return treatments(
        month,
        count,
        generator="jet",
        gas_source="external",
        generator_gas_lpm=6.0,
        **changed,
    )


def test_every_rule_belongs_to_exactly_one_topic():
    listed = [rule for topic in TOPICS for rule in topic.rules]
    assert sorted(listed) == sorted(rule.id for rule in ALL_RULES)
    assert set(TOPIC_OF) == set(listed)


def test_the_topic_that_covers_most_is_chosen(replayed):
    rows = [
        *treatments("2026-03", 60, expiratory_filter="absent"),
        *jets_outside_gas("2026-03", 10, first=60),
    ]
    found = review_topics(replayed(treatment=rows), k=1)
    assert [sheet.topic.id for sheet in found.sheets] == ["filter"]
    assert "A filter on every nebulizer treatment" in found.sentence


def test_five_treatments_of_one_patient_do_not_choose_the_month(replayed):
    rows = [
        *jets_outside_gas("2026-03", 200, patients=1),
        *treatments("2026-03", 60, first=200, expiratory_filter="absent"),
    ]
    found = review_topics(replayed(treatment=rows), k=1)
    assert [sheet.topic.id for sheet in found.sheets] == ["filter"]
    assert found.capped_patients >= 1


def test_the_runner_up_and_its_loss_are_told(replayed):
    rows = [
        *treatments("2026-03", 60, expiratory_filter="absent"),
        *jets_outside_gas("2026-03", 58, first=60),
    ]
    found = review_topics(replayed(treatment=rows), k=1)
    assert 0 < found.choice.loss_frac < 1
    assert "at a loss of" in found.runner_up


def test_weights_by_hand_go_before_those_of_the_evidence(replayed):
    rows = [
        *treatments("2026-03", 60, expiratory_filter="absent"),
        *jets_outside_gas("2026-03", 30, first=60),
    ]
    done = replayed(treatment=rows)
    found = review_topics(done, k=1, weights={"GE": 10.0})
    assert [sheet.topic.id for sheet in found.sheets] == ["gas"]
    table = found.weights.set_index("rule_id")
    assert table.loc["GE02", "severity"] == 10.0


def test_a_rule_reviewers_dismiss_weighs_less(replayed, tmp_path):
    done = replayed(treatment=treatments("2026-03", 40, expiratory_filter="absent"))
    journal = open_journal(tmp_path / "j.jsonl")
    found = done.frame("SELECT finding_id FROM finding WHERE rule_id = 'FI01'")
    for finding in found["finding_id"].head(8):
        journal.append(
            at=datetime(2026, 6, 1),
            actor="A",
            role="reviewer",
            action="verdict",
            object=finding,
            new="dismissed",
        )
    table = review_topics(done, journal=journal).weights.set_index("rule_id")
    assert table.loc["FI01", "confirmed_frac"] == pytest.approx(1 / 10)
    assert table.loc["FI02", "confirmed_frac"] == 0.5


def test_an_example_says_neither_who_nor_when(replayed):
    rows = treatments("2026-03", 60, expiratory_filter="absent")
    sheet = review_topics(replayed(treatment=rows), k=1).sheets[0]
    assert sheet.examples
    for example in sheet.examples:
        assert not set(example.row) & set(WHO_OR_WHEN)
        told = " ".join([example.sentence, *example.says])
        assert "2026" not in told
        assert "P2026" not in told


def test_a_setup_of_too_few_patients_is_no_example(replayed):
    rows = [
        *treatments("2026-03", 60),
        *treatments(
            "2026-03", 12, first=60, patients=2, expiratory_filter="absent", site="wye"
        ),
    ]
    found = review_topics(replayed(treatment=rows), k=1)
    assert all(not sheet.examples for sheet in found.sheets)


def test_small_cells_of_unit_and_shift_stay_hidden_with_a_partner(replayed):
    rows = [
        *treatments("2026-03", 90, expiratory_filter="absent"),
        *treatments("2026-03", 5, first=90, unit_token="Birch"),
    ]
    places = review_topics(replayed(treatment=rows), k=1).sheets[0].places
    birch = places[(places["unit_token"] == "Birch") & (places["asked"] > 0)]
    assert birch["hidden"].all()
    assert birch["share_frac"].isna().all()


def test_what_cannot_be_told_stands_beside_the_share(replayed):
    rows = treatments("2026-03", 60, expiratory_filter=["absent"] * 20 + [None] * 40)
    sheet = review_topics(replayed(treatment=rows), k=1).sheets[0]
    if sheet.topic.id == "filter":
        assert "cannot be told" in sheet.sentence


def test_a_log_without_flags_has_no_topic(replayed):
    rows = treatments("2026-03", 30, site="inspiratory_limb", bias_flow_lpm=0.0)
    found = review_topics(replayed(treatment=rows), k=2, weights={})
    assert found.sentence.startswith("March 2026")


def test_an_empty_period_is_refused(replayed):
    done = replayed(treatment=treatments("2026-03", 20))
    with pytest.raises(NothingToReview):
        review_topics(done, since="2027-01")


def weeks_of(before_frac, after_frac, unit, first, taught="2026-04-06"):
    """28 weeks, 20 treatments each, the first share absent until the session."""
    rows, number = [], first
    for week in range(28):
        start = pd.Timestamp("2026-01-12") + pd.Timedelta(weeks=week)
        share = before_frac if start < pd.Timestamp(taught) else after_frac
        for i in range(20):
            moment = start + pd.Timedelta(hours=8 * i)
            rows.append(
                {
                    **made_month.PLAIN,
                    "treatment_id": f"S{number:05d}",
                    "started_at": moment,
                    "ended_at": moment + pd.Timedelta(minutes=12),
                    "patient_token": f"P{number}",
                    "unit_token": unit,
                    "expiratory_filter": "absent"
                    if (i * 7 + week * 3) % 20 < share * 20
                    else "present",
                }
            )
            number += 1
    return rows


def test_a_session_that_helped_is_seen_against_the_units_not_taught(replayed):
    rows = [*weeks_of(0.6, 0.2, "Alder", 0), *weeks_of(0.6, 0.6, "Birch", 1000)]
    done = replayed(treatment=rows)
    effect = session_effect(
        done, BY_ID["filter"], pd.Timestamp("2026-04-06"), ("Alder",), 1
    )
    assert effect.own.level_change.value == pytest.approx(-0.4, abs=0.06)
    assert "Against the units not taught it holds" in effect.sentence
    assert effect.weeks["left_out"].sum() == 1


def test_a_fall_everywhere_is_not_laid_to_the_session(replayed):
    rows = [*weeks_of(0.6, 0.2, "Alder", 0), *weeks_of(0.6, 0.2, "Birch", 1000)]
    effect = session_effect(
        replayed(treatment=rows),
        BY_ID["filter"],
        pd.Timestamp("2026-04-06"),
        ("Alder",),
    )
    assert "it does not hold" in effect.sentence


def test_a_short_series_is_not_judged(replayed):
    rows = weeks_of(0.6, 0.2, "Alder", 0)[:200]
    effect = session_effect(
        replayed(treatment=rows), BY_ID["filter"], pd.Timestamp("2026-02-16")
    )
    assert "too short to say" in effect.sentence
