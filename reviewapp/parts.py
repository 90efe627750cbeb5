"""Pieces every screen shares: the sentence, the caution, the marks, the tables."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from functools import partial
from html import escape
from urllib.parse import urlencode

import streamlit as st

from engine.columns import ANSWERS
from engine.reviews.topics import Example
from reviewapp import data, theme
from reviewapp.drawings import svg
from reviewapp.drawings.circuit import circuit_svg, drawing_of
from reviewapp.paper.files import ENDINGS, file_of
from reviewapp.paper.pdf import is_installed as pdf_is_installed
from reviewapp.report import Report
from reviewapp.reports.shared import shared_banner

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


def downloads(
    name: str,
    make: Callable[[], Report],
    make_shared: Callable[[], Report] | None = None,
) -> None:
    """The report as files; each is made when it is asked for.

    ``make_shared``   its form for sharing, where there is one
    """
    if make_shared and st.toggle(
        "Copy for sharing: no dates, devices, patients or small groups",
        key=f"share_{name}",
    ):
        undated = re.sub(r"-\d{4}-\d{2}", "", name)
        _files(f"{undated}-shared", make_shared, shared=True)
        return
    _files(name, make)
    if make_shared is None:
        st.caption("It names devices and days: there is no copy for sharing.")


def _files(name: str, make: Callable[[], Report], shared: bool = False) -> None:
    endings = [e for e in ENDINGS if e != ".pdf" or pdf_is_installed()]
    places = st.columns([1] * len(endings) + [2])
    for place, ending in zip(places, endings, strict=False):
        words, media = ENDINGS[ending]
        place.download_button(
            words,
            data=partial(_file, make, ending, shared),
            file_name=f"{name}{ending}",
            mime=media,
            on_click="ignore",
            width="stretch",
        )
    if len(endings) < len(ENDINGS):
        st.caption("A PDF needs the extra package named in the README.")


def _file(make: Callable[[], Report], ending: str, shared: bool) -> bytes:
    banner = data.banner()
    return file_of(make(), shared_banner(banner) if shared else banner, ending)


def example_drawing(example: Example) -> str:
    """The circuit of an example treatment, for screen and paper."""
    return circuit_svg(
        drawing_of(example.row, data.policy()), theme.colours(), compact=True
    )


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
