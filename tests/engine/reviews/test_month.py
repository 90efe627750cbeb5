"""The month on logs whose counts are written into them."""

import importlib.util
from datetime import datetime
from pathlib import Path

import numpy as np
import pytest
from scipy.stats import binomtest, theilslopes
from statsmodels.stats.proportion import (
    confint_proportions_2indep,
    proportion_confint,
)

from engine.errors import NothingToReview, UnknownId
from engine.journal import open_journal
from engine.reviews.indicators import INDICATORS
from engine.reviews.month import last_whole_month, review_month
from engine.reviews.month_units import units_of
from engine.reviews.signatures import differences
from engine.rules import ALL_RULES

_spec = importlib.util.spec_from_file_location(
    "made_month", Path(__file__).with_name("made_month.py")
)
made_month = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(made_month)
treatments = made_month.treatments

AT = datetime(2026, 6, 1, 8)
FORBIDDEN = ("error", "violation", "poor", "worst", "fault of")


def filters(present, absent, unsaid):
    return ["present"] * present + ["absent"] * absent + [None] * unsaid


@pytest.fixture
def journal(tmp_path):
    return open_journal(tmp_path / "j.jsonl")


def test_a_share_is_counted_among_the_known_with_the_unknown_beside_it(replayed):
    rows = treatments("2026-03", 50, expiratory_filter=filters(30, 10, 10))
    line = review_month(replayed(treatment=rows), "2026-03").line("I01")
    assert (line.count, line.known, line.unknown) == (30, 40, 10)
    assert line.value == pytest.approx(0.75)
    assert line.unknown_frac == pytest.approx(0.20)
    ends = proportion_confint(30, 40, method="wilson")  # statsmodels
    assert (line.low, line.high) == pytest.approx(ends)


def test_every_indicator_stands_in_its_order(replayed):
    month = review_month(replayed(treatment=treatments("2026-03", 20)), "2026-03")
    assert [each.indicator.id for each in month.lines] == [i.id for i in INDICATORS]


def test_indicators_name_rules_that_exist():
    known = {rule.id for rule in ALL_RULES}
    assert {rule for each in INDICATORS for rule in each.rules} <= known


def test_treatments_of_few_patients_widen_the_interval(replayed):
    # Five patients, each alike in all ten treatments: n tells as much as five.
    answers = ["present", "present", "present", "absent", "absent"]
    rows = treatments("2026-03", 50, patients=5, expiratory_filter=answers)
    line = review_month(replayed(treatment=rows), "2026-03").line("I01")
    assert line.design_effect == pytest.approx(10.0)
    assert line.high - line.low > 0.6


def test_a_few_known_give_counts_and_no_percentage(replayed):
    rows = treatments("2026-03", 6, expiratory_filter=filters(4, 2, 0))
    line = review_month(replayed(treatment=rows), "2026-03").line("I01")
    assert line.value is None
    assert line.figure == "4 of 6"
    assert "%" not in line.says


def test_two_patients_give_no_percentage(replayed):
    rows = treatments("2026-03", 40, patients=2)
    line = review_month(replayed(treatment=rows), "2026-03").line("I01")
    assert line.value is None


def test_none_found_says_what_would_still_fit(replayed):
    rows = treatments("2026-03", 59)
    says = review_month(replayed(treatment=rows), "2026-03").line("I20").says
    # 1 - 0.05^(1/59) is 5 %, the rule of 59 (sampling tables).
    assert "none in" in says
    assert "up to 5\N{NO-BREAK SPACE}%" in says


def test_all_unknown_is_never_a_zero(replayed):
    rows = treatments("2026-03", 30, expiratory_filter=None)
    month = review_month(replayed(treatment=rows), "2026-03")
    assert month.line("I01").value is None
    assert month.line("I01").unknown == 30
    assert "cannot be told" in month.sentence


def test_a_change_past_its_interval_is_said_and_one_inside_is_not(replayed):
    rows = [
        *treatments("2026-03", 200, expiratory_filter=filters(100, 100, 0)),
        *treatments("2026-04", 200, expiratory_filter=filters(180, 20, 0)),
        *treatments("2026-05", 200, expiratory_filter=filters(178, 22, 0)),
    ]
    done = replayed(treatment=rows)
    april = review_month(done, "2026-04").line("I01")
    assert april.change == pytest.approx(0.4)
    # Newcombe's hybrid score interval by statsmodels.
    ends = confint_proportions_2indep(180, 200, 100, 200, method="newcomb")
    assert (april.change_low, april.change_high) == pytest.approx(ends)
    assert april.changed.startswith("Up 40 points since March")
    assert "No change shown" in review_month(done, "2026-05").line("I01").changed


def test_a_month_without_treatments_is_a_gap_in_the_series(replayed):
    rows = [*treatments("2026-03", 20), *treatments("2026-05", 20)]
    months = review_month(replayed(treatment=rows), "2026-05").line("I01").months
    assert months["local_month"].tolist() == ["2026-03", "2026-04", "2026-05"]
    assert np.isnan(months["value"][1])


