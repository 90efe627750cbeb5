"""Entries for the journal: a form keeps what was typed until the journal has it."""

from __future__ import annotations

from typing import Any

import streamlit as st
from streamlit.delta_generator import DeltaGenerator

from engine.errors import EngineError
from engine.reviews.incident_words import STRENGTHS
from reviewapp import data, parts

ROLES = ("quality lead", "educator", "incident reviewer", "clinical engineer", "other")


def form(name: str) -> DeltaGenerator:
    """An empty form of that name; it empties again once its entry is kept."""
    return st.form(f"{name}_{_kept(name)}")


def signature() -> tuple[str, str]:
    """Who signs, and in which role; whoever signed last is offered again."""
    last_who, last_role = st.session_state.get("signed_last", ("", ROLES[0]))
    left, right = st.columns(2)
    who = left.text_input(
        "Signed by (initials or a token)",
        value=last_who,
        max_chars=40,
        autocomplete="off",
    )
    role = right.selectbox("Role", ROLES, index=ROLES.index(last_role))
    return who.strip(), role


def decision() -> dict[str, str]:
    """What is decided, how strong it is, and who sees to it by when."""
    text = st.text_input("What is decided")
    strength = st.selectbox("Strength", STRENGTHS, index=None)
    owner = st.text_input("Owner (role, not a name)")
    measure = st.text_input("Measured by")
    due = st.date_input("Due", value=None)
    return {
        "text": text.strip(),
        "strength": strength or "",
        "owner_role": owner,
        "measure": measure,
        "due": str(due or ""),
    }


def keep_decision(
    name: str, signed: tuple[str, str], about: str, decided: dict[str, str]
) -> None:
    """Keeps a decision that says what it is and how strong; asks for the rest."""
    if decided["text"] and decided["strength"]:
        keep(name, signed, action="decision", object=about, new=decided)
    else:
        st.warning("Say what is decided and how strong it is, then keep it.")


def keep(
    name: str,
    signed: tuple[str, str],
    *,
    action: str,
    object: str,
    new: Any,
    reason: str = "",
) -> None:
    """Keeps what the form of that name holds; what is refused stays typed in."""
    who, role = signed
    if not who:
        st.warning("Sign it with initials or a token, then keep it.")
        return
    try:
        data.keep(
            action=action, object=object, new=new, actor=who, role=role, reason=reason
        )
    except EngineError as problem:
        st.warning(parts.plain(problem))
        return
    st.session_state[f"kept_{name}"] = _kept(name) + 1
    st.session_state["signed_last"] = signed
    st.rerun()


def take_back(seq: int, signed: tuple[str, str]) -> None:
    """Withdraws an entry; both the entry and its withdrawal stay on record."""
    try:
        data.take_back(seq, *signed)
    except EngineError as problem:
        st.warning(parts.plain(problem))
        return
    st.rerun()


def _kept(name: str) -> int:
    return int(st.session_state.get(f"kept_{name}", 0))
