"""Treatments: a worklist, and one treatment in depth with what its setup was."""

from __future__ import annotations

from html import escape
from typing import Any

import pandas as pd
import streamlit as st

from engine.columns import ANSWERS, labels
from engine.physics.balance import ASSUMPTIONS, REFUSALS, balance
from engine.physics.explain import explain
from engine.physics.picture import split_picture
from engine.reviews.figures import month_words
from engine.reviews.incident_words import local
from engine.rules import ALL_RULES, rule_of
from engine.rules.phrases import batch_of_one
from engine.rules.wording import NOT_LOGGED, cited, is_logged, published, shown
from reviewapp import data, entry, parts, tables, theme
from reviewapp.drawings.circuit import band, circuit_svg, drawing_of
from reviewapp.drawings.treatment import sites_svg, split_svg

SHOWN = 200
ANY = "any"
VERDICTS = {
    "confirmed": "confirm",
    "dismissed": "dismiss",
    "needs_chart_check": "needs chart check",
}
VERDICTS_GIVEN = {
    "confirmed": "confirmed",
    "dismissed": "dismissed",
    "needs_chart_check": "chart check asked for",
}
STATES = (ANY, "not yet reviewed", *VERDICTS)
STRENGTHS = {
    "unanimous": "sources agree",
    "majority": "most sources agree",
    "contested": "sources differ",
    "department": "the department's own rule",
}


def show() -> None:
    """The whole screen."""
    asked = _asked()
    listed, total = _worklist(asked)
    parts.opening(_sentence(asked, total))
    parts.caution()
    if listed.empty:
        parts.empty(
            "No treatment fits what is asked for.",
            "Widen the choices above, or open another log on the left.",
        )
        return
    _one(_list(listed, total))


# --- the worklist --------------------------------------------------------------------


def _asked() -> dict[str, str]:
    """What the reader asks for, from the address or the boxes."""
    first, second, third, fourth, fifth = st.columns([1.3, 1.3, 2, 1.2, 1.5])
    months = [ANY, *data.months()]
    rules = {ANY: ANY} | {rule.id: f"{rule.id} {rule.title}" for rule in ALL_RULES}
    return {
        "month": _box(first, "Month", "month", months, month_words),
        "unit": _box(second, "Unit", "unit", [ANY, *data.units()]),
        "rule": _box(third, "Rule", "rule", list(rules), rules.__getitem__),
        "answer": _box(
            fourth, "Answer", "answer", [ANY, *ANSWERS], parts.ANSWER_WORDS.get
        ),
        "state": _box(fifth, "Reviewed", "state", list(STATES)),
        "find": st.query_params.get("treatment", ""),
    }


def _box(place: Any, label: str, key: str, choices: list[str], say: Any = None) -> str:
    now = st.query_params.get(key, ANY)

    def remember() -> None:
        chosen = st.session_state[f"treatments_{key}"]
        st.query_params.pop("treatment", None)
        if chosen == ANY:
            st.query_params.pop(key, None)
        else:
            st.query_params[key] = chosen

    return place.selectbox(
        label,
        choices,
        index=choices.index(now) if now in choices else 0,
        format_func=lambda name: name if name == ANY else (say or str)(name),
        key=f"treatments_{key}",
        on_change=remember,
    )


def _worklist(asked: dict[str, str]) -> tuple[pd.DataFrame, int]:
    """The first treatments that fit, most flags first, and how many fit."""
    where, params = _where(asked)
    fits = f"FROM asked a JOIN answer w USING (treatment_id) WHERE {where}"
    total = data.frame(f"SELECT count(*) AS n {fits}", params)["n"].iloc[0]
    rows = data.frame(
        "SELECT a.treatment_id, a.started_at, a.unit_token, a.shift::VARCHAR AS shift,"
        " a.generator::VARCHAR AS generator, a.site::VARCHAR AS site,"
        " coalesce(f.flags, 0) AS flags, coalesce(f.rules, '') AS rules "
        "FROM asked a JOIN answer w USING (treatment_id) LEFT JOIN "
        "(SELECT treatment_id, count(*) AS flags,"
        " string_agg(rule_id, ' ' ORDER BY rule_id) AS rules FROM finding GROUP BY 1) f"
        f" USING (treatment_id) WHERE {where} "
        f"ORDER BY flags DESC, a.started_at DESC, a.treatment_id LIMIT {SHOWN}",
        params,
    )
    return rows, int(total)


