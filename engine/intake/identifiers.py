"""What looks like a person: names, record numbers, birth dates, ways to reach them.

A column named like one is not taken in at all. A value that looks like one refuses its
row, and is repeated nowhere: not in the message, not in the row as received. The
patterns are ours and catch the common shapes only; they do not make a file anonymous.
"""

from __future__ import annotations

import re

from engine.columns import Column
from engine.log.schema import literal

WITHHELD = "(withheld)"

_NAMES = (
    r"(patient|pt|first|last|full|sur|given|family|middle|maiden|mother\w*)_?name"
    r"|name|surname|initials|[fl]name"
)
_NUMBERS = (
    r"mrn|medical_?record(_?(no|num|number))?|record_?(no|num|number)|ssn|csn"
    r"|social_?security(_?(no|num|number))?|account(_?(no|num|number))?"
    r"|(hospital|insurance|passport|national|nhs)_?(id|no|num|number)"
)
_BIRTHS = r"dob|d_o_b|birth_?(date|day)|date_?of_?birth|born"
_CONTACTS = (
    r"(e_?)?mail(_?address)?|(tele)?phone(_?(no|num|number))?|address|post_?code|zip"
)
_COLUMN = re.compile(rf"(\w+_)?({_NAMES}|{_NUMBERS}|{_BIRTHS}|{_CONTACTS})")

# These name things of a treatment, however much they sound like a person's name.
_THINGS = re.compile(r"(drug|med(ication)?|unit|device|generator|vent(ilator)?)_?name")

# In any text: a cue followed by what it announces. RE2 syntax, read by DuckDB.
_CUES = (
    r"\b(mrn|medical record|record (no|number)|ssn|csn|account (no|number))\b\W*\d",
    r"\b(dob|d\.o\.b|date of birth|birth ?date|born( on)?)\b\W*\d",
    r"\b(patient|pt|full|last|first)?\s?name\s*[:=]",
    r"\b\d{3}-\d{2}-\d{4}\b",
    r"[\w.+-]+@[\w-]+\.\w",
    r"(^|\D)\(?\d{3}\)?[-. ]\d{3}[-. ]\d{4}(\D|$)",
)
# Titles are told from words only by their capital, so case counts here.
_TITLES = r"\b(Mr|Mrs|Ms|Miss|Mister|Dr|Prof)\b\.? ?[A-Z][a-z]+"

# What no token for a patient should look like: a bare long number, a date, a name.
_TOKEN_CUES = (
    r"^\d{6,}(\.0+)?$",
    r"^\d{4}-\d{2}-\d{2}",
    r"^\d{1,2}[/.]\d{1,2}[/.](\d{2}|\d{4})$",
)
_TOKEN_NAMES = (r"^[A-Z][A-Za-z'-]+, *[A-Z]", r"^[A-Z][a-z]+( [A-Z]\.?)? [A-Z][a-z]+$")


def names_a_person(header: str) -> bool:
    """Whether a column head says that its values identify somebody."""
    plain = re.sub(r"[^a-z0-9]+", "_", header.lower()).strip("_")
    return not _THINGS.fullmatch(plain) and bool(_COLUMN.fullmatch(plain))


def looks_like_a_person(column: Column, value: str) -> str | None:
    """SQL for whether a text value looks like an identifier; None if never asked."""
    if column.kind not in {"id", "token", "text"}:
        return None
    any_case, exact = list(_CUES), [_TITLES]
    if column.name == "patient_token":
        any_case += _TOKEN_CUES
        exact += _TOKEN_NAMES
    pattern = "|".join([f"(?i:{'|'.join(any_case)})", *exact])
    return f"coalesce(regexp_matches({value}, {literal(pattern)}), false)"
