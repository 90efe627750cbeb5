"""Incident: one fault, what the records support, what they do not, and sign-off."""

from __future__ import annotations

from datetime import datetime, time
from html import escape
from typing import Any

import pandas as pd
import streamlit as st

from engine.columns import HARMS, SENSORS
from engine.errors import EngineError
from engine.reviews.explanations import Explanation
from engine.reviews.incident import Incident
from engine.reviews.incident_words import local
from engine.reviews.signatures import signed_lines
from reviewapp import data, entry, parts, tables, theme
from reviewapp.drawings.incident import burden_svg, timeline_svg
from reviewapp.reports.incident import GRADE_MARKS, ROLES, incident_report

BY_HAND = "A fault that is not in the log"


def show() -> None:
    """The whole screen."""
    incident = _chosen()
    if incident is None:
        parts.caution()
        return
    parts.opening(incident.sentence)
    parts.caution()
    for line in incident.cautions:
        st.caption(line)
    _timeline(incident)
    _burden(incident)
    _explanations(incident)
    _elsewhere(incident)
    _limits(incident)
    _harm_and_actions(incident)
    _sign_off(incident)


def _chosen() -> Incident | None:
    listed = data.incidents()
    names = [*listed["incident_id"], BY_HAND]
    asked = st.query_params.get("incident")
    if asked and asked not in names:
        parts.empty(f"The log has no incident {asked}.", "Choose one below.")
        asked = None
    by_id = listed.set_index("incident_id")
    chosen = st.selectbox(
        "Incident",
        names,
        index=names.index(asked) if asked else 0,
        key="incident_chosen",
        on_change=_remember,
        format_func=lambda name: _label(by_id, name),
    )
    try:
        if chosen != BY_HAND:
            return data.incident(chosen)
        facts = _entered()
        return data.fault(facts) if facts else None
    except EngineError as problem:
        parts.empty(str(problem), "Choose another incident.")
        return None


def _remember() -> None:
    st.query_params["incident"] = st.session_state["incident_chosen"]


def _label(by_id: pd.DataFrame, name: str) -> str:
    if name == BY_HAND:
        return name
    row = by_id.loc[name]
    when = local(row["happened_at"], data.site_zone())
    sensor = str(row["sensor"] or "sensor not recorded").replace("_", " ")
    return f"{name}: {row['ventilator_token']}, {sensor}, {when}"


def _entered() -> dict[str, Any] | None:
    """A fault typed in; site time, turned to UTC for the engine."""
    ventilators = data.ventilators()
    if not ventilators:
        parts.empty("This log names no ventilator.", "Open another log.")
        return None
    token, sensor, day, at = st.columns(4)
    last = data.last_moment()
    ventilator = token.selectbox("Ventilator", ventilators, key="fault_ventilator")
    which = sensor.selectbox("Sensor", SENSORS.split(), key="fault_sensor")
    date = day.date_input("Day", value=last.date(), key="fault_day")
    clock = at.time_input("Site time", value=time(12), key="fault_time")
    moment = pd.Timestamp(datetime.combine(date, clock))
    shifted = moment.tz_localize(
        data.site_zone(), ambiguous=False, nonexistent="shift_forward"
    )
    return {
        "ventilator_token": ventilator,
        "sensor": which,
        "happened_at": shifted.tz_convert("UTC").tz_localize(None),
    }


def _timeline(incident: Incident) -> None:
    st.subheader("On one timeline")
    st.caption(incident.clock.sentence)
    drawn = timeline_svg(incident, theme.colours(), data.filter_limit())
    st.markdown(drawn, unsafe_allow_html=True)
    st.caption(
        "Filled square: no filter, failed check, alarm or fault. Hollow circle: filter"
        " present or check passed. Hatched with ?: not recorded. Cross: reading not"
        " used. Diamond: recalibrated or replaced. Tick: outcome not recorded."
    )
    with st.expander(f"All {len(incident.timeline)} rows of the timeline"):
        table = incident.timeline.assign(
            at=[local(at, incident.site_zone) for at in incident.timeline["at"]],
            as_logged=[
                ""
                if pd.isna(row["offset_s"])
                else local(row["at_logged"], incident.site_zone)
                for row in incident.timeline.to_dict("records")
            ],
        )[["at", "lane", "text", "table", "row_id", "as_logged"]]
        heads = {
            "at": "Site time",
            "lane": "Lane",
            "text": "What",
            "table": "Table",
            "row_id": "Row",
            "as_logged": "By its own clock",
        }
        st.dataframe(table.rename(columns=heads), hide_index=True, width="stretch")


def _burden(incident: Incident) -> None:
    st.subheader("Aerosol to the sensor since the last passed check")
    burden = incident.burden
    st.markdown(
        f"{burden.treatments_count} treatments: filter present in"
        f" **{burden.present_count}**, absent in **{burden.absent_count}**, unknown in"
        f" **{burden.unknown_count}**. Each dot is a ventilator since its own last"
        " passed check; the bar is the band of the estimate."
    )
    st.markdown(burden_svg(burden, theme.colours()), unsafe_allow_html=True)
    if burden.treatments_count and st.toggle(
        "The same history with a filter on every treatment", key="other_history"
    ):
        other = data.other_history(incident)
        st.markdown(escape(other.sentence))