def _where(asked: dict[str, str]) -> tuple[str, dict[str, Any]]:
    clauses = ["true"]
    params: dict[str, Any] = {}
    if asked["month"] != ANY:
        clauses.append("a.local_month = $month")
        params["month"] = asked["month"]
    if asked["unit"] != ANY:
        clauses.append("a.unit_token = $unit")
        params["unit"] = asked["unit"]
    if asked["rule"] != ANY:
        answer = asked["answer"] if asked["answer"] != ANY else "fires"
        clauses.append(f'w."{rule_of(asked["rule"]).id}" = $answer')
        params["answer"] = answer
    elif asked["answer"] != ANY:
        either = " OR ".join(f'w."{rule.id}" = $answer' for rule in ALL_RULES)
        clauses.append(f"({either})")
        params["answer"] = asked["answer"]
    if asked["state"] != ANY:
        clause, reviewed = _state(asked["state"])
        clauses.append(clause)
        params["reviewed"] = reviewed
    return " AND ".join(clauses), params


def _state(state: str) -> tuple[str, list[str]]:
    verdicts = data.journal().verdicts()
    if state == "not yet reviewed":
        reviewed = verdicts["finding_id"].tolist()
        return (
            "EXISTS (FROM finding f WHERE f.treatment_id = a.treatment_id"
            " AND NOT list_contains($reviewed, f.finding_id))",
            reviewed,
        )
    said = verdicts[verdicts["verdict"] == state]["finding_id"]
    return (
        "list_contains($reviewed, a.treatment_id)",
        [name.rsplit(":", 1)[0] for name in said],
    )


def _sentence(asked: dict[str, str], total: int) -> str:
    noun = "treatment fits" if total == 1 else "treatments fit"
    narrowed = [
        value
        for key, value in asked.items()
        if key not in {"find", "month"} and value != ANY
    ]
    month = "" if asked["month"] == ANY else f" in {month_words(asked['month'])}"
    said = f" ({', '.join(narrowed)})" if narrowed else ""
    return (
        f"{total:,} {noun}{month}{said}; most flags first. Flags wait for a clinician."
    )


def _list(listed: pd.DataFrame, total: int) -> str:
    zone = data.site_zone()
    nothing = "not logged"
    table = pd.DataFrame(
        {
            "Treatment": listed["treatment_id"],
            "Started": [local(at, zone) for at in listed["started_at"]],
            "Flags": listed["flags"],
            "Rules that fired": listed["rules"],
            "Unit": listed["unit_token"].fillna(nothing),
            "Shift": listed["shift"].fillna(nothing),
            "Generator": [shown("generator", v) for v in listed["generator"]],
            "Site": [shown("site", v) for v in listed["site"]],
        }
    )
    ids = [str(name) for name in listed["treatment_id"]]

    def pick() -> None:
        rows = st.session_state["worklist"]["selection"]["rows"]
        if rows and rows[0] < len(ids):
            _show(ids[rows[0]])

    st.dataframe(
        table,
        hide_index=True,
        width="stretch",
        height=250,
        on_select=pick,
        selection_mode="single-row",
        key="worklist",
    )
    left, middle, right = st.columns([2, 1, 2], vertical_alignment="bottom")
    left.text_input("Find a treatment by its id", key="find_treatment", on_change=_find)
    middle.download_button(
        "Listed rows as CSV",
        data=lambda: tables.csv_of(listed),
        file_name="treatments.csv",
        mime="text/csv",
        on_click="ignore",
    )
    if total > len(listed):
        right.caption(f"The first {len(listed)} of {total:,} are listed.")
    shown_id = st.query_params.get("treatment") or ids[0]
    _steps(ids, shown_id)
    return shown_id


def _steps(ids: list[str], shown_id: str) -> None:
    """One treatment on or back in the list, without going up to it."""
    at = ids.index(shown_id) if shown_id in ids else -1
    back, on, place = st.columns([1, 1, 4], vertical_alignment="center")
    back.button(
        "Previous",
        key="previous_treatment",
        disabled=at <= 0,
        on_click=_show,
        args=(ids[max(at - 1, 0)],),
        width="stretch",
    )
    on.button(
        "Next",
        key="next_treatment",
        disabled=at >= len(ids) - 1,
        on_click=_show,
        args=(ids[min(at + 1, len(ids) - 1)],),
        width="stretch",
    )
    place.caption(
        f"{at + 1} of {len(ids)} listed" if at >= 0 else "not among those listed"
    )


def _show(treatment_id: str) -> None:
    st.query_params["treatment"] = treatment_id


def _find() -> None:
    wanted = st.session_state["find_treatment"].strip()
    if wanted:
        _show(wanted)
    else:
        st.query_params.pop("treatment", None)


# --- one treatment ------------------------------------------------------------


