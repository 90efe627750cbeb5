"""One server and one browser for all tests here."""

import os
import shutil
import socket
import subprocess
import time
import urllib.error
import urllib.request

import pytest

from reviewapp.serve import streamlit_command, streamlit_environment

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


@pytest.fixture(scope="session")
def address(tmp_path_factory):
    """Where the app answers, on the invented department."""
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
    for _ in range(240):
        assert server.poll() is None, "the server stopped"
        try:
            with urllib.request.urlopen(url, timeout=1):
                return
        except (urllib.error.URLError, OSError):
            time.sleep(0.25)
    raise AssertionError("the server did not answer")


@pytest.fixture(scope="session")
def browser():
    if CHROMIUM is None and not os.environ.get("CI"):
        pytest.skip("no Chromium here")
    sync_api = pytest.importorskip("playwright.sync_api")
    with sync_api.sync_playwright() as play:
        one = play.chromium.launch(executable_path=CHROMIUM, args=FLAGS)
        yield one
        one.close()


@pytest.fixture(params=["light", "dark"])
def page(browser, request):
    """A page that may not fail, and may ask nothing of any other machine."""
    context = browser.new_context(
        viewport={"width": 1280, "height": 900},
        color_scheme=request.param,
        reduced_motion="reduce",
        accept_downloads=True,
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


@pytest.fixture
def opened(page):
    """``opened(url)``: the page, once the app has drawn it whole."""

    def whole(url):
        page.goto(url)
        page.wait_for_selector(".opening, .nothing", timeout=120_000)
        settled(page)
        return page

    return whole


def settled(page):
    page.wait_for_selector(
        "[data-testid=stApp][data-test-script-state=notRunning]", timeout=120_000
    )
