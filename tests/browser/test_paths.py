"""The main path of each reader, in a real browser."""

import os
import re
import shutil
import socket
import subprocess
import time
import urllib.error
import urllib.request

import pytest

from reviewapp.serve import streamlit_command, streamlit_environment

sync_api = pytest.importorskip("playwright.sync_api")
CHROMIUM = os.environ.get("CHROMIUM") or shutil.which("chromium")
FLAGS = [
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
]

pytestmark = [
    pytest.mark.browser,
    pytest.mark.skipif(
        CHROMIUM is None and not os.environ.get("CI"), reason="no Chromium here"
    ),
]


@pytest.fixture(scope="module")
def address(tmp_path_factory):
    home = tmp_path_factory.mktemp("home")
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        port = probe.getsockname()[1]
    environment = streamlit_environment(None) | {
        "AEROSOL_REVIEW_HOME": str(home),
        "HOME": str(home),
    }
    with (home / "server.txt").open("w") as out:
        server = subprocess.Popen(
            streamlit_command(port), env=environment, stdout=out, stderr=out
        )
        _wait(f"http://127.0.0.1:{port}/_stcore/health", server)
        yield f"http://127.0.0.1:{port}"
        server.terminate()
        server.wait(20)


def _wait(url, server):
    for _ in range(120):
        assert server.poll() is None, "the server stopped"
        try:
            with urllib.request.urlopen(url, timeout=1):
                return
        except (urllib.error.URLError, OSError):
            time.sleep(0.25)
    raise AssertionError("the server did not answer")


@pytest.fixture(scope="module")
def browser():
    with sync_api.sync_playwright() as play:
        one = play.chromium.launch(executable_path=CHROMIUM, args=FLAGS)
        yield one
        one.close()


@pytest.fixture(params=["light", "dark"])
def page(browser, request):
    context = browser.new_context(
        viewport={"width": 1280, "height": 900},
        color_scheme=request.param,
        reduced_motion="reduce",
    )
    one = context.new_page()
    faults, outside = [], []
    one.on("pageerror", lambda error: faults.append(str(error)))
    one.on("request", lambda sent: outside.append(sent.url))
    yield one
    context.close()
    assert not faults
    assert all(
        "127.0.0.1" in url or url.startswith(("data:", "blob:")) for url in outside
    )


def opened(page, url):
    page.goto(url)
    page.wait_for_selector(".opening, .nothing", timeout=120_000)
    settled(page)


def settled(page):
    page.wait_for_selector(
        "[data-testid=stApp][data-test-script-state=notRunning]", timeout=120_000
    )


def test_the_committee_reads_the_month_and_goes_to_the_treatments(page, address):
    opened(page, address)
    sentence = page.locator(".opening").inner_text()
    assert re.match(r"\w+ 2026: \d+ treatments in \d+ patients\.", sentence)
    assert "Needs clinical confirmation" in page.locator(".caution").first.inner_text()
    page.locator(".m-table summary").first.click()
    page.locator(".m-table details[open] a").first.click()
    page.wait_for_url(re.compile("/treatments"))
    page.wait_for_selector("svg[aria-label^='Circuit: ']", timeout=120_000)


def test_the_educator_finds_topics_with_their_places(page, address):
    opened(page, f"{address}/topics")
    assert "treatments" in page.locator(".opening").inner_text()
    assert page.locator("h3").count() >= 2
    assert page.locator("svg[aria-label^='Circuit: ']").count() >= 1


def test_the_incident_reviewer_sees_the_timeline_and_the_grades(page, address):
    opened(page, f"{address}/incident?incident=I-2")
    assert "I-2" in page.locator(".opening").inner_text()
    assert page.get_by_text("What could explain it").count() == 1
    assert page.get_by_text(re.compile("Aerosol film")).count() >= 1


def test_a_treatment_is_reached_and_read_by_keyboard(page, address):
    opened(page, f"{address}/treatments?log=case-jet_at_the_y&treatment=T1")
    part = page.locator("g[tabindex='0']").first
    part.focus()
    assert page.evaluate("document.activeElement.getAttribute('aria-label')")
    assert page.locator("html").get_attribute("lang") == "en"
    assert page.evaluate("document.documentElement.scrollWidth") <= 1280


def test_no_stack_trace_reaches_the_page(page, address):
    opened(page, f"{address}/incident?incident=nobody")
    words = page.locator("body").inner_text()
    assert "Traceback" not in words
    assert "nobody" in words