def _one(treatment_id: str) -> None:
    params = {"id": treatment_id}
    found = data.frame("FROM asked WHERE treatment_id = $id LIMIT 1", params)
    if found.empty:
        parts.empty(
            f"The log has no treatment {treatment_id} that was given.",
            "Choose one on the left, or look under Log for refused rows.",
        )
        return
    row = {str(k): v for k, v in found.iloc[0].to_dict().items()}
    answers = data.frame("FROM answer WHERE treatment_id = $id", params).iloc[0]
    policy = data.policy()
    st.markdown(f"#### Treatment {parts.plain(treatment_id)}")
    st.caption(_about(row))
    st.markdown(
        circuit_svg(drawing_of(row, policy), theme.colours()), unsafe_allow_html=True
    )
    _fired(treatment_id, row, answers)
    _sites(row)
    _assumed(row)
    _quiet(row, answers)
    _stages(row)
    _sliders(row)
    _record(row)


def _about(row: dict[str, Any]) -> str:
    said = [
        local(row["started_at"], data.site_zone()),
        shown("unit_token", row.get("unit_token")),
        f"ventilator {shown('ventilator_token', row.get('ventilator_token'))}",
        shown("drug", row.get("drug")),
        shown("nominal_dose_mg", row.get("nominal_dose_mg")),
        f"mode {shown('mode', row.get('mode'))}",
    ]
    return parts.plain(" · ".join(said))


def _fired(treatment_id: str, row: dict[str, Any], answers: pd.Series) -> None:
    fired = [rule for rule in ALL_RULES if answers[rule.id] == "fires"]
    st.markdown(f"##### What fired: {len(fired)}")
    if not fired:
        st.markdown("No rule fired on this treatment.")
        return
    verdicts = data.journal().verdicts().set_index("finding_id")
    for rule in fired:
        finding_id = f"{treatment_id}:{rule.id}"
        mark = parts.answer_mark("fires")
        said = rule.sentence(row, data.policy())
        st.markdown(
            f"{mark} **{rule.id} {parts.plain(rule.title)}**, "
            f"{STRENGTHS[rule.strength]}.<br>{escape(said)}",
            unsafe_allow_html=True,
        )
        if finding_id in verdicts.index:
            _verdicts(finding_id, verdicts.loc[[finding_id]])
        with st.expander(f"Review {rule.id}: confirm, dismiss, or ask for the chart"):
            st.markdown(f"*Asked:* {parts.plain(rule.question)}")
            st.markdown(f"*What would take it back:* {parts.plain(rule.would_change)}")
            st.markdown("*Rests on:* " + parts.plain("; ".join(_evidence(rule))))
            if rule.against:
                found = "; ".join(cited(source) for source in rule.against)
                st.markdown(f"*Found otherwise:* {parts.plain(found)}")
            _verdict_form(finding_id)


def _evidence(rule: Any) -> list[str]:
    return [
        cited(item) if hasattr(item, "authors") else published(item)
        for item in rule.evidence
    ]


def _verdicts(finding_id: str, said: pd.DataFrame) -> None:
    for verdict in said.to_dict("records"):
        words = VERDICTS_GIVEN.get(verdict["verdict"], verdict["verdict"])
        reason = f": {verdict['reason']}" if verdict["reason"] else ""
        when = f"{verdict['at']:%Y-%m-%d %H:%M} UTC"
        who = f"{words} by {verdict['actor']} ({verdict['role']}), {when}{reason}"
        st.caption(parts.plain(who))
        if st.button("Take back", key=f"back_{finding_id}_{verdict['actor']}"):
            signed = (verdict["actor"], verdict["role"])
            entry.take_back(int(verdict["seq"]), signed)


def _verdict_form(finding_id: str) -> None:
    name = f"verdict_{finding_id}"
    with entry.form(name):
        verdict = st.radio(
            "Verdict", list(VERDICTS), format_func=VERDICTS.get, horizontal=True
        )
        reason = st.text_input("Why", max_chars=400)
        signed = entry.signature()
        if st.form_submit_button("Keep the verdict"):
            entry.keep(
                name,
                signed,
                action="verdict",
                object=finding_id,
                new=verdict,
                reason=reason,
            )


def _sites(row: dict[str, Any]) -> None:
    st.markdown("##### What other sites would have given")
    if row.get("refusal"):
        st.markdown(f"Cannot tell: {parts.plain(REFUSALS[int(row['refusal'])])}.")
        return
    st.markdown(sites_svg(row, theme.colours()), unsafe_allow_html=True)
    shows = row.get("difference_shown")
    if shows == 1:
        best = parts.plain(shown("best_site", row.get("best_site")))
        times = f"{row['best_ratio']:.1f} times"
        st.markdown(f"The estimate shows {times} the dose {best}.")
    elif shows == 0:
        st.markdown(
            "No difference shown: the best site lies within "
            f"{data.policy().estimate.no_difference_ratio:g} times the logged one, or "
            "inside the band."
        )
    else:
        st.markdown("Cannot tell whether another site would have given more.")


