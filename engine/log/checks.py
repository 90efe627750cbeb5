"""The row checks, as SQL derived from ``engine.columns``, and their wording.

A row that fails is never dropped: it becomes a row of ``refused`` with a code, the
value and a message of the form "what must hold; got what (where)". A row with several
faults is filed under the first, and its message names them all.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from engine.columns import Column, Table
from engine.log import reading
from engine.log.schema import figure, literal, quoted

# Pairs of times that must not run backwards. A treatment that ends before it starts is
# kept: a rule of the record family judges it.
ORDERED: dict[str, tuple[tuple[str, str], ...]] = {
    "filter_use": (("installed_at", "removed_at"),),
}

# Outside these years a time is a slip or a reset clock, and calendars cannot hold it.
FIRST_YEAR, LAST_YEAR = 1900, 2199

# The longest stretch of a foreign value that a message repeats.
SHOWN_CHARACTERS = 80

MUST: dict[str, str] = {
    "missing": "{column} must be given; got nothing",
    "out_of_range_low": "{column} must be at least {low}; got {value}",
    "out_of_range_high": "{column} must be at most {high}; got {value}",
    "out_of_range_time": "{column} must lie between {low} and {high}; got {value}",
    "unknown_word": "{column} must be one of {words}; got {value}",
    "wrong_order": "{column} must not lie before {other}; got {value}",
    "duplicate": "{column} must stand in one row only; got {value} again",
    "duplicate_row": "a row must not repeat another; got the same values again",
    "unreadable_number": "{column} must be a number; got {value}",
    "unreadable_count": "{column} must be a whole number; got {value}",
    "unreadable_time": "{column} must be a date and time; got {value}",
    "unreadable_yes_no": "{column} must be yes or no; got {value}",
}


@dataclass(frozen=True)
class Fault:
    """One way a row can fail: SQL for whether, for the value, and the wording."""

    column: str
    code: str
    when: str
    value: str
    must: str


def faults(table: Table, stored: Mapping[str, str]) -> list[Fault]:
    """Every check of a table, in column order; duplicates are found separately.

    ``stored`` gives each column's SQL type in the file.
    """
    found: list[Fault] = []
    for column in table.columns:
        found += _column_faults(column, stored[column.name])
    for before, after in ORDERED.get(table.name, ()):
        found.append(_order_fault(table, stored, before, after))
    return found


def place(table: Table, stored: Mapping[str, str]) -> str:
    """SQL for the words that say which row: "treatment 1042", or "treatment row 7"."""
    by_row = f"{literal(_noun(table) + ' row ')} || (rowid + 1)"
    if table.key is None:
        return f"({by_row})"
    key = reading.as_text(table.column(table.key), stored[table.key])
    return f"coalesce({literal(_noun(table) + ' ')} || {shown(key)}, {by_row})"


def shown(value: str) -> str:
    """SQL for a value fit to stand in a message: one line, no longer than needed."""
    plain = f"regexp_replace({value}, '[[:cntrl:]]+', ' ', 'g')"
    short = f"left({plain}, {SHOWN_CHARACTERS}) || '...'"
    return f"CASE WHEN len({plain}) > {SHOWN_CHARACTERS} THEN {short} ELSE {plain} END"


def message(fault: Fault, where: str) -> str:
    """SQL for the whole sentence of a fault at the place ``where``."""
    before, _, after = fault.must.partition("{value}")
    got = f"coalesce({shown(fault.value)}, 'nothing')"
    middle = f" || {got} || {literal(after)}" if "{value}" in fault.must else ""
    return f"({literal(before)}{middle} || ' (' || {where} || ')')"


def duplicate_fault(table: Table, stored: Mapping[str, str]) -> Fault:
    """The wording of a repeated id, or of a repeated row where there is no id."""
    if table.key is None:
        return Fault("", "duplicate", "true", "NULL", MUST["duplicate_row"])
    key = reading.as_text(table.column(table.key), stored[table.key])
    must = MUST["duplicate"].replace("{column}", table.key)
    return Fault(table.key, "duplicate", "true", key, must)


def _column_faults(column: Column, stored: str) -> list[Fault]:
    text, value = reading.as_text(column, stored), reading.as_value(column, stored)
    found = []
    if column.required:
        found.append(_fault(column, "missing", "missing", f"{text} IS NULL", text))
    if column.kind == "word":
        if not reading.exact_words(column, stored):
            wrong = f"{text} IS NOT NULL AND lower({text}) NOT IN ({_listed(column)})"
            found.append(_fault(column, "unknown_word", "unknown_word", wrong, text))
        return found
    if column.kind in {"number", "count", "time", "yes_no"}:
        wrong = f"{text} IS NOT NULL AND {value} IS NULL"
        must = f"unreadable_{column.kind}"
        found.append(_fault(column, "unreadable", must, wrong, _plain(column, text)))
    return found + _range_faults(column, text, value)


def _range_faults(column: Column, text: str, value: str) -> list[Fault]:
    if column.kind == "time":
        outside = f"year({value}) NOT BETWEEN {FIRST_YEAR} AND {LAST_YEAR}"
        return [_fault(column, "out_of_range", "out_of_range_time", outside, text)]
    if column.low is None or column.high is None:
        return []
    below, above = (
        f"{value} < {figure(column.low)}",
        f"{value} > {figure(column.high)}",
    )
    got = _plain(column, text)
    return [
        _fault(column, "out_of_range", "out_of_range_low", below, got),
        _fault(column, "out_of_range", "out_of_range_high", above, got),
    ]


def _order_fault(
    table: Table, stored: Mapping[str, str], before: str, after: str
) -> Fault:
    first, last = table.column(before), table.column(after)
    start = reading.as_value(first, stored[before])
    end = reading.as_value(last, stored[after])
    text = reading.as_text(last, stored[after])
    must = MUST["wrong_order"].replace("{column}", after).replace("{other}", before)
    return Fault(after, "wrong_order", f"{end} < {start}", text, must)


def _fault(column: Column, code: str, must: str, when: str, value: str) -> Fault:
    low, high = column.low, column.high
    if column.kind == "time":
        low, high = FIRST_YEAR, LAST_YEAR
    wording = (
        MUST[must]
        .replace("{column}", column.name)
        .replace("{words}", ", ".join(column.words))
        .replace("{low}", "" if low is None else figure(low))
        .replace("{high}", "" if high is None else figure(high))
    )
    return Fault(column.name, code, f"({when})", value, wording)


def _plain(column: Column, text: str) -> str:
    # A stored 2.0 is shown as 2, the way it was most likely entered.
    if column.kind in {"number", "count"}:
        return f"regexp_replace({text}, '\\.0$', '')"
    return text


def _listed(column: Column) -> str:
    return ", ".join(literal(word) for word in column.words)


def _noun(table: Table) -> str:
    if table.key is None:
        return table.label.lower()
    return quoted(table.key)[1:-1].rsplit("_", 1)[0]
