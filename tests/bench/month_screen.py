"""How long a reader waits on the Month screen, measured in the browser.

    python tests/bench/month_screen.py LOG [CHROMIUM]

Opens the app on the log, then times: the first view of a fresh server (open, replay,
review), the same view again in a new tab, another month, and one unit of it. Prints;
asserts nothing, since no time is promised on a shared machine.
"""

from __future__ import annotations

import shutil
import socket
import statistics
import subprocess
import sys
import tempfile
import time
import urllib.error
import urllib.request
from collections.abc import Iterator
from contextlib import contextmanager

from playwright.sync_api import Page, sync_playwright

from reviewapp.serve import streamlit_command, streamlit_environment

FLAGS = ["--no-sandbox", "--disable-gpu", "--disable-background-networking"]
DONE = "[data-testid=stApp][data-test-script-state=notRunning]"
REPEATS = 5


@contextmanager
def server(log: str) -> Iterator[str]:
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        port = probe.getsockname()[1]
    with tempfile.TemporaryDirectory() as home:
        environment = streamlit_environment(log) | {"AEROSOL_REVIEW_HOME": home}
        running = subprocess.Popen(
            streamlit_command(port),
            env=environment,
            stdout=subprocess.DEVNULL,
            stderr=subprocess.DEVNULL,
        )
        try:
            while True:
                try:
                    urllib.request.urlopen(f"http://127.0.0.1:{port}/_stcore/health")
                    break
                except (urllib.error.URLError, OSError):
                    time.sleep(0.05)
            yield f"http://127.0.0.1:{port}"
        finally:
            running.terminate()
            running.wait(30)


def seconds(act, page: Page, sentence: str = "") -> float:
    """Until the opening sentence is another one and the script rests."""
    started = time.perf_counter()
    act()
    page.wait_for_function(
        "old => { const p = document.querySelector('p.opening');"
        " return p && p.innerText !== old }",
        arg=sentence,
        timeout=600_000,
    )
    page.wait_for_selector(DONE, timeout=600_000)
    return time.perf_counter() - started


def chosen(page: Page, label: str, option: str, old: str) -> float:
    """From the choice in the opened list to the drawn answer."""
    page.get_by_role("combobox", name=label).first.click()
    place = page.get_by_role("option", name=option, exact=True)
    place.wait_for()
    return seconds(place.click, page, old)


def main(log: str, chromium: str | None = None) -> None:
    path = chromium or shutil.which("chromium")
    with server(log) as address, sync_playwright() as play:
        browser = play.chromium.launch(executable_path=path, args=FLAGS)
        page = browser.new_page(viewport={"width": 1280, "height": 900})
        first = seconds(lambda: page.goto(address), page)
        print(f"first view, fresh server: {first:.1f} s")
        again = []
        for _ in range(REPEATS):
            tab = browser.new_page(viewport={"width": 1280, "height": 900})
            again.append(seconds(lambda tab=tab: tab.goto(address), tab))
            size = tab.evaluate("document.documentElement.outerHTML.length")
            tab.close()
        told(again, "first view, warm")
        print(f"page of {size / 1000:,.0f} kB")
        page.get_by_role("combobox", name="Month").first.click()
        months = page.get_by_role("option").all_inner_texts()
        page.keyboard.press("Escape")
        for name in ("new", "seen before"):
            times = []
            for month in months[:REPEATS]:
                old = page.locator("p.opening").inner_text()
                if month.split()[0] in old.split(":")[0]:
                    continue
                times.append(chosen(page, "Month", month, old))
            told(times, f"another month, {name}")
        page.get_by_role("combobox", name="Unit").first.click()
        units = page.get_by_role("option").all_inner_texts()
        page.keyboard.press("Escape")
        for name in ("new", "seen before"):
            times = []
            for unit in [*units[1:], units[0]]:
                old = page.locator("p.opening").inner_text()
                times.append(chosen(page, "Unit", unit, old))
            told(times, f"one unit, {name}")
        browser.close()


def told(times: list[float], what: str) -> None:
    if times:
        middle = statistics.median(times)
        print(f"{what}: {1000 * middle:,.0f} ms (up to {1000 * max(times):,.0f})")


if __name__ == "__main__":
    main(*sys.argv[1:3])
