"""How each column of an opened file is read, whatever type it was stored as.

A file written by this project stores the declared types; one written elsewhere may
hold words as plain text, times as dates or with a zone, numbers as decimals. Each is
read here as an SQL expression that gives NULL both for a missing and for an unreadable
value; ``as_text`` tells the two apart.
"""

from __future__ import annotations

import re

from engine.columns import UNKNOWN, Column
from engine.log.schema import literal, quoted, words_type

_NUMBERS = re.compile(r"(U?(TINY|SMALL|BIG|HUGE)?INT(EGER)?|DOUBLE|FLOAT|DECIMAL.*)$")
_TIMES = re.compile(r"(TIMESTAMP.*|DATE)$")
_TEXTS = re.compile(r"(VARCHAR|ENUM\(.*|UUID)$", re.DOTALL)

# Year first, always: a day-first or month-first date would be read as some other day.
_ISO_TIME = (
    r"\d{4}-\d{2}-\d{2}([ T]\d{2}:\d{2}(:\d{2}(\.\d{1,9})?)?"
    r"( ?(Z|[+-]\d{2}(:?\d{2})?))?)?"
)
_YES, _NO = ("yes", "y", "true", "1"), ("no", "n", "false", "0")


def stored_ok(column: Column, stored: str) -> bool:
    """Whether a column of this stored SQL type can hold what ours holds at all."""
    if _TEXTS.match(stored):
        return True
    if column.kind in {"number", "count"}:
        return bool(_NUMBERS.match(stored))
    if column.kind == "yes_no":
        return stored == "BOOLEAN" or bool(_NUMBERS.match(stored))
    if column.kind == "time":
        return bool(_TIMES.match(stored))
    return column.kind != "word" and bool(_NUMBERS.match(stored))


def as_text(column: Column, stored: str) -> str:
    """The value as stored, as trimmed text; NULL where nothing stands."""
    name = quoted(column.name)
    if _TEXTS.match(stored):
        text = f"nullif(trim({name}::VARCHAR), '')"
        # "unknown" says as much as an empty cell, in a column of any kind but text.
        if column.kind in {"word", "number", "count", "yes_no", "time"}:
            return f"nullif({text}, {literal(UNKNOWN)})"
        return text
    return f"{name}::VARCHAR"


def as_value(column: Column, stored: str) -> str:
    """The value in the declared type; NULL where missing or unreadable."""
    name = quoted(column.name)
    text = as_text(column, stored)
    if column.kind == "word":
        return _word(column, stored, text)
    if column.kind == "number":
        number = f"TRY_CAST({text if _TEXTS.match(stored) else name} AS DOUBLE)"
        return f"CASE WHEN isfinite({number}) THEN {number} END"
    if column.kind == "count":
        return _count(stored, name, text)
    if column.kind == "yes_no":
        return _yes_no(stored, name, text)
    if column.kind == "time":
        return _time(stored, name, text)
    return text


def exact_words(column: Column, stored: str) -> bool:
    """Whether the file already stores this column as exactly our word type."""
    listed = ", ".join(literal(word) for word in column.words)
    return stored == f"ENUM({listed})"


def _word(column: Column, stored: str, text: str) -> str:
    name, words = quoted(column.name), words_type(column)
    if exact_words(column, stored):
        return f"CASE WHEN {name} <> {literal(UNKNOWN)} THEN {name}::{words} END"
    return f"nullif(TRY_CAST(lower({text}) AS {words}), {literal(UNKNOWN)})"


def _count(stored: str, name: str, text: str) -> str:
    if re.match(r"U?(TINY|SMALL|BIG)?INT(EGER)?$", stored):
        return f"TRY_CAST({name} AS BIGINT)"
    number = f"TRY_CAST({text} AS DOUBLE)"
    whole = f"isfinite({number}) AND {number} = trunc({number})"
    return f"CASE WHEN {whole} THEN TRY_CAST({number} AS BIGINT) END"


def _yes_no(stored: str, name: str, text: str) -> str:
    if stored == "BOOLEAN":
        return name
    word = f"lower({text})"
    if not _TEXTS.match(stored):
        word = f"CASE {name} WHEN 1 THEN '1' WHEN 0 THEN '0' END"
    yes, no = (", ".join(map(literal, words)) for words in (_YES, _NO))
    return f"CASE WHEN {word} IN ({yes}) THEN true WHEN {word} IN ({no}) THEN false END"


def _time(stored: str, name: str, text: str) -> str:
    if _TEXTS.match(stored):
        iso = f"regexp_full_match({text}, {literal(_ISO_TIME)})"
        # DuckDB reads 24:00 as the next day without a word; here it is unreadable.
        plain = f"{text} NOT SIMILAR TO '.{{10}}[ T]24.*'"
        # Cast by way of the zoned type: the plain one drops a written offset.
        at = f"TRY_CAST({text} AS TIMESTAMPTZ) AT TIME ZONE 'UTC'"
        return f"CASE WHEN {iso} AND {plain} THEN {at} END"
    if stored == "TIMESTAMP WITH TIME ZONE":
        name = f"({name} AT TIME ZONE 'UTC')"
    return f"CASE WHEN isfinite({name}) THEN TRY_CAST({name} AS TIMESTAMP) END"
