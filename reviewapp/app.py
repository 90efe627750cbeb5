"""The app: which log and policy, and the eight screens. Each screen draws itself."""

from __future__ import annotations

from pathlib import Path

import streamlit as st

from engine.errors import EngineError
from reviewapp import data, parts, theme

TITLE = "Aerosol Treatment Review"
SCREENS = {
    "month": "Month",
    "treatments": "Treatments",
    "filters": "Filters",
    "topics": "Topics",
    "incident": "Incident",
    "what_if": "What if",
    "log": "Log",
    "evidence": "Evidence",
}
_FOLDER = Path(__file__).with_name("screens")


def main() -> None:
    """Navigation, the choice of log and policy, then the chosen screen."""
    st.set_page_config(page_title=TITLE, layout="wide")
    pages = [
        st.Page(
            _FOLDER / f"{name}.py",
            title=title,
            url_path=name,
            default=name == "month",
        )
        for name, title in SCREENS.items()
    ]
    chosen = st.navigation(pages)
    st.markdown(theme.css(), unsafe_allow_html=True)
    data.remember()
    with st.sidebar:
        _choices()
    st.title(chosen.title)
    try:
        chosen.run()
    except EngineError as problem:
        parts.empty(str(problem), "Choose another log or policy on the left.")
        parts.caution()


def _choices() -> None:
    choices, policies = data.log_choices(), data.POLICIES
    _box("Log", "log", choices, data.log_key())
    _box("Policy", "policy", policies, data.policy_key())
    with st.expander("Open a log of your own"):
        path = st.text_input("Path of the log file", key="own_path")
        if st.button("Open", key="open_own") and path:
            try:
                data.choose("log", data.add_log(path))
            except EngineError as problem:
                st.warning(parts.plain(problem))
            else:
                st.rerun()
        st.caption(
            "The file is opened read-only and never changed. Raw exports become a log "
            "with the command: aerosol-review intake."
        )
    st.caption(
        "Nothing leaves this computer. The log is not encrypted: keep it on an "
        "encrypted disk."
    )


def _box(label: str, key: str, choices: dict[str, str], now: str) -> None:
    names = list(choices)

    def remember() -> None:
        data.choose(key, st.session_state[f"choice_{key}"])

    st.selectbox(
        label,
        names,
        index=names.index(now),
        format_func=lambda name: choices[name],
        key=f"choice_{key}",
        on_change=remember,
    )


main()
