"""What if: the same log under changed facts or a changed policy."""

from __future__ import annotations

import tomllib

import streamlit as st

from engine.columns import TREATMENT
from engine.errors import EngineError
from engine.replay import Scenario, scenario_from
from engine.reviews.figures import month_words
from engine.reviews.scenario import (
    CANNOT_TELL,
    Comparison,
    ready_scenarios,
    scenario_record,
)
from engine.rules.wording import label_of, word
from reviewapp import data, entry, parts, theme
from reviewapp.drawings.scenario import filters_svg, outcome_svg
from reviewapp.reports.scenario import classes_table, rules_table, scenario_report
from reviewapp.reports.shared import shared_scenario_report

OWN = "Compose one"
WRITTEN = "Paste one as TOML"
SETUP_WORDS = (
    "expiratory_filter",
    "site",
    "synchrony",
    "hme_state",
    "humidification",
    "gas_source",
    "generator",
)
NOTHING = "everywhere"


def show() -> None:
    """The whole screen."""
    scenario = _chosen()
    if scenario is None:
        parts.opening(
            "What if the setups or the rules had been otherwise? Choose a change; the"
            " same log is replayed under it."
        )
        parts.caution()
        return
    comparison = _compared(scenario)
    if comparison is None:
        parts.caution()
        return
    parts.opening(comparison.sentence)
    parts.caution()
    _change(comparison)
    _outcomes(comparison)
    _filters(comparison)
    _flags(comparison)
    _keep_it(comparison)


def _chosen() -> Scenario | None:
    ready = {each.name: each for each in ready_scenarios()}
    readable, refused = data.kept_scenarios()
    kept = {each.name: each for each in readable}
    for reason in refused:
        st.caption(parts.plain(f"Not offered: {reason}"))
    known = {**ready, **kept}
    choices = [*known, OWN, WRITTEN]
    asked = st.query_params.get("scenario")
    name = st.selectbox(
        "Change",
        choices,
        index=choices.index(asked) if asked in choices else 0,
        format_func=lambda each: known[each].title if each in known else each,
        key="scenario_chosen",
        on_change=_remember,
    )
    try:
        if name == OWN:
            return _composed()
        return _written() if name == WRITTEN else known[name]
    except EngineError as problem:
        parts.empty(str(problem), "Change the entry and try again.")
        return None


def _remember() -> None:
    st.query_params["scenario"] = st.session_state["scenario_chosen"]


def _composed() -> Scenario | None:
    """One fact changed, where one other holds; more goes by TOML."""
    left, middle, right, last = st.columns(4)
    column = left.selectbox("Fact", SETUP_WORDS, format_func=label_of)
    value = middle.selectbox(
        "Becomes",
        TREATMENT.column(column).words[:-1],
        format_func=lambda each: word(column, each),
    )
    where = right.selectbox(
        "Where",
        [NOTHING, *SETUP_WORDS],
        format_func=lambda each: each if each == NOTHING else label_of(each),
    )
    limited: dict[str, list[str]] = {}
    if where != NOTHING:
        words = last.multiselect(
            "is",
            TREATMENT.column(where).words[:-1],
            format_func=lambda each: word(where, each),
        )
        if not words:
            st.caption("Choose at least one word, or change it everywhere.")
            return None
        limited = {where: words}
    title = f"{label_of(column)} {word(column, value)}"
    fact = {"column": column, "value": value, "where": limited}
    return scenario_from({"name": "own_change", "title": title, "fact": [fact]})


def _written() -> Scenario | None:
    text = st.text_area("Scenario", height=180, placeholder=EXAMPLE)
    if not text.strip():
        return None
    try:
        settings = tomllib.loads(text)
    except tomllib.TOMLDecodeError as problem:
        parts.empty(f"This is not TOML: {problem}", "Correct it and try again.")
        return None
    return scenario_from(settings, "the pasted scenario")


EXAMPLE = """name = "jets_upstream"
title = "Jets at the humidifier inlet"
[[fact]]
column = "site"
value = "humidifier_inlet"
where = { generator = ["jet"] }
[policy]
"filters.limit_cmh2o_per_lps" = 6.0"""


def _compared(scenario: Scenario) -> Comparison | None:
    months = data.months()
    if not months:
        parts.empty(
            "This log holds no treatments that were given.",
            "Take in treatments, then open it again.",
        )
        return None
    since, until = months[0], months[-1]
    if len(months) > 1:
        since, until = st.select_slider(
            "Period", months, value=(since, until), format_func=month_words
        )
    try:
        return data.comparison(scenario, since, until)
    except EngineError as problem:
        parts.empty(str(problem), "Change the scenario or the period.")
        return None


def _change(comparison: Comparison) -> None:
    st.subheader("The change")
    if comparison.scenario.note:
        st.markdown(parts.plain(comparison.scenario.note))
    st.markdown(parts.plain(comparison.change))
    if len(comparison.settings):
        st.dataframe(
            comparison.settings.rename(
                columns={"key": "Setting", "before": "As it was", "after": "Would be"}
            ),
            hide_index=True,
            width="stretch",
        )


def _outcomes(comparison: Comparison) -> None:
    st.subheader("Before and after")
    colours = theme.colours()
    if not comparison.outcomes:
        parts.empty(CANNOT_TELL, "Choose a longer period, or look under Log for gaps.")
    for each in comparison.outcomes:
        st.markdown(f"**{each.title}**")
        st.markdown(
            f'<div style="max-width:720px">{outcome_svg(each, colours)}</div>',
            unsafe_allow_html=True,
        )
        st.markdown(parts.plain(each.says))
    with st.expander("By drug class"):
        st.markdown(classes_table(comparison), unsafe_allow_html=True)


def _filters(comparison: Comparison) -> None:
    st.subheader("Filters it takes")
    st.markdown(
        '<div style="max-width:720px">'
        f"{filters_svg(comparison, theme.colours())}</div>",
        unsafe_allow_html=True,
    )
    st.markdown(parts.plain(comparison.filters_sentence))


def _flags(comparison: Comparison) -> None:
    st.subheader("Flags, and what it would not change")
    for line in comparison.unchanged:
        st.markdown(f"- {parts.plain(line)}")
    st.markdown(rules_table(comparison), unsafe_allow_html=True)
    for line in comparison.cautions:
        st.caption(line)


def _keep_it(comparison: Comparison) -> None:
    parts.downloads(
        f"what-if-{comparison.scenario.name}",
        lambda: scenario_report(comparison),
        lambda: shared_scenario_report(data.replay(), comparison),
    )
    with st.expander("Keep this scenario"), entry.form("scenario"):
        reason = st.text_input("Why it is kept")
        signed = entry.signature()
        if st.form_submit_button("Keep it"):
            entry.keep(
                "scenario",
                signed,
                action="scenario",
                object=f"scenario:{comparison.scenario.name}",
                new=scenario_record(comparison.scenario),
                reason=reason,
            )


show()
