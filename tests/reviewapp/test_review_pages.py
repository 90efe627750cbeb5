"""The month, topic and scenario pages: whole, escaped, and giving nobody away."""

import importlib.util
import re
from datetime import datetime
from html.parser import HTMLParser
from pathlib import Path

import pandas as pd
import pytest

from engine.journal import open_journal
from engine.log import open_log
from engine.log.schema import write_log
from engine.policy import load_policy
from engine.replay import replay
from engine.reviews.month import review_month
from engine.reviews.month_units import every_units
from engine.reviews.scenario import compare_scenarios, find_scenario
from engine.reviews.topics import review_topics
from reviewapp.drawings.month_lines import address, lines_html
from reviewapp.drawings.svg import DARK, LIGHT
from reviewapp.reports.month import month_sections
from reviewapp.reports.scenario import scenario_sections
from reviewapp.reports.topics import topic_sections

_made = Path(__file__).parent.parent / "engine" / "reviews" / "made_month.py"
_spec = importlib.util.spec_from_file_location("made_month", _made)
made_month = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(made_month)

FORBIDDEN = re.compile(r"\b(errors?|violations?|poor|worst|blame)\b", re.IGNORECASE)
VOID = {"line", "rect", "circle", "path", "br", "hr", "meta", "stop"}


class Balanced(HTMLParser):
    """Raises where an element is closed that is not open."""

    def __init__(self):
        super().__init__()
        self.open = []

    def handle_starttag(self, tag, attributes):
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag):
        if tag in VOID:
            return
        assert self.open.pop() == tag


def is_balanced(html):
    parser = Balanced()
    parser.feed(html)
    return not parser.open


@pytest.fixture(scope="module")
def done(tmp_path_factory):
    path = tmp_path_factory.mktemp("pages") / "log.duckdb"
    rows = [
        row
        for month, absent in (("2026-03", 6), ("2026-04", 3))
        for row in made_month.treatments(
            month,
            120,
            unit_token=["Alder", "Birch<script>", "Cedar"],
            expiratory_filter=["absent"] * absent + ["present"] * 12 + [None] * 2,
            patient_token=[f"SECRET{i}" for i in range(120)],
            ventilator_token=[f"VENT{i}" for i in range(7)],
        )
    ]
    write_log(path, {"treatment": pd.DataFrame(rows)}, "Etc/UTC", datetime(2026, 6, 1))
    log = open_log(path)
    made = replay(log, load_policy())
    yield made
    made.close()
    log.close()


@pytest.fixture(scope="module")
def month(done):
    return review_month(done, "2026-04")


def joined(sections):
    return "".join(f"<h2>{head}</h2>{body}" for head, body in sections)


def test_the_month_page_is_whole_and_answers_the_four_questions(done, month):
    html = joined(month_sections(month, every_units(done, "2026-04")))
    assert is_balanced(html)
    for question in ("What happened", "What changed", "least sure", "What to decide"):
        assert question in html
    assert not FORBIDDEN.search(re.sub(r"<[^>]*>", " ", html))


def test_names_from_the_log_cannot_become_markup(done, month):
    html = joined(month_sections(month, every_units(done, "2026-04")))
    assert "<script>" not in html
    assert "Birch&lt;script&gt;" in html


@pytest.mark.parametrize("colours", [LIGHT, DARK], ids=["light", "dark"])
def test_every_line_is_drawn_with_its_words(month, colours):
    html = lines_html(month, colours, {}, opened="I01")
    assert html.count("<summary>") == len(month.lines)
    assert html.count(" open>") == 1
    for drawn in re.findall(r"<svg[^>]*>", html):
        assert re.search(r'aria-label="[^"]{10,}"', drawn), drawn


def test_the_unknown_share_is_hatched_to_scale(month):
    line = month.line("I01")
    html = lines_html(month, LIGHT, {}, only=("I01",))
    drawn = html[html.index("<svg") : html.index("</svg>")]
    whole, known_to, hatched = (
        float(re.search(pattern, drawn)[1])
        for pattern in (
            r'viewBox="0 0 (\d+)',
            r'x="([\d.]+)"[^>]*fill="url\(#bar-I01\)"',
            r'width="([\d.]+)"[^>]*fill="url\(#bar-I01\)"',
        )
    )
    assert hatched / whole == pytest.approx(line.unknown_frac, abs=0.01)
    assert known_to + hatched == pytest.approx(whole, abs=0.2)


def test_a_figure_leads_to_its_treatments(month):
    html = lines_html(
        month, LIGHT, {}, link=lambda **wanted: address("treatments", **wanted)
    )
    assert "/treatments?month=2026-04&amp;rule=FI01&amp;answer=fires" in html


def test_the_handout_names_no_patient_device_or_treatment(done):
    html = joined(topic_sections(review_topics(done)))
    assert is_balanced(html)
    for token in ("SECRET", "VENT", "2026-03-T", "2026-04-T"):
        assert token not in html
    assert not FORBIDDEN.search(re.sub(r"<[^>]*>", " ", html))


def test_the_scenario_page_shows_both_sides_and_the_cost(done):
    found = compare_scenarios(
        done.log, done.policy, find_scenario("filter_on_every_treatment"), before=done
    )
    html = joined(scenario_sections(found))
    assert is_balanced(html)
    assert html.count("as it was") >= 4
    assert "Filters needed" in html


def test_a_signed_month_says_whether_anything_changed_since(done, month, tmp_path):
    journal = open_journal(tmp_path / "j.jsonl")
    journal.append(
        at=datetime(2026, 6, 2),
        actor="Chair",
        role="lead",
        action="sign_off",
        object="month:2026-04",
        new=month.snapshot,
    )
    signed = review_month(done, "2026-04", journal)
    assert "Nothing has changed since" in joined(month_sections(signed, {}))
