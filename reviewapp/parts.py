"""Pieces every screen shares: the sentence, the caution, the marks, the tables."""

from __future__ import annotations

import re
from collections.abc import Mapping
from html import escape
from typing import Any
from urllib.parse import urlencode

import pandas as pd
import streamlit as st

from engine.columns import ANSWERS
from engine.reviews.topics import Example
from engine.rules.wording import label_of
from reviewapp import data, svg, theme
from reviewapp.circuit_drawing import circuit_svg, drawing_of

CAUTION = (
    "Needs clinical confirmation. Local policy and licensed practice decide. Doses are "
    "model estimates from bench-based methods. This looks back on past setups: it "
    "judges no person and advises on no current patient."
)
ANSWER_WORDS = {
    "fires": "fires",
    "silent": "silent",
    "not_asked": "not asked",
    "cannot_tell": "cannot tell",
}
_FORMULA = ("=", "+", "-", "@", "\t", "\r", "\0")


def opening(sentence: str) -> None:
    """The sentence a screen begins with."""
    st.markdown(f'<p class="opening">{escape(sentence)}</p>', unsafe_allow_html=True)


def caution() -> None:
    """What every screen says of itself."""
    st.markdown(f'<p class="caution">{escape(CAUTION)}</p>', unsafe_allow_html=True)


def address(screen: str, **wanted: str | None) -> str:
    """A link to a screen on what the figure stands for, same log and policy."""
    path = "/" if screen == "month" else f"/{screen}"
    given = {key: value for key, value in {**data.kept(), **wanted}.items() if value}
    return f"{path}?{urlencode(given)}" if given else path


def empty(message: str, what_to_do: str) -> None:
    """There is nothing to show, and this is what can be done about it."""
    st.markdown(
        f'<div class="nothing" role="status"><b>{escape(message)}</b>'
        f"{escape(what_to_do)}</div>",
        unsafe_allow_html=True,
    )


def plain(words: object) -> str:
    """Words from the log or the engine that no Markdown or HTML may change."""
    return re.sub(r"([\\`*_{}\[\]()#+!|<>$~:])", r"\\\1", str(words))


# Columns a review adds, which the dictionary of the log does not hold.
_ADDED = {
    "hours_h": "Hours in use",
    "resistance_cmh2o_per_lps": "At the reference flow, cmH2O/(L/s)",
    "doubt": "Why not used",
    "captured_ml": "Caught, mL",
    "treatments": "Treatments",
    "patients": "Patients",
    "text": "What",
    "strength": "Strength",
    "owner_role": "Owner (role)",
    "measure": "Measured by",
    "due": "Due",
    "actor": "By",
    "role": "Role",
    "at": "At (UTC)",
    "about": "About",
}


def labelled(table: pd.DataFrame) -> pd.DataFrame:
    """The same table with its columns called what the dictionary calls them."""
    return table.rename(
        columns={name: _ADDED.get(name) or label_of(name) for name in table.columns}
    )


def answer_mark(answer: str, words: str = "") -> str:
    """The mark of an answer: square, circle, dash or hatched square with "?"."""
    shown, said = theme.colours(), words or ANSWER_WORDS[answer]
    name = f"answer-{answer}"
    inside = {
        "fires": lambda: svg.to_look_at(8, 8, shown),
        "silent": lambda: svg.in_order(8, 8, shown),
        "not_asked": lambda: svg.line(3, 8, 13, 8, shown["faint"], 1.6),
        "cannot_tell": lambda: (
            svg.hatching(name, shown) + svg.not_said(8, 8, shown, name)
        ),
    }[answer]()
    return (
        f'<svg viewBox="0 0 16 16" width="16" height="16" role="img"'
        f' aria-label="{escape(said, quote=True)}"'
        f' style="vertical-align:-3px">{inside}</svg>'
    )


def legend() -> None:
    """The four answers and their marks, once a screen."""
    marks = " &nbsp; ".join(f"{answer_mark(a)} {ANSWER_WORDS[a]}" for a in ANSWERS)
    st.markdown(
        f'<p class="caution" style="border:0">{marks}</p>', unsafe_allow_html=True
    )


def example_drawing(example: Example) -> str:
    """The circuit of an example treatment, for screen and paper."""
    return circuit_svg(
        drawing_of(example.row, data.policy()), theme.colours(), compact=True
    )


def csv_of(table: pd.DataFrame) -> bytes:
    """A table as CSV; text that a spreadsheet would run as a formula is made text."""
    safe = table.copy()
    for name in safe.columns:
        if not pd.api.types.is_numeric_dtype(safe[name]):
            safe[name] = [_as_text(value) for value in safe[name]]
    return safe.to_csv(index=False, lineterminator="\r\n").encode("utf-8-sig")


def _as_text(value: Any) -> Any:
    if isinstance(value, str) and value.startswith(_FORMULA):
        return f"'{value}"
    return value


def details(title: str, rows: Mapping[str, str]) -> str:
    """A folded list of label and value, as HTML."""
    body = "".join(
        f"<tr><td>{escape(label)}</td><td>{escape(value)}</td></tr>"
        for label, value in rows.items()
    )
    return (
        f"<details><summary>{escape(title)}</summary>"
        f'<table class="answers"><tbody>{body}</tbody></table></details>'
    )
