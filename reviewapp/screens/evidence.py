"""Evidence: the rules, every number with its source, and how well estimates agree."""

from __future__ import annotations

import csv
from html import escape
from importlib import resources

import pandas as pd
import streamlit as st

from engine import evidence
from engine.evidence.shape import Source
from engine.physics.validation import strict_agreement, validation_table
from engine.rules import ALL_RULES, FAMILIES
from engine.rules.wording import cited, published
from reviewapp import parts, theme
from reviewapp.drawings.bench import bench_svg

STRENGTHS = {
    "unanimous": "sources agree",
    "majority": "most sources agree",
    "contested": "sources differ",
    "department": "department's own",
}


@st.cache_data(show_spinner="Comparing every bench result with its estimate ...")
def _bench() -> tuple[pd.DataFrame, str]:
    return pd.DataFrame(validation_table()), strict_agreement().sentence


def show() -> None:
    """The whole screen."""
    numbers = evidence.numbers()
    read = sum(number.known == "read" for number in numbers.values())
    parts.opening(
        f"{len(ALL_RULES)} rules rest on {len(numbers)} numbers from "
        f"{len(evidence.sources())} sources; {read} of the numbers were read in their "
        "source, the others say how they are known."
    )
    parts.caution()
    rules, bench, found, listed, works = st.tabs(
        ["Rules", "Observed and estimated", "Detection", "Numbers", "Sources"]
    )
    with rules:
        _rules()
    with bench:
        _agreement()
    with found:
        _detection()
    with listed:
        _numbers()
    with works:
        _sources()


def _rules() -> None:
    asked = st.query_params.get("rule")
    for family, name in FAMILIES.items():
        st.markdown(f"##### {family} {name}")
        for rule in ALL_RULES:
            if rule.family != family:
                continue
            head = f"{rule.id} {rule.title} ({STRENGTHS[rule.strength]})"
            with st.expander(head, expanded=rule.id == asked):
                st.markdown(f"*Asks:* {parts.plain(rule.question)}")
                st.markdown(f"*Would change:* {parts.plain(rule.would_change)}")
                for item in rule.evidence:
                    words = cited(item) if isinstance(item, Source) else published(item)
                    st.markdown(f"- {parts.plain(words)}")
                for source in rule.against:
                    st.markdown(f"- found otherwise: {parts.plain(cited(source))}")
                reads = ", ".join(rule.columns)
                st.caption(parts.plain(f"Reads: {reads}"))
                st.markdown(
                    f"[Treatments it fired on]"
                    f"({parts.address('treatments', rule=rule.id, answer='fires')})"
                )


def _agreement() -> None:
    table, sentence = _bench()
    st.markdown(
        "Bench results that were **never fitted**, with known conditions: "
        f"{parts.plain(sentence)}. The band is meant to hold 80 %; it holds more "
        "here, so it is on the wide side. Two published studies exclude each other on "
        "the best site of a mesh with bias flow; both stand below."
    )
    drawn = table[table["estimate"].notna()]
    st.markdown(bench_svg(drawn, theme.colours()), unsafe_allow_html=True)
    shown = table.assign(
        inside=[
            "" if pd.isna(value) else "inside" if value else "outside"
            for value in table["inside"]
        ]
    )[
        [
            "study",
            "condition",
            "kind",
            "observed_frac",
            "estimate",
            "low",
            "high",
            "inside",
            "known",
            "why_not",
        ]
    ]
    percent = st.column_config.NumberColumn(format="percent")
    with st.expander(f"All {len(shown)} rows, good or bad"):
        st.dataframe(
            shown.rename(
                columns={
                    "study": "Study",
                    "condition": "Condition",
                    "kind": "Fitted or not",
                    "observed_frac": "Observed",
                    "estimate": "Estimate",
                    "low": "Low",
                    "high": "High",
                    "inside": "Band",
                    "known": "Known",
                    "why_not": "Why no estimate",
                }
            ),
            hide_index=True,
            width="stretch",
            column_config=dict.fromkeys(
                ("Observed", "Estimate", "Low", "High"), percent
            ),
        )


def _detection() -> None:
    file = resources.files("engine.evidence").joinpath("detection.csv")
    rows = list(csv.DictReader(file.read_text("utf-8").splitlines()))
    seeds = rows[0]["seeds"] if rows else "none"
    st.markdown(
        "How often the flags are right, on made departments whose truth is known, "
        f"seeds {parts.plain(seeds)} (tests/bench/detection.py makes this table again)."
    )
    body = "".join(
        f"<tr><td>{escape(row['question'])}</td>"
        f"<td style='text-align:right'>{row['right_count']} of {row['of_count']}</td>"
        f"<td style='text-align:right'>{row['share']}</td>"
        f"<td>{row['low']} to {row['high']}</td><td>{escape(row['target'])}</td>"
        f"<td>{escape(row['met'])}</td></tr>"
        for row in rows
    )
    heads = ("Question", "Right", "Share", "95 % interval", "Target", "Met")
    head = "".join(f'<th scope="col">{name}</th>' for name in heads)
    st.markdown(
        f"<table><thead><tr>{head}</tr></thead><tbody>{body}</tbody></table>",
        unsafe_allow_html=True,
    )


def _numbers() -> None:
    rows = [
        {
            "Number": name,
            "Value": str(number.value),
            "Unit": number.unit,
            "Known": number.known,
            "Source": number.source.key,
            "Where": number.where,
            "Holds for": number.holds_for,
            "Note": number.note,
        }
        for name, number in evidence.numbers().items()
    ]
    table = pd.DataFrame(rows)
    kinds = ["any", *sorted(table["Known"].unique())]
    wanted = st.selectbox("How it is known", kinds, key="known")
    if wanted != "any":
        table = table[table["Known"] == wanted]
    st.dataframe(table, hide_index=True, width="stretch", height=520)


def _sources() -> None:
    rows = [
        {
            "Key": source.key,
            "Authors": source.authors,
            "Year": str(source.year or ""),
            "Title": source.title,
            "In": source.journal,
            "Read at": source.address,
            "Known": source.known,
        }
        for source in evidence.sources().values()
    ]
    st.dataframe(pd.DataFrame(rows), hide_index=True, width="stretch", height=520)


show()