def test_an_empty_month_and_an_empty_log_are_refused_in_one_line(replayed):
    done = replayed(treatment=treatments("2026-03", 20))
    with pytest.raises(NothingToReview, match="no treatments in April 2026"):
        review_month(done, "2026-04")
    with pytest.raises(NothingToReview, match="not a month"):
        review_month(done, "March")


def test_a_small_unit_is_not_shown(replayed):
    rows = [
        *treatments("2026-03", 40),
        *treatments("2026-03", 4, first=40, unit_token="Birch"),
    ]
    done = replayed(treatment=rows)
    with pytest.raises(NothingToReview, match="is not shown"):
        review_month(done, "2026-03", unit="Birch")
    table = units_of(done, "2026-03", "I01").table
    # The department's total stands beside, so the other unit is hidden with it.
    assert table["hidden"].all()
    assert table["value"].isna().all()


def test_five_units_make_a_funnel_and_none_is_ranked(replayed):
    names = ["Fir", "Alder", "Elm", "Birch", "Cedar"]
    rows = [
        row
        for i, name in enumerate(names)
        for row in treatments(
            "2026-03",
            60,
            first=60 * i,
            unit_token=name,
            patient_token=[f"P{name}{k}" for k in range(60)],
            expiratory_filter=filters(50, 10, 0)
            if name != "Elm"
            else filters(12, 48, 0),
        )
    ]
    units = units_of(replayed(treatment=rows), "2026-03", "I01")
    assert units.table["unit_token"].tolist() == sorted(names)
    assert len(units.funnel) > 10
    raw, shrunk = (units.table[c].to_numpy(float) for c in ("value", "shrunk"))
    assert (np.abs(shrunk - units.target) < np.abs(raw - units.target)).all()


def test_an_unknown_indicator_is_refused(replayed):
    done = replayed(treatment=treatments("2026-03", 20))
    with pytest.raises(UnknownId):
        units_of(done, "2026-03", "I99")


def test_flags_are_flags_until_confirmed(replayed, journal):
    rows = treatments("2026-03", 40, expiratory_filter=filters(20, 20, 0))
    done = replayed(treatment=rows)
    before = review_month(done, "2026-03", journal)
    assert "none reviewed yet" in before.confirmations.sentence
    found = done.frame("SELECT finding_id FROM finding WHERE rule_id = 'FI01'")
    for i, finding in enumerate(found["finding_id"].head(12)):
        verdict = "confirmed" if i < 9 else "dismissed"
        journal.append(
            at=AT,
            actor="A",
            role="reviewer",
            action="verdict",
            object=finding,
            new=verdict,
        )
    after = review_month(done, "2026-03", journal)
    own = after.confirmations.rules.set_index("rule_id").loc["FI01"]
    assert (own["reviewed"], own["confirmed"], own["dismissed"]) == (12, 9, 3)
    ends = binomtest(9, 12).proportion_ci()  # scipy, Clopper-Pearson
    assert (own["low"], own["high"]) == pytest.approx((ends.low, ends.high))
    assert after.line("I21").value == pytest.approx(0.75)


def test_two_reviewers_who_differ_do_not_confirm(replayed, journal):
    done = replayed(treatment=treatments("2026-03", 20, expiratory_filter="absent"))
    finding = done.frame("SELECT finding_id FROM finding WHERE rule_id = 'FI01'")
    for actor, verdict in (("A", "confirmed"), ("B", "dismissed")):
        journal.append(
            at=AT,
            actor=actor,
            role="reviewer",
            action="verdict",
            object=finding["finding_id"][0],
            new=verdict,
        )
    assert review_month(done, "2026-03", journal).confirmations.confirmed == 0


def test_a_signature_freezes_the_figures_and_later_change_is_named(replayed, journal):
    done = replayed(treatment=treatments("2026-03", 40))
    month = review_month(done, "2026-03", journal)
    journal.append(
        at=AT,
        actor="Chair",
        role="lead",
        action="sign_off",
        object="month:2026-03",
        new=month.snapshot,
    )
    again = review_month(done, "2026-03", journal)
    assert differences(again.sign_offs["snapshot"][0], again.snapshot) == []
    other = {**again.snapshot, "policy_hash": "another"}
    assert any("Policy" in line for line in differences(month.snapshot, other))


def test_actions_of_the_month_count_by_strength(replayed, journal):
    done = replayed(treatment=treatments("2026-03", 40))
    for i, strength in enumerate(["stronger", "intermediate"] * 5 + ["weaker"] * 2):
        journal.append(
            at=AT,
            actor="Chair",
            role="lead",
            action="decision",
            object="month:2026-03:I01",
            new={"text": f"action {i}", "strength": strength},
        )
    month = review_month(done, "2026-03", journal)
    assert len(month.decisions) == 12
    assert month.line("I22").value == pytest.approx(10 / 12)


