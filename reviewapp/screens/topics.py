"""Topics: the few sessions that would help most, where, why; did the last one help?"""

from __future__ import annotations

import streamlit as st

from engine.errors import EngineError
from engine.reviews.figures import month_words
from engine.reviews.topic_catalogue import TOPICS
from engine.reviews.topics import CHOICES, Sheet, Topics
from reviewapp import data, entry, parts, theme
from reviewapp.drawings.topic import ranking_svg
from reviewapp.parts import address
from reviewapp.reports.shared import shared_topic_report
from reviewapp.reports.topics import (
    sessions_html,
    sheet_html,
    topic_report,
    weights_table,
)

WHOLE = "whole department"


def show() -> None:
    """The whole screen."""
    review = _chosen()
    if review is None:
        parts.caution()
        return
    parts.opening(review.sentence)
    parts.caution()
    for line in review.cautions[:2]:
        st.caption(line)
    for number, sheet in enumerate(review.sheets, start=1):
        _sheet(number, sheet, review)
    _how_chosen(review)
    _sessions(review)
    _report(review)


def _chosen() -> Topics | None:
    months = data.months()
    if not months:
        parts.empty(
            "This log holds no treatments that were given.",
            "Take in treatments, then open it again.",
        )
        return None
    first, second, third, fourth = st.columns([2, 2, 2, 1.4])
    since = first.selectbox(
        "From",
        months,
        index=_place(months, "since", 0),
        format_func=month_words,
        key="topics_since",
        on_change=_remember,
        args=("since", "topics_since"),
    )
    later = [month for month in months if month >= since]
    until = second.selectbox(
        "To",
        later,
        index=_place(later, "until", len(later) - 1),
        format_func=month_words,
        key="topics_until",
        on_change=_remember,
        args=("until", "topics_until"),
    )
    units = [WHOLE, *data.units()]
    unit = third.selectbox(
        "Unit",
        units,
        index=_place(units, "unit", 0),
        key="topics_unit",
        on_change=_remember,
        args=("unit", "topics_unit"),
    )
    asked = [str(k) for k in CHOICES]
    k = fourth.selectbox(
        "Topics",
        asked,
        index=_place(asked, "k", 1),
        key="topics_k",
        on_change=_remember,
        args=("k", "topics_k"),
    )
    try:
        return data.topics(since, until, None if unit == WHOLE else unit, int(k))
    except EngineError as problem:
        parts.empty(str(problem), "Choose another period or the whole department.")
        return None


def _place(choices: list[str], key: str, otherwise: int) -> int:
    asked = st.query_params.get(key)
    return choices.index(asked) if asked in choices else otherwise


def _remember(key: str, widget: str) -> None:
    st.query_params[key] = st.session_state[widget]


def _sheet(number: int, sheet: Sheet, review: Topics) -> None:
    st.subheader(f"{number}. {sheet.topic.title}")
    left_out = f"{100 * sheet.without_frac:.0f} %"
    st.caption(
        f"Covers {100 * sheet.alone_frac:.0f} % of what was flagged by itself; without"
        f" it the set would lose {left_out}."
    )
    st.markdown(
        sheet_html(sheet, parts.example_drawing, theme.colours(), folded=True),
        unsafe_allow_html=True,
    )
    flagged = [row for row in sheet.rules.to_dict("records") if row["flags"]]
    links = " · ".join(
        f"[{row['rule_id']} {row['title']}, {row['treatments']:,}]"
        f"({address('treatments', rule=row['rule_id'], answer='fires')})"
        for row in flagged
    )
    if links:
        st.markdown(f"Treatments: {links}")


def _how_chosen(review: Topics) -> None:
    st.subheader("How they were chosen")
    st.markdown(ranking_svg(review, theme.colours()), unsafe_allow_html=True)
    st.markdown(parts.plain(review.runner_up))
    with st.expander("Weights: severity times the share reviewers confirmed"):
        st.markdown(weights_table(review), unsafe_allow_html=True)
        st.caption(
            "Severity comes from the strength of the evidence unless the policy sets"
            " its own under [weights]. A rule nobody has reviewed counts half."
        )


def _sessions(review: Topics) -> None:
    st.subheader("What past sessions show")
    st.markdown(sessions_html(review.sessions, theme.colours()), unsafe_allow_html=True)
    with st.expander("Record a session"), entry.form("session"):
        titles = {topic.title: topic.id for topic in TOPICS}
        topic = st.selectbox("Topic", list(titles))
        held_on = st.date_input("Held on", value=None)
        units = st.multiselect("Units taught; none means all", data.units())
        weeks = st.number_input("Weeks to leave out while it spread", 1, 12, 1)
        signed = entry.signature()
        if st.form_submit_button("Keep the session"):
            if held_on is None:
                st.warning("Say when it was held, then keep it.")
            else:
                new = {
                    "held_on": str(held_on),
                    "units": units,
                    "weeks_left_out": int(weeks),
                }
                about = f"session:{titles[topic]}"
                entry.keep("session", signed, action="note", object=about, new=new)


def _report(review: Topics) -> None:
    parts.downloads(
        f"topics-{review.since}-{review.until}",
        lambda: topic_report(review, parts.example_drawing),
        lambda: shared_topic_report(data.replay(), review, parts.example_drawing),
    )


show()
