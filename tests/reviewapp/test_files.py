"""Reports as files: every word of the page is in the PDF, every figure in the workbook.

References: pypdf reads the PDF back and openpyxl the workbook.
"""

import re
from datetime import datetime
from html.parser import HTMLParser
from io import BytesIO

import openpyxl
import pandas as pd
import pytest
from pypdf import PdfReader

from engine.errors import SourceUnreadable
from engine.reviews.scenario import find_scenario
from engine.simulate import write_department
from reviewapp.paper.blocks import blocks_of, tables_of, words_in
from reviewapp.paper.files import ENDINGS, check_ending, file_of
from reviewapp.paper.workbook import workbook
from reviewapp.report import CAUTION, CONFIDENTIAL, Banner, Report
from reviewapp.reports.write import write_report

AT = datetime(2026, 12, 1, 7, 0)
KINDS = {
    "month": {},
    "topics": {},
    "filters": {},
    "incident": {"incident_id": "I-2"},
    "scenario": {"scenario": find_scenario("filter_on_every_treatment")},
}
BANNER = Banner(
    log_name="log",
    log_fingerprint="f",
    policy="p",
    policy_hash="h",
    engine_version="0",
    treatments=1,
    rows_in=1,
    rows_used=1,
    rows_refused=0,
    made_at="2026-12-01 07:00",
    journal_head="empty",
)


@pytest.fixture(scope="module")
def department(tmp_path_factory):
    path = tmp_path_factory.mktemp("files") / "invented.duckdb"
    write_department(path)
    return path


@pytest.fixture(scope="module", params=KINDS)
def written(request, department, tmp_path_factory):
    """The same report with each ending, by ending."""
    folder = tmp_path_factory.mktemp(request.param)
    made = {}
    for ending in ENDINGS:
        out = folder / f"report{ending}"
        asked = KINDS[request.param]
        write_report(request.param, department, out, made_at=AT, **asked)
        made[ending] = out.read_bytes()
    return made


class Words(HTMLParser):
    """Words of a page outside drawings, styles and closed lines of the indicators."""

    def __init__(self):
        super().__init__()
        self.found, self.shut = [], []

    def handle_starttag(self, tag, attributes):
        names = dict(attributes)
        closed = tag == "details" and "id" in names and "open" not in names
        if self.shut or tag in {"svg", "style", "title"} or closed:
            if tag not in {"br", "meta"}:
                self.shut.append(tag)
        elif tag in {"p", "td", "th", "li", "h2", "h3", "br", "summary"}:
            self.found.append(" ")

    def handle_endtag(self, tag):
        if self.shut and self.shut[-1] == tag:
            self.shut.pop()

    def handle_startendtag(self, tag, attributes):
        pass

    def handle_data(self, data):
        if not self.shut:
            self.found += [data, " "]


def letters(words):
    """Letters and figures only: a PDF breaks lines and joins words as it likes."""
    return re.sub(r"[^A-Za-z0-9%]", "", words)


def test_every_word_of_the_page_is_in_the_pdf(written):
    reader = PdfReader(BytesIO(written[".pdf"]))
    set_words = letters(" ".join(page.extract_text() for page in reader.pages))
    parser = Words()
    parser.feed(written[".html"].decode("utf-8"))
    words = [w for w in " ".join(parser.found).split() if len(letters(w)) > 3]
    assert len(words) > 150
    missing = sorted({w for w in words if letters(w) not in set_words})
    assert missing == []


def test_the_pdf_is_tagged_named_and_says_what_it_is(written):
    reader = PdfReader(BytesIO(written[".pdf"]))
    root = reader.trailer["/Root"]
    assert root["/MarkInfo"]["/Marked"]
    assert str(root["/Lang"]).startswith("en")
    assert b"pdfuaid" in root["/Metadata"].get_data()
    assert reader.metadata.title
    first = letters(reader.pages[0].extract_text())
    assert letters(CONFIDENTIAL) in first
    assert letters(CAUTION) in first
    for number, page in enumerate(reader.pages, 1):
        foot = letters(page.extract_text())
        assert "Findingsneedclinicalconfirmation" in foot
        assert f"{number}{len(reader.pages)}" in foot


def test_the_same_report_is_the_same_bytes(written, department, tmp_path, request):
    kind = request.node.callspec.params["written"]
    for ending in (".html", ".pdf"):
        again = tmp_path / f"again{ending}"
        write_report(kind, department, again, made_at=AT, **KINDS[kind])
        assert again.read_bytes() == written[ending]


