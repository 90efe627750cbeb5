"""Every screen opens on the demo, on each case, on an empty and on a one-row log."""

import re
from pathlib import Path

import pandas as pd
import pytest
from streamlit.testing.v1 import AppTest

import cases
import reviewapp
from engine.log import write_log
from reviewapp.parts import CAUTION
from reviewapp.serve import LOG_VARIABLE

APP = Path(reviewapp.__file__).with_name("app.py")
SCREENS = sorted(
    path.stem
    for path in APP.with_name("screens").glob("*.py")
    if path.stem != "__init__"
)
START = pd.Timestamp("2026-07-01 08:00")
ONE_ROW = {
    "treatment_id": "only",
    "status": "given",
    "started_at": START,
    "ended_at": START + pd.Timedelta(minutes=10),
    "generator": "jet",
    "site": "wye",
    "circuit": "dual_limb",
}


@pytest.fixture(scope="module")
def home(tmp_path_factory):
    return tmp_path_factory.mktemp("home")


@pytest.fixture(autouse=True)
def _kept_apart(monkeypatch, home):
    """Built-in logs and journals go to a folder of the tests' own."""
    monkeypatch.setenv("AEROSOL_REVIEW_HOME", str(home))
    monkeypatch.delenv(LOG_VARIABLE, raising=False)


def opened(screen, **asked):
    at = AppTest.from_file(str(APP), default_timeout=180)
    for key, value in asked.items():
        at.query_params[key] = value
    at.run()
    return at if screen == "month" else at.switch_page(f"screens/{screen}.py").run()


def words_of(at):
    return " ".join(str(element.value) for element in at.markdown)


def check(at, screen):
    assert not at.exception, [e.value for e in at.exception]
    words = words_of(at)
    assert CAUTION in words, screen
    assert 'class="opening"' in words or 'class="nothing"' in words, screen
    assert "NaN" not in words.replace("NaN-", "")
    assert "nan %" not in words


def test_every_screen_of_the_navigation_is_there():
    assert SCREENS == [
        "evidence",
        "filters",
        "incident",
        "log",
        "month",
        "topics",
        "treatments",
        "what_if",
    ]


@pytest.mark.parametrize("screen", SCREENS)
def test_a_screen_opens_on_the_invented_department(screen):
    check(opened(screen), screen)


@pytest.mark.parametrize("name", [case.name for case in cases.all_cases()])
def test_every_screen_opens_on_a_case(name):
    at = opened("month", log=f"case-{name}")
    check(at, "month")
    for screen in SCREENS:
        if screen != "month":
            at.switch_page(f"screens/{screen}.py").run()
            check(at, screen)


@pytest.mark.parametrize("rows", [[], [ONE_ROW]], ids=["empty", "one row"])
def test_every_screen_opens_on_a_very_small_log(tmp_path, monkeypatch, rows):
    path = tmp_path / "small.duckdb"
    tables = {"treatment": pd.DataFrame(rows)} if rows else {}
    write_log(path, tables, site_zone="Etc/UTC", created_at=START, sources="test")
    monkeypatch.setenv(LOG_VARIABLE, str(path))
    import streamlit as st

    st.cache_resource.clear()
    for screen in SCREENS:
        check(opened(screen), screen)
    st.cache_resource.clear()


def test_an_address_reopens_the_same_view():
    at = opened("month", log="case-jet_at_the_y", policy="bench_2024")
    assert at.sidebar.selectbox(key="choice_log").value == "case-jet_at_the_y"
    assert at.sidebar.selectbox(key="choice_policy").value == "bench_2024"


def test_an_address_opens_no_file_nobody_named(tmp_path):
    at = opened("log", log=str(tmp_path / "secret.duckdb"))
    assert at.sidebar.selectbox(key="choice_log").value == "demo"


def test_a_file_that_is_no_log_is_one_message_and_no_trace(tmp_path):
    bad = tmp_path / "bad.duckdb"
    bad.write_text("not a database, though it is long enough to be read as one" * 80)
    at = opened("log")
    at.sidebar.text_input(key="own_path").set_value(str(bad)).run()
    at.sidebar.button(key="open_own").click().run()
    assert not at.exception
    assert len(at.warning) == 1
    assert "bad" in at.warning[0].value


def submitted(at, form):
    return next(b for b in at.button if b.form_id == form).click()


def signer(at, form):
    return next(
        t for t in at.text_input if t.form_id == form and t.label.startswith("Signed")
    )


def test_a_verdict_is_kept_shown_and_taken_back():
    at = opened("treatments", log="case-jet_at_the_y", rule="PL01", answer="fires")
    check(at, "treatments")
    submitted(at, "verdict_T1:PL01_0").run()
    assert [w.value for w in at.warning] == [
        "Sign it with initials or a token, then keep it."
    ]
    signer(at, "verdict_T1:PL01_0").set_value("AB")
    submitted(at, "verdict_T1:PL01_0").run()
    assert not at.exception
    assert not at.warning
    assert signer(at, "verdict_T1:PL05_0").value == "AB"
    assert any("confirmed by AB" in c.value.replace("\\", "") for c in at.caption)
    back = next(b for b in at.button if str(b.key).startswith("back_T1:PL01"))
    back.click().run()
    assert not any("confirmed by AB" in c.value.replace("\\", "") for c in at.caption)


