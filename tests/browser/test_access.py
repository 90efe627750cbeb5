"""No serious or critical fault of access on any screen (reference: axe-core)."""

import pytest
from axe_playwright_python.sync_playwright import Axe

pytestmark = pytest.mark.browser
SCREENS = {
    "month": "",
    "treatments": "treatments",
    "filters": "filters",
    "topics": "topics",
    "incident": "incident",
    "what if": "what_if",
    "log": "log",
    "evidence": "evidence",
}


@pytest.mark.parametrize("screen", SCREENS)
def test_a_screen_has_no_serious_fault_of_access(opened, address, screen):
    page = opened(f"{address}/{SCREENS[screen]}")
    found = Axe().run(page).response["violations"]
    grave = [
        (each["id"], each["impact"], len(each["nodes"]), each["nodes"][0]["html"][:200])
        for each in found
        if each["impact"] in {"serious", "critical"}
    ]
    assert grave == []
