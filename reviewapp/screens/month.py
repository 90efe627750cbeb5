"""Month: what happened, what changed, what is sure, what to decide; one line each."""

from __future__ import annotations

import streamlit as st

from engine.errors import EngineError
from engine.reviews.chart_check import CHART, draw_sample
from engine.reviews.figures import month_words
from engine.reviews.indicators import INDICATORS
from engine.reviews.month import Month
from engine.reviews.month_journal import DECISION, DONE
from engine.reviews.signatures import signed_lines
from reviewapp import data, entry, parts, tables, theme
from reviewapp.drawings.month_lines import lines_html, style
from reviewapp.parts import address
from reviewapp.reports.month import (
    filters_table,
    forgone_table,
    month_marks,
    month_report,
    sensors_table,
)
from reviewapp.reports.shared import shared_month_report

WHOLE = "whole department"


def show() -> None:
    """The whole screen."""
    month = _chosen()
    if month is None:
        parts.caution()
        return
    parts.opening(month.sentence)
    parts.caution()
    _answers(month)
    _lines(month)
    _look(month)
    _dose(month)
    _confirmations(month)
    _chart_check(month)
    _decisions(month)
    _sign_off(month)
    _report(month)


def _chosen() -> Month | None:
    """The month and unit asked for, from the address or the two boxes."""
    listed = data.months()
    if not listed:
        parts.empty(
            "This log holds no treatments that were given.",
            "Take in treatments, then open it again.",
        )
        return None
    left, right, _ = st.columns([2, 2, 3])
    month = left.selectbox(
        "Month",
        listed,
        index=_place(listed, "month", listed.index(data.last_whole_month())),
        format_func=month_words,
        key="month_chosen",
        on_change=_remember,
        args=("month", "month_chosen"),
    )
    units = [WHOLE, *data.units()]
    unit = right.selectbox(
        "Unit",
        units,
        index=_place(units, "unit", 0),
        key="month_unit",
        on_change=_remember,
        args=("unit", "month_unit"),
    )
    try:
        return data.month(month, None if unit == WHOLE else unit)
    except EngineError as problem:
        parts.empty(str(problem), "Choose another month or the whole department.")
        return None


def _place(choices: list[str], key: str, otherwise: int) -> int:
    asked = st.query_params.get(key)
    if asked is None:
        return otherwise
    if asked not in choices:
        parts.empty(f"Nothing here is called {asked}.", "Choose below.")
        return otherwise
    return choices.index(asked)


def _remember(key: str, widget: str) -> None:
    st.query_params[key] = st.session_state[widget]


def _answers(month: Month) -> None:
    """The three answers a committee asks for first, then what to decide."""
    told = (
        ("What happened", month.happened),
        ("What changed", month.changed),
        ("What is least sure", month.sure),
    )
    for title, words in told:
        st.markdown(f"**{title}.** {parts.plain(words)}")
    if month.to_decide:
        asked = "\n".join(f"- {parts.plain(line)}" for line in month.to_decide)
        st.markdown(f"**What to decide.**\n{asked}")


def _lines(month: Month) -> None:
    st.subheader("The indicators")
    colours = theme.colours()
    units = data.month_units(month.month) if month.unit is None else {}
    html = lines_html(
        month,
        colours,
        units,
        opened=st.query_params.get("line"),
        marks=month_marks(data.sessions()),
        link=lambda **wanted: address("treatments", **wanted),
    )
    st.markdown(style(colours) + html, unsafe_allow_html=True)
    st.caption(
        "Bars are to scale: what is known lies left, the hatched end is what nobody"
        " recorded, the notch is the figure to hold it against. A filled square asks to"
        " be looked at."
    )


def _look(month: Month) -> None:
    st.subheader("Filters and sensors needing a look")
    n_filters, n_sensors = len(month.filters), len(month.sensors)
    if not n_filters and not n_sensors:
        st.markdown("No filter and no ventilator asks for a look this month.")
        return
    with st.expander(f"Filters over or near the limit, rising or doubted: {n_filters}"):
        st.markdown(filters_table(month.filters), unsafe_allow_html=True)
        st.markdown(f"[All filters]({address('filters')})")
    with st.expander(f"Ventilators with a sensor to look at: {n_sensors}"):
        st.markdown(sensors_table(month.sensors), unsafe_allow_html=True)


def _dose(month: Month) -> None:
    st.subheader("Dose forgone, aerosol to room and sensors")
    st.markdown(parts.plain(month.dose_sentence))
    if not month.forgone.empty:
        with st.expander("Which setups: groups large enough to show"):
            st.markdown(forgone_table(month), unsafe_allow_html=True)
    st.markdown(parts.plain(month.exposure_sentence))


def _confirmations(month: Month) -> None:
    st.subheader("Flags and what reviewers said of them")
    st.markdown(parts.plain(month.confirmations.sentence))
    rules = month.confirmations.rules
    if rules.empty:
        return
    with st.expander("By rule"):
        shown = rules[
            ["rule_id", "title", "flags", "reviewed", "confirmed", "dismissed"]
        ].assign(
            needs_work=rules["needs_work"].map({True: "needs work", False: ""}),
            see=[
                address("treatments", month=month.month, rule=rule, answer="fires")
                for rule in rules["rule_id"]
            ],
        )
        heads = {
            "rule_id": "Rule",
            "title": "What it asks",
            "flags": "Flags",
            "reviewed": "Reviewed",
            "confirmed": "Confirmed",
            "dismissed": "Dismissed",
            "needs_work": "Rule",
            "see": "Treatments",
        }
        st.dataframe(
            shown.rename(columns={**heads, "needs_work": "State of the rule"}),
            hide_index=True,
            width="stretch",
            column_config={
                "Treatments": st.column_config.LinkColumn(display_text="open")
            },
        )