def test_the_workbook_opens_and_no_cell_is_a_formula(written):
    book = openpyxl.load_workbook(BytesIO(written[".xlsx"]))
    assert book.sheetnames[0] == "About"
    about = [row[0].value for row in book["About"].iter_rows()]
    assert CONFIDENTIAL in about
    assert CAUTION in about
    cells = [c for sheet in book for row in sheet.iter_rows() for c in row]
    assert any(c.data_type == "n" and c.value is not None for c in cells)
    assert not any(c.data_type in {"f", "e"} for c in cells)
    assert all(len(sheet[1]) for sheet in book)


def test_text_that_begins_like_a_formula_stays_text_and_a_negative_a_number():
    table = pd.DataFrame(
        {"note": ["=1+1", "-x", None], "n": [-3.2, float("nan"), float("inf")]}
    )
    book = openpyxl.load_workbook(BytesIO(workbook("t", BANNER, {"Notes": table})))
    sheet = book["Notes"]
    assert (sheet["A2"].value, sheet["A2"].data_type) == ("=1+1", "s")
    assert (sheet["A3"].value, sheet["A3"].data_type) == ("-x", "s")
    assert sheet["B2"].value == -3.2
    assert [sheet["A4"].value, sheet["B3"].value, sheet["B4"].value] == [None] * 3


def test_words_of_a_report_are_never_read_as_markup_of_the_paper():
    hostile = "#panic(1) $x$ *a* _b_ \\ ] ) </td> @c <d> `e`"
    from reviewapp.reports.pieces import bullets, paragraph, table

    sections = [
        (
            hostile,
            paragraph(hostile) + bullets([hostile]) + table([hostile], [[hostile]]),
        )
    ]
    report = Report(name="n", title=hostile, sections=sections, tables={})
    reader = PdfReader(BytesIO(file_of(report, BANNER, ".pdf")))
    text = letters(" ".join(page.extract_text() for page in reader.pages))
    assert text.count(letters(hostile)) >= 5
    assert reader.metadata.title == hostile


def test_an_ending_no_report_has_is_one_line():
    with pytest.raises(SourceUnreadable, match=r"\.html, \.pdf, \.xlsx; got \.docx"):
        check_ending(".docx")


def test_blocks_keep_the_order_and_the_cells():
    found = blocks_of(
        "<h3>A &amp; b</h3><p>one <b>two</b><br>three</p><ul><li>x</li></ul>"
        "<table><thead><tr><th>h</th></tr></thead><tbody><tr><td>1 &lt; 2</td></tr>"
        '</tbody></table><svg viewBox="0 0 40 20" aria-label="d"><text>&lt;</text>'
        "</svg>"
    )
    assert [each["kind"] for each in found] == [
        "head",
        "text",
        "list",
        "table",
        "drawing",
    ]
    assert found[0]["words"] == "A & b"
    assert [(r["words"], r["strong"]) for r in found[1]["runs"]] == [
        ("one ", False),
        ("two", True),
        ("\n", False),
        ("three", False),
    ]
    assert words_in(found[3]["rows"][0][0]) == "1 < 2"
    assert found[4]["svg"].endswith("<text>&lt;</text></svg>")
    assert found[4]["words"] == "d"
    assert found[4]["px"] == 40


def test_tables_are_found_inside_columns():
    side = '<div style="display:flex"><div><table><tr><td>a</td></tr></table></div>'
    assert len(tables_of(f"{side}<div><p>b</p></div></div>")) == 1


@pytest.mark.parametrize(
    "letter", ["\0", "\x07", "\x1b", "\ufffe", "\x85", "नमस्ते", "e\u0301"]
)
def test_letters_no_paper_holds_do_not_stop_a_report(letter):
    words = f"note {letter} end"
    from reviewapp.reports.pieces import paragraph

    report = Report(name="n", title="T", sections=[("S", paragraph(words))], tables={})
    text = PdfReader(BytesIO(file_of(report, BANNER, ".pdf"))).pages[0].extract_text()
    assert "note" in text
    assert "end" in text
    html = file_of(report, BANNER, ".html").decode("utf-8")
    assert not re.search(r"[\x00-\x08\x0b-\x1f\x7f-\x9f]", html)


def test_a_log_named_in_any_script_still_makes_a_pdf():
    from dataclasses import replace

    report = Report(name="n", title="T\x07", sections=[("S", "<p>x</p>")], tables={})
    named = replace(BANNER, log_name="नमस्ते\x1b.duckdb")
    assert file_of(report, named, ".pdf").startswith(b"%PDF")