def test_a_frozen_baseline_stands_until_another_decision(replayed, journal):
    rows = [row for m in range(1, 7) for row in treatments(f"2026-{m:02d}", 60)]
    done = replayed(treatment=rows)
    journal.append(
        at=AT,
        actor="Chair",
        role="lead",
        action="decision",
        object="baseline:I01",
        new={"since": "2026-01", "until": "2026-03"},
    )
    baseline = review_month(done, "2026-06", journal).line("I01").baseline
    assert baseline.signed
    assert (baseline.since, baseline.until) == ("2026-01", "2026-03")
    assert not baseline.firm


def test_limits_call_a_month_far_from_its_baseline(replayed):
    usual, other = filters(45, 15, 0), filters(15, 45, 0)
    rows = [
        row
        for m in range(1, 7)
        for row in treatments(
            f"2026-{m:02d}", 60, expiratory_filter=other if m == 6 else usual
        )
    ]
    month = review_month(replayed(treatment=rows), "2026-06")
    assert month.line("I01").look
    assert "Outside its limits" in month.line("I01").changed
    assert any("Filter in the expiratory limb" in line for line in month.to_decide)


def test_the_last_whole_month_is_the_one_the_log_outlasts(replayed):
    rows = [*treatments("2026-03", 20), *treatments("2026-04", 5, days=4)]
    assert last_whole_month(replayed(treatment=rows)) == "2026-03"


def test_no_sentence_blames(replayed):
    rows = treatments("2026-03", 60, expiratory_filter=filters(20, 30, 10), site="wye")
    month = review_month(replayed(treatment=rows), "2026-03")
    told = [month.sentence, month.happened, month.changed, month.sure, *month.to_decide]
    told += [text for each in month.lines for text in (each.says, each.changed)]
    assert not [word for word in FORBIDDEN for text in told if word in text.lower()]


def test_rare_events_are_told_by_the_treatments_between_them(replayed):
    checks = [
        {
            "check_id": f"C{day}",
            "ventilator_token": "V1",
            "sensor": "expiratory_flow",
            "checked_at": f"2026-03-{day:02d} 05:00",
            "outcome": "failed",
        }
        for day in (4, 10)
    ]
    done = replayed(treatment=treatments("2026-03", 54), sensor_check=checks)
    told = review_month(done, "2026-03").rare_sentence
    # Two a day from the 1st at 06:00: 18 before the 10th, 54 in all.
    assert told.startswith("2 flow-sensor events so far; the last one 36 treatments")
    assert "need 11 events" in told


def test_the_rise_of_a_filter_is_its_theil_sen_slope_a_treatment(replayed):
    rows = treatments("2026-03", 54, filter_id="F1")
    values = [2.2, 2.3, 2.5, 2.4, 2.7, 2.9, 2.8, 3.1]
    reads = [
        {
            "reading_id": f"R{i}",
            "filter_id": "F1",
            "ventilator_token": "V1",
            "read_at": f"2026-03-{2 + 3 * i:02d} 05:00",
            "flow_lpm": 60.0,
            "pressure_drop_cmh2o": value,
            "reading_source": "manometer",
        }
        for i, value in enumerate(values)
    ]
    use = {
        "filter_id": "F1",
        "ventilator_token": "V1",
        "filter_kind": "electrostatic",
        "installed_at": "2026-03-01 05:00",
        "new_resistance_cmh2o_per_lps": 2.2,
    }
    done = replayed(treatment=rows, filter_use=[use], filter_reading=reads)
    line = review_month(done, "2026-03").line("I07")
    # Two treatments a day stood before each reading; the slope by scipy.
    given = [2 * (1 + 3 * i) for i in range(len(values))]
    assert line.value == pytest.approx(theilslopes(values, given).slope)


def test_a_decision_stays_open_until_it_is_called_done(tmp_path):
    from engine.journal import open_journal
    from engine.reviews.month_journal import DECISION, DONE, open_decisions

    book = open_journal(tmp_path / "journal.jsonl")
    signed = {"at": datetime(2026, 4, 2), "actor": "QL", "role": "quality lead"}

    def decide(month, text, due):
        new = {"text": text, "strength": "stronger", "due": due}
        about = f"month:{month}"
        book.append(**signed, action="decision", object=about, new=new, reason="")

    decide("2026-01", "filters in every bag", "2026-02-15")
    decide("2026-02", "mesh at the inlet", "")
    decide("2026-05", "later", "2026-04-01")
    found = open_decisions(book, "2026-02")
    assert found["text"].tolist() == ["filters in every bag", "mesh at the inlet"]
    assert found["late"].tolist() == [True, False]
    assert not open_decisions(book, "2026-01")["late"].any()
    done = f"{DECISION}{found['seq'][0]}"
    book.append(**signed, action="note", object=done, new=DONE, reason="share 97 %")
    assert open_decisions(book, "2026-02")["text"].tolist() == ["mesh at the inlet"]
    assert open_decisions(None, "2026-02").empty
