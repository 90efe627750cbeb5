"""The main path of each reader, in a real browser."""

import re

import pytest

pytestmark = pytest.mark.browser


def test_the_committee_reads_the_month_and_goes_to_the_treatments(opened, address):
    page = opened(address)
    sentence = page.locator(".opening").inner_text()
    assert re.match(r"\w+ 2026: \d+ treatments in \d+ patients\.", sentence)
    assert "Needs clinical confirmation" in page.locator(".caution").first.inner_text()
    page.locator(".m-table summary").first.click()
    page.locator(".m-table details[open] a").first.click()
    page.wait_for_url(re.compile("/treatments"))
    page.wait_for_selector("svg[aria-label^='Circuit: ']", timeout=120_000)


def test_the_committee_takes_the_month_away_as_a_file(opened, address):
    page = opened(address)
    for words, begins in (("PDF", b"%PDF"), ("Tables (xlsx)", b"PK")):
        with page.expect_download() as coming:
            page.get_by_role("button", name=words, exact=True).click()
        with open(coming.value.path(), "rb") as file:
            assert file.read(4).startswith(begins)


def test_the_educator_finds_topics_with_their_places(opened, address):
    page = opened(f"{address}/topics")
    assert "treatments" in page.locator(".opening").inner_text()
    assert page.locator("h3").count() >= 2
    assert page.locator("svg[aria-label^='Circuit: ']").count() >= 1


def test_the_incident_reviewer_sees_the_timeline_and_the_grades(opened, address):
    page = opened(f"{address}/incident?incident=I-2")
    assert "I-2" in page.locator(".opening").inner_text()
    assert page.get_by_text("What could explain it").count() == 1
    assert page.get_by_text(re.compile("Aerosol film")).count() >= 1


def test_a_treatment_is_reached_and_read_by_keyboard(opened, address):
    page = opened(f"{address}/treatments?log=case-jet_at_the_y&treatment=T1")
    part = page.locator("g[tabindex='0']").first
    part.focus()
    assert page.evaluate("document.activeElement.getAttribute('aria-label')")
    assert page.locator("html").get_attribute("lang") == "en"
    assert page.evaluate("document.documentElement.scrollWidth") <= 1280


def test_a_line_of_the_month_opens_by_keyboard(opened, address):
    page = opened(address)
    line = page.locator(".m-table summary").first
    line.focus()
    page.keyboard.press("Enter")
    assert page.locator(".m-table details[open]").count() == 1


def test_no_stack_trace_reaches_the_page(opened, address):
    page = opened(f"{address}/incident?incident=nobody")
    words = page.locator("body").inner_text()
    assert "Traceback" not in words
    assert "nobody" in words