def _explanations(incident: Incident) -> None:
    st.subheader("What could explain it")
    for number, explanation in enumerate(incident.explanations):
        mark = GRADE_MARKS[explanation.grade]
        head = f"{mark} **{explanation.title}**: {explanation.grade}"
        with st.expander(head, expanded=number == 0):
            _one_explanation(explanation)


def _one_explanation(explanation: Explanation) -> None:
    st.markdown(escape(explanation.sentence))
    table = pd.DataFrame(
        {
            "What the records were asked": [c.text for c in explanation.conditions],
            "Role": [ROLES[c.role] for c in explanation.conditions],
            "Answer": [
                {True: "yes", False: "no", None: "not on record"}[c.holds]
                for c in explanation.conditions
            ],
            "Rows": [
                ", ".join(row for _, row in c.rows) or "–"
                for c in explanation.conditions
            ],
        }
    )
    st.dataframe(table, hide_index=True, width="stretch")
    st.markdown(f"**Would be refuted by.** {escape(explanation.refuted_by)}")
    st.markdown(f"**Would be settled by.** {escape(explanation.settled_by)}")


def _elsewhere(incident: Incident) -> None:
    st.subheader("The same exposure elsewhere")
    st.markdown(escape(incident.windows.sentence))
    if incident.exposed_ventilators.empty:
        st.markdown("No other ventilator has as many unfiltered treatments.")
    else:
        names = [
            "ventilator_token",
            "treatments_count",
            "absent_count",
            "unknown_count",
            "sensor_ml",
        ]
        st.dataframe(
            tables.labelled(incident.exposed_ventilators[names]),
            hide_index=True,
            width="stretch",
        )
    if not incident.patients.empty:
        with st.expander(f"{len(incident.patients)} patients on it in the look-back"):
            names = [
                "patient_token",
                "treatments_count",
                "absent_count",
                "unknown_count",
            ]
            st.dataframe(
                tables.labelled(incident.patients[names]),
                hide_index=True,
                width="stretch",
            )


def _limits(incident: Incident) -> None:
    st.subheader("What the records do not support")
    st.markdown("\n".join(f"- {escape(line)}" for line in incident.not_supported))


def _harm_and_actions(incident: Incident) -> None:
    st.subheader("Harm and actions")
    st.markdown(escape(incident.harm_sentence))
    if not incident.actions.empty:
        st.dataframe(incident.actions, hide_index=True, width="stretch")
    with st.expander("Actions to choose from, the strongest first"):
        heads = {
            "strength": "Strength",
            "text": "Action",
            "measure": "Measured by",
            "because": "Because of",
        }
        st.dataframe(
            incident.suggested_actions.rename(columns=heads),
            hide_index=True,
            width="stretch",
        )
    if incident.facts["incident_id"] is None:
        st.caption("Only a fault in the log can be rated, decided on and signed.")
        return
    about = _about(incident)
    rate, decide = st.columns(2, gap="large")
    with rate, entry.form("harm"):
        st.markdown("**Rate the harm**; two raters, neither seeing the other's first.")
        harm = st.selectbox("Harm", [*HARMS.split(), "unknown"], index=None)
        reason = st.text_input("Reason")
        signed = entry.signature()
        if st.form_submit_button("Keep the rating"):
            if harm is None:
                st.warning("Choose the harm, then keep the rating.")
            else:
                new: dict[str, Any] = {"harm": harm}
                entry.keep(
                    "harm", signed, action="note", object=about, new=new, reason=reason
                )
    with decide, entry.form("action"):
        st.markdown("**Decide an action**")
        decided = entry.decision()
        signed = entry.signature()
        if st.form_submit_button("Keep the decision"):
            entry.keep_decision("action", signed, about, decided)


def _sign_off(incident: Incident) -> None:
    st.subheader("Report and sign-off")
    parts.downloads(
        f"incident-{incident.facts['incident_id'] or 'by-hand'}",
        lambda: incident_report(
            incident, data.filter_limit(), data.other_history(incident)
        ),
    )
    if incident.facts["incident_id"] is None:
        return
    for line in signed_lines(incident.sign_offs, incident.snapshot):
        st.markdown(parts.plain(line))
    if incident.sign_offs.empty:
        st.markdown("Not signed. Grades may change until it is.")
    with entry.form("sign"):
        st.caption(
            "A signature freezes the grades with the hashes of log, policy and journal."
        )
        signed = entry.signature()
        agreed = st.checkbox("I have read the rows cited and the report.")
        if st.form_submit_button("Sign"):
            if agreed:
                entry.keep(
                    "sign",
                    signed,
                    action="sign_off",
                    object=_about(incident),
                    new=incident.snapshot,
                )
            else:
                st.warning("Tick that you have read it, then sign.")


def _about(incident: Incident) -> str:
    return f"incident:{incident.facts['incident_id']}"


show()