def _chart_check(month: Month) -> None:
    """A sample drawn once, read blind; what it says of flags and of what they miss."""
    st.subheader("Chart check")
    found = data.chart_check(month.month)
    st.markdown(parts.plain(found.sentence))
    if not found.charts:
        _draw_sample(month)
        return
    with st.expander(f"Read the {len(found.charts)} charts drawn"):
        st.caption(
            "Read the chart itself before the screen of the treatment, and without the"
            " other reviewer's word."
        )
        with entry.form("chart"):
            chart = st.selectbox("Chart", found.charts)
            said = st.radio("In this setup", list(READ), horizontal=True)
            reason = st.text_input("What was seen")
            signed = entry.signature()
            if st.form_submit_button("Keep what was read"):
                entry.keep(
                    "chart",
                    signed,
                    action="verdict",
                    object=f"{chart}:{CHART}",
                    new=READ[said],
                    reason=reason,
                )


READ = {
    "something is to be acted on": "confirmed",
    "nothing is": "dismissed",
    "the chart does not tell": "needs_chart_check",
}


def _draw_sample(month: Month) -> None:
    with st.expander("Draw charts to check"), entry.form("sample"):
        size = st.number_input("Charts", 10, 400, 60, step=10)
        seed = st.number_input("Seed, kept with the sample", 1, 999_999, 1)
        signed = entry.signature()
        if st.form_submit_button("Draw"):
            drawn = draw_sample(data.replay(), month.month, int(size), int(seed))
            about = f"sample:{month.month}"
            entry.keep("sample", signed, action="note", object=about, new=drawn.record)


def _decisions(month: Month) -> None:
    st.subheader("Decisions and actions")
    if month.decisions.empty:
        st.markdown("None recorded for this month.")
    else:
        st.dataframe(
            tables.labelled(month.decisions.drop(columns=["month", "seq"])),
            hide_index=True,
            width="stretch",
        )
    _still_open(month)
    with st.expander("Record a decision"), entry.form("decision"):
        about = st.selectbox(
            "About",
            ["the whole month", *(f"{each.id} {each.title}" for each in INDICATORS)],
        )
        decided = entry.decision()
        signed = entry.signature()
        if st.form_submit_button("Keep the decision"):
            place = "" if about == "the whole month" else f":{about.split()[0]}"
            on = f"month:{month.month}{place}"
            entry.keep_decision("decision", signed, on, decided)
    _freeze_baseline(month)


def _still_open(month: Month) -> None:
    """What was decided up to this month and nobody has called done."""
    still = month.open_decisions
    if still.empty:
        return
    late = int(still["late"].sum())
    head = f"Not yet done: {len(still)}" + (f", {late} past the date" if late else "")
    with st.expander(head):
        names = ["month", "indicator", "text", "owner_role", "measure", "due"]
        st.dataframe(tables.labelled(still[names]), hide_index=True, width="stretch")
        with entry.form("done"):
            words = dict(zip(still["seq"], still["text"], strict=True))
            seq = st.selectbox("Done", list(words), format_func=lambda n: words[n])
            seen = st.text_input("What its measure shows")
            signed = entry.signature()
            if st.form_submit_button("Call it done"):
                on = f"{DECISION}{seq}"
                entry.keep(
                    "done", signed, action="note", object=on, new=DONE, reason=seen
                )


def _freeze_baseline(month: Month) -> None:
    """A dated decision on which months the limits of an indicator stand on."""
    with (
        st.expander("Freeze the months an indicator's limits stand on"),
        entry.form("baseline"),
    ):
        shares = [each for each in INDICATORS if each.is_share]
        about = st.selectbox(
            "Indicator", [f"{each.id} {each.title}" for each in shares]
        )
        ends = (month.months[0], month.months[-1])
        if len(month.months) > 1:
            ends = st.select_slider(
                "Months", month.months, value=ends, format_func=month_words
            )
        signed = entry.signature()
        if st.form_submit_button("Freeze"):
            new = {"since": ends[0], "until": ends[1]}
            on = f"baseline:{about.split()[0]}"
            entry.keep("baseline", signed, action="decision", object=on, new=new)


def _sign_off(month: Month) -> None:
    st.subheader("Signature")
    for line in signed_lines(month.sign_offs, month.snapshot):
        st.markdown(parts.plain(line))
    if month.sign_offs.empty:
        st.markdown("Not signed. Figures may change until it is.")
    if month.unit is not None:
        st.caption("A month is signed for the whole department.")
        return
    with entry.form("sign"):
        st.caption(
            "A signature freezes the figures with the hashes of log, policy and"
            " journal."
        )
        signed = entry.signature()
        agreed = st.checkbox("I have read the month and its cautions.")
        if st.form_submit_button("Sign"):
            if agreed:
                new, on = month.snapshot, f"month:{month.month}"
                entry.keep("sign", signed, action="sign_off", object=on, new=new)
            else:
                st.warning("Tick that you have read it, then sign.")


def _report(month: Month) -> None:
    parts.downloads(
        f"month-{month.month}",
        lambda: month_report(
            month, data.month_units(month.month), month_marks(data.sessions())
        ),
        lambda: shared_month_report(
            data.replay(), month, data.month_units(month.month)
        ),
    )


show()
