"""Chart checks: drawn once, read blind, and what they say of flags."""

import importlib.util
from datetime import datetime
from pathlib import Path

import pytest

from engine.errors import NothingToReview
from engine.journal import open_journal
from engine.reviews.chart_check import chart_check, draw_sample

_spec = importlib.util.spec_from_file_location(
    "made_month", Path(__file__).with_name("made_month.py")
)
made_month = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(made_month)
treatments = made_month.treatments
AT = datetime(2026, 6, 1, 8)


@pytest.fixture
def checked(replayed, tmp_path):
    """A month of 200 treatments, 50 flagged, with a sample of 40 kept in a journal."""
    done = replayed(
        treatment=treatments(
            "2026-03",
            200,
            site="inspiratory_limb",
            bias_flow_lpm=0.0,
            distance_from_wye_cm=15.0,
            humidification_resumed=True,
            expiratory_filter=["absent", "present", "present", "present"],
        )
    )
    journal = open_journal(tmp_path / "j.jsonl")
    sample = draw_sample(done, "2026-03", 40, seed=7)
    journal.append(
        at=AT,
        actor="Lead",
        role="lead",
        action="note",
        object="sample:2026-03",
        new=sample.record,
    )
    return done, journal, sample


def read(journal, actor, chart, to_act):
    journal.append(
        at=AT,
        actor=actor,
        role="reviewer",
        action="verdict",
        object=f"{chart}:chart",
        new="confirmed" if to_act else "dismissed",
    )


def test_the_same_seed_draws_the_same_charts(checked):
    done, _, sample = checked
    assert draw_sample(done, "2026-03", 40, seed=7).charts == sample.charts
    assert draw_sample(done, "2026-03", 40, seed=8).charts != sample.charts


def test_flagged_and_unflagged_are_both_drawn_and_the_order_says_nothing(checked):
    _, _, sample = checked
    assert len(set(sample.charts)) == 40
    assert (sample.strata["sampled"] > 0).all()
    assert list(sample.charts) != sorted(sample.charts)


def test_what_is_missed_is_unknown_until_an_unflagged_chart_is_read(checked):
    done, journal, sample = checked
    flagged = set(done.frame("SELECT treatment_id FROM finding")["treatment_id"])
    for chart in sample.charts:
        if chart in flagged:
            read(journal, "A", chart, True)
    found = chart_check(done, journal, "2026-03")
    assert found.missed is None
    assert "not known" in found.sentence
    assert found.confirmed.mean == 1.0
    assert found.confirmed.low < 1.0  # all of a few is not all


def test_two_reviewers_are_set_against_each_other(checked):
    done, journal, sample = checked
    for i, chart in enumerate(sample.charts):
        read(journal, "A", chart, i % 2 == 0)
        read(journal, "B", chart, i % 2 == 0 or i < 4)
    found = chart_check(done, journal, "2026-03")
    assert found.agreement.charts_count == 40
    assert found.agreement.agreed_frac == pytest.approx(38 / 40)
    assert "kappa" in found.sentence


def test_an_empty_month_has_no_sample(checked):
    with pytest.raises(NothingToReview):
        draw_sample(checked[0], "2027-01", 40, seed=1)