def test_a_flag_on_screen_carries_the_words_of_its_rule():
    words = words_of(opened("treatments", log="case-jet_at_the_y", treatment="T1"))
    assert "PL01" in words
    assert "Jet nebulizer at the Y" in words
    assert "error" not in words.lower()
    assert "violation" not in words.lower()


def test_free_text_of_a_log_never_becomes_markup(tmp_path, monkeypatch):
    path = tmp_path / "markup.duckdb"
    row = {**ONE_ROW, "drug": "<img src=x onerror=alert(1)>", "note": "=1+1"}
    write_log(
        path,
        {"treatment": pd.DataFrame([row])},
        site_zone="Etc/UTC",
        created_at=START,
        sources="<b>bold</b>",
    )
    monkeypatch.setenv(LOG_VARIABLE, str(path))
    import streamlit as st

    st.cache_resource.clear()
    for screen in ("treatments", "log", "month"):
        assert "<img src=x" not in words_of(opened(screen))
        assert "<b>bold" not in words_of(opened(screen))
    st.cache_resource.clear()


def test_a_slider_changes_nothing_until_it_is_moved():
    at = opened("treatments", log="case-jet_at_the_y", treatment="T1")
    first = next(m.value for m in at.markdown if "Circuit: " in str(m.value))
    at.toggle(key="vary").set_value(True).run()
    assert not at.exception
    drawn = [
        m.value
        for m in at.markdown
        if "aria-label='Circuit: " in str(m.value)
        or 'aria-label="Circuit: ' in str(m.value)
    ]
    words = [re.search(r'aria-label="(Circuit: [^"]*)"', d).group(1) for d in drawn]
    assert words[0] == words[-1]
    assert first == drawn[0]
    slider = next(s for s in at.slider if s.label.startswith("Bias flow"))
    slider.set_value(slider.min).run()
    assert not at.exception
    drawn = [m.value for m in at.markdown if 'aria-label="Circuit: ' in str(m.value)]
    words = [re.search(r'aria-label="(Circuit: [^"]*)"', d).group(1) for d in drawn]
    assert words[0] != words[-1]


def test_a_decision_says_how_strong_it_is_before_it_is_kept():
    at = opened("month", log="case-a_month_of_nights")
    form = "decision_0"
    text = next(
        t for t in at.text_input if t.form_id == form and t.label == "What is decided"
    )
    text.set_value("Put a filter in every nebulizer bag")
    signer(at, form).set_value("QL")
    submitted(at, form).run()
    assert [w.value for w in at.warning] == [
        "Say what is decided and how strong it is, then keep it."
    ]
    strength = next(
        b for b in at.selectbox if b.form_id == form and b.label == "Strength"
    )
    strength.select("stronger")
    submitted(at, form).run()
    assert not at.exception
    kept = next(d.value for d in at.dataframe if "Owner (role)" in d.value.columns)
    assert kept["What"].tolist() == ["Put a filter in every nebulizer bag"]
    assert kept["Strength"].tolist() == ["stronger"]


@pytest.mark.parametrize(
    ("screen", "log"),
    [("incident", "case-sensor_fouled"), ("month", "case-a_month_of_nights")],
)
def test_a_signature_freezes_what_was_read(screen, log):
    at = opened(screen, log=log)
    assert "Not signed." in words_of(at)
    submitted(at, "sign_0").run()
    assert [w.value for w in at.warning] == ["Tick that you have read it, then sign."]
    signer(at, "sign_0").set_value("QL")
    next(c for c in at.checkbox if c.form_id == "sign_0").check()
    submitted(at, "sign_0").run()
    assert not at.exception
    words = words_of(at).replace("\\", "")
    assert "QL (quality lead)" in words
    assert "Nothing has changed since." in words
    assert "Not signed." not in words


def test_the_list_is_walked_and_an_id_is_found_whatever_was_chosen_before():
    at = opened("treatments", log="case-a_month_of_nights")

    def heading():
        return next(
            m.value for m in at.markdown if m.value.startswith("#### Treatment")
        )

    first = heading()
    assert at.button(key="previous_treatment").disabled
    at.button(key="next_treatment").click().run()
    second = heading()
    assert second != first
    at.button(key="previous_treatment").click().run()
    assert heading() == first
    wanted = second.removeprefix("#### Treatment ").replace("\\", "")
    at.text_input(key="find_treatment").set_value(wanted).run()
    assert heading() == second
    at.text_input(key="find_treatment").set_value("nobody").run()
    assert not at.exception
    assert "has no treatment nobody" in words_of(at)


def test_a_decision_is_called_done_and_leaves_the_open_ones():
    at = opened("month", log="case-jet_at_the_y")
    form = "decision_0"
    labelled = {t.label: t for t in at.text_input if t.form_id == form}
    labelled["What is decided"].set_value("Mesh at the humidifier inlet")
    signer(at, form).set_value("QL")
    next(b for b in at.selectbox if b.form_id == form and b.label == "Strength").select(
        "intermediate"
    )
    submitted(at, form).run()
    assert any(e.label == "Not yet done: 1" for e in at.expander)
    submitted(at, "done_0").run()
    assert not at.exception
    assert not any(e.label.startswith("Not yet done") for e in at.expander)
