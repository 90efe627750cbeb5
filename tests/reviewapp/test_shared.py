"""A copy for sharing names no device, patient, unit or day; small groups are hidden."""

import re
from datetime import datetime
from io import BytesIO

import openpyxl
import pandas as pd
import pytest

from engine.errors import SharingRefused
from engine.log import open_log
from engine.policy import load_policy
from engine.replay import replay
from engine.reviews.month import review_month
from engine.reviews.month_units import every_units
from engine.reviews.scenario import find_scenario
from engine.reviews.sharing import neutral_of, shared_month, shared_topics
from engine.reviews.topics import review_topics
from engine.simulate import write_department
from reviewapp.reports.shared import shared_month_report
from reviewapp.reports.write import write_report

AT = datetime(2026, 12, 1, 7, 0)
MONTHS = (
    "January|February|March|April|June|July|August|September|October|November|December"
)
KINDS = {
    "month": {},
    "topics": {},
    "scenario": {"scenario": find_scenario("filter_on_every_treatment")},
}


@pytest.fixture(scope="module")
def department(tmp_path_factory):
    path = tmp_path_factory.mktemp("shared") / "invented.duckdb"
    write_department(path)
    return path


@pytest.fixture(scope="module")
def done(department):
    with open_log(department) as log:
        made = replay(log, load_policy("common_practice"))
        yield made
        made.close()


def names_in(done):
    """Every token of the log, read straight from its tables."""
    found = set()
    for table, column in (
        ("treatment", "unit_token"),
        ("treatment", "ventilator_token"),
        ("treatment", "patient_token"),
        ("treatment", "treatment_id"),
        ("filter_use", "filter_id"),
        ("sensor_check", "check_id"),
        ("incident", "incident_id"),
    ):
        frame = done.frame(f"SELECT DISTINCT {column} AS n FROM {table}")
        found |= set(frame["n"].dropna().astype(str))
    return found


def words_of(data, ending):
    if ending == ".html":
        return re.sub(r"<style>.*?</style>", "", data.decode("utf-8"), flags=re.S)
    book = openpyxl.load_workbook(BytesIO(data))
    cells = [c.value for sheet in book for row in sheet.iter_rows() for c in row]
    return " ".join(str(value) for value in cells if value is not None)


@pytest.mark.parametrize("ending", [".html", ".xlsx"])
@pytest.mark.parametrize("kind", KINDS)
def test_a_shared_copy_names_nobody_and_no_day(
    department, done, tmp_path, kind, ending
):
    out = tmp_path / f"copy{ending}"
    write_report(kind, department, out, made_at=AT, shared=True, **KINDS[kind])
    words = words_of(out.read_bytes(), ending)
    assert len(words) > 2000
    left = {
        n for n in names_in(done) if re.search(rf"(?<!\w){re.escape(n)}(?!\w)", words)
    }
    assert left == set()
    assert re.findall(rf"(?:{MONTHS}|May) 20\d\d|\b20\d\d-\d\d", words) == []
    assert re.findall(rf"\b(?:{MONTHS})\b", words) == []
    assert department.name not in words


@pytest.mark.parametrize("kind", ["incident", "filters"])
def test_what_names_devices_and_days_has_no_shared_copy(department, tmp_path, kind):
    out = tmp_path / "copy.html"
    with pytest.raises(SharingRefused, match="there is one of month, topics, scenario"):
        write_report(kind, department, out, made_at=AT, shared=True)
    assert not out.exists()


def test_small_groups_are_hidden_and_cannot_be_worked_out(done):
    smallest = 11
    month = review_month(done, "2026-10")
    shared, units = shared_month(month, every_units(done, "2026-10"), smallest)
    for line in shared.lines:
        known, count = line.months["known"], line.months["count"]
        if line.indicator.is_share:
            assert not count.between(1, smallest - 1).any(), line.indicator.id
            assert not (known - count).between(1, smallest - 1).any()
    for found in units.values():
        shown = found.table[~found.table["hidden"]]
        assert not shown["count"].between(1, smallest - 1).any()
        assert found.table["hidden"].sum() != 1
        hidden = found.table[found.table["hidden"]]
        assert hidden[["count", "known", "patients", "value"]].isna().all(axis=None)
    assert shared.filters.empty
    assert shared.sign_offs.empty


def test_hidden_cells_of_a_topic_carry_no_figure(done):
    review = review_topics(done, "2026-10", "2026-10")
    hidden = 0
    for sheet in shared_topics(review, 11).sheets:
        cells = sheet.places[sheet.places["hidden"]]
        hidden += len(cells)
        assert cells[["flagged", "asked", "share_frac"]].isna().all(axis=None)
        shown = sheet.places[~sheet.places["hidden"]]
        assert not shown["flagged"].between(1, 10).any()
        assert all(example.alike_count >= 11 for example in sheet.examples)
    assert hidden > 0


def test_a_copy_that_would_still_name_a_device_is_not_made(done, monkeypatch):
    month = review_month(done, "2026-10")
    from dataclasses import replace

    telling = replace(month, happened="Look at ventilator A03.")
    with pytest.raises(SharingRefused, match="it would still name A03"):
        shared_month_report(done, telling, every_units(done, "2026-10"))


def test_months_and_units_are_numbered_and_other_words_stay(done):
    neutral = neutral_of(done)
    told = neutral.text("May 2026 to October 2026 in Alder ICU; it may change.")
    assert told.startswith("month 1 to month 6 in unit ")
    assert told.endswith("; it may change.")
    assert neutral.still_named("on 5 May 2026 at A03, 2026-10-02") == [
        "2026-10-02",
        "5 May 2026",
        "A03",
    ]
    assert neutral.still_named(pd.DataFrame({"a": [1.5]}).to_csv()) == []


def test_names_with_signs_and_blanks_are_found_as_well(tmp_path):
    from html import escape

    from engine.log import write_log

    path = tmp_path / "log.duckdb"
    row = {
        "treatment_id": "T-1 a",
        "started_at": pd.Timestamp("2026-07-01 08:00"),
        "unit_token": "A&E <north>",
        "ventilator_token": "Vent 12",
    }
    write_log(path, {"treatment": pd.DataFrame([row])}, "Etc/UTC", AT)
    with open_log(path) as log:
        made = replay(log, load_policy("common_practice"))
        neutral = neutral_of(made)
        made.close()
    told = f"<p>{escape('In A&E <north> on Vent 12')}</p>"
    assert "unit 1" in neutral.text(told)
    assert neutral.still_named(neutral.text(told)) == ["Vent 12"]
    assert neutral.still_named(told) == ["A&E <north>", "Vent 12"]