def _assumed(row: dict[str, Any]) -> None:
    bits = int(row["assumed"]) if is_logged(row.get("assumed")) else 0
    words = [name for i, name in enumerate(ASSUMPTIONS) if bits >> i & 1]
    with st.expander(f"What the estimate assumed: {len(words)}"):
        if not words:
            st.markdown("Everything the estimate needs was logged.")
        for line in words:
            st.markdown(f"- {parts.plain(line)}")


def _quiet(row: dict[str, Any], answers: pd.Series) -> None:
    quiet = [rule for rule in ALL_RULES if answers[rule.id] != "fires"]
    unsure = [rule for rule in quiet if answers[rule.id] == "cannot_tell"]
    with st.expander(f"The other {len(quiet)} rules; of {len(unsure)} nobody can tell"):
        body = "".join(_quiet_line(rule, str(answers[rule.id]), row) for rule in quiet)
        st.markdown(
            f'<table class="answers"><tbody>{body}</tbody></table>',
            unsafe_allow_html=True,
        )


def _quiet_line(rule: Any, answer: str, row: dict[str, Any]) -> str:
    why = ""
    if answer == "cannot_tell":
        missing = ", ".join(rule.not_logged(row))
        why = f"<br><small>not logged: {escape(missing)}</small>" if missing else ""
    return (
        f"<tr><td>{parts.answer_mark(answer)}</td><td>{rule.id}</td>"
        f"<td>{escape(rule.title)}{why}</td>"
        f"<td>{parts.ANSWER_WORDS[answer]}</td></tr>"
    )


def _stages(row: dict[str, Any]) -> None:
    one = batch_of_one(row)
    stages = explain(one)
    if not stages:
        return
    with st.expander("Where the dose went, stage by stage"):
        picture = split_picture(one)
        if picture is not None:
            st.markdown(f"**The split at the Y.** {parts.plain(picture.sentence)}")
            st.markdown(split_svg(picture, theme.colours()), unsafe_allow_html=True)
        for stage in stages:
            st.markdown(
                f"**{parts.plain(stage.name)}: "
                f"{band(stage.frac, stage.low_frac, stage.high_frac)}**  \n"
                f"{parts.plain(stage.equation)}  \n"
                f"*In:* {parts.plain(_inputs(stage.inputs))}  \n"
                f"*Sources:* {parts.plain(', '.join(stage.sources) or 'none')}. "
                f"*Checked:* {parts.plain(stage.checked_by)}"
            )


def _inputs(inputs: tuple[tuple[str, str, bool], ...]) -> str:
    return "; ".join(
        f"{label} {value}{' (assumed)' if assumed else ''}"
        for label, value, assumed in inputs
    )


def _sliders(row: dict[str, Any]) -> None:
    """The same treatment with other figures, to see what a finding rests on."""
    if row.get("refusal") or not st.toggle(
        "Vary this treatment to understand the estimate", key="vary"
    ):
        return
    st.caption(
        "An explanation of the estimate, not advice: it says nothing of what should be "
        "set for a patient. What was not logged stays assumed until it is moved."
    )
    changed = dict(row)
    first, second, third = st.columns(3)
    for place, name, low, high, step in (
        (first, "bias_flow_lpm", 0.0, 15.0, 0.5),
        (second, "tidal_volume_ml", 150.0, 800.0, 10.0),
        (third, "inspiratory_time_s", 0.5, 2.5, 0.1),
        (first, "distance_from_wye_cm", 0.0, 150.0, 5.0),
    ):
        logged = row.get(name)
        start = min(max(float(logged), low), high) if is_logged(logged) else low
        moved = place.slider(
            labels()[name] if is_logged(logged) else f"{labels()[name]} (not logged)",
            low,
            high,
            start,
            step,
            key=f"vary_{name}_{row['treatment_id']}",
        )
        if moved != start:
            changed[name] = moved
    states = ["present", "absent", NOT_LOGGED]
    state = row.get("expiratory_filter")
    chosen = second.selectbox(
        "Expiratory filter",
        states,
        index=states.index(state) if state in states else 2,
        key=f"vary_filter_{row['treatment_id']}",
    )
    changed["expiratory_filter"] = None if chosen == NOT_LOGGED else chosen
    found = {name: values[0] for name, values in balance(batch_of_one(changed)).items()}
    varied = {**changed, **found, "difference_shown": 0}
    st.markdown(
        circuit_svg(drawing_of(varied, data.policy()), theme.colours()),
        unsafe_allow_html=True,
    )


def _record(row: dict[str, Any]) -> None:
    with st.expander("The record as logged, and what stood around it"):
        names = [name for name in labels() if name in row]
        table = pd.DataFrame(
            {
                "Column": [labels()[name] for name in names],
                "Value": [shown(name, row[name]) for name in names],
            }
        )
        st.dataframe(table, hide_index=True, width="stretch", height=420)


show()
