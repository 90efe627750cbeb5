"""How each column of an opened file is read, whatever type it was stored as.

A file written by this project stores the declared types; one written elsewhere may
hold words as plain text, times as dates or with a zone, numbers as decimals. Two SQL
expressions read any of them: ``held`` says what stands in the file (NULL if nothing),
``value`` brings that to the declared type (NULL if it cannot be read as such).
"""

from __future__ import annotations

import re

from engine.columns import UNKNOWN, Column
from engine.log.schema import literal, quoted, words_type

_WHOLE = re.compile(r"U?(TINY|SMALL|BIG)?INT(EGER)?$")
_NUMBERS = re.compile(r"(U?(TINY|SMALL|BIG|HUGE)?INT(EGER)?|DOUBLE|FLOAT|DECIMAL.*)$")
_TIMES = re.compile(r"(TIMESTAMP.*|DATE)$")
_TEXTS = re.compile(r"(VARCHAR|ENUM\(.*|UUID)$", re.DOTALL)

# Year first, always: a day-first or month-first date would be read as some other day.
# The hour ends at 23: DuckDB would read 24:00 as the next day without a word.
ISO_TIME = (
    r"\d{4}-\d{2}-\d{2}([ T]([01]\d|2[0-3]):\d{2}(:\d{2}(\.\d{1,9})?)?"
    r"( ?(Z|[+-]\d{2}(:?\d{2})?))?)?"
)
YES, NO = ("yes", "y", "true", "1"), ("no", "n", "false", "0")


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


def exact_words(column: Column, stored: str) -> bool:
    """Whether the file already stores this column as exactly our word type."""
    listed = ", ".join(literal(word) for word in column.words)
    return stored == f"ENUM({listed})"


def held(column: Column, stored: str) -> str:
    """What stands in the file: text trimmed, other types as they are.

    Blank text, and the word "unknown" where it is not free text, are nothing.
    """
    name = quoted(column.name)
    if not _TEXTS.match(stored) or exact_words(column, stored):
        return name
    text = f"nullif(trim({name}::VARCHAR), '')"
    if column.kind in {"id", "token", "text"}:
        return text
    return f"nullif({text}, {literal(UNKNOWN)})"


def value(column: Column, stored: str, held: str) -> str:
    """The declared type of what ``held`` gives; NULL where it cannot be read."""
    if column.kind == "word":
        return _word(column, stored, held)
    if column.kind == "number":
        number = f"TRY_CAST({held} AS DOUBLE)"
        return f"CASE WHEN isfinite({number}) THEN {number} END"
    if column.kind == "count":
        return _count(stored, held)
    if column.kind == "yes_no":
        return _yes_no(stored, held)
    if column.kind == "time":
        return _time(stored, held)
    return held if stored == "VARCHAR" else f"{held}::VARCHAR"


def _word(column: Column, stored: str, held: str) -> str:
    words = words_type(column)
    if exact_words(column, stored):
        return f"CASE WHEN {held} <> {literal(UNKNOWN)} THEN {held}::{words} END"
    return f"nullif(TRY_CAST(lower({held}) AS {words}), {literal(UNKNOWN)})"


def _count(stored: str, held: str) -> str:
    if _WHOLE.match(stored):
        return f"TRY_CAST({held} AS BIGINT)"
    number = f"TRY_CAST({held} AS DOUBLE)"
    whole = f"isfinite({number}) AND {number} = trunc({number})"
    return f"CASE WHEN {whole} THEN TRY_CAST({number} AS BIGINT) END"


def _yes_no(stored: str, held: str) -> str:
    if stored == "BOOLEAN":
        return held
    if not _TEXTS.match(stored):
        return f"CASE {held} WHEN 1 THEN true WHEN 0 THEN false END"
    yes, no = (", ".join(map(literal, words)) for words in (YES, NO))
    word = f"lower({held})"
    return f"CASE WHEN {word} IN ({yes}) THEN true WHEN {word} IN ({no}) THEN false END"


def _time(stored: str, held: str) -> str:
    if _TEXTS.match(stored):
        # Cast by way of the zoned type: the plain one drops a written offset.
        # It wants no blank before an offset, and the colon many programs leave out.
        colon = f"regexp_replace({held}, ' ?([+-]\\d{{2}}):?(\\d{{2}})$', '\\1:\\2')"
        at = f"TRY_CAST({colon} AS TIMESTAMPTZ) AT TIME ZONE 'UTC'"
        iso = f"regexp_full_match({held}, {literal(ISO_TIME)})"
        return f"CASE WHEN {iso} THEN {at} END"
    if stored == "TIMESTAMP WITH TIME ZONE":
        held = f"({held} AT TIME ZONE 'UTC')"
    return f"CASE WHEN isfinite({held}) THEN TRY_CAST({held} AS TIMESTAMP) END"
