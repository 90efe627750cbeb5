"""The row checks, as SQL derived from ``engine.columns``, and their wording.

A row that fails is never dropped: it becomes a row of ``refused`` with a code, the
value and a message of the form "what must hold; got what (where)". A row with several
faults is filed under the first, and its message names them all.

The SQL speaks of two columns made by ``staged`` for each column of the table:
``held_<name>``, what stands in the file, and ``read_<name>``, its value.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
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

# The longest stretch of a foreign value that a message, and a refused row, repeat.
SHOWN_CHARACTERS = 80
KEPT_CHARACTERS = 200

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


def staged(
    columns: Sequence[Column],
    stored: Mapping[str, str],
    source: str,
    also: Sequence[str] = (),
) -> str:
    """SQL for each row's number, what stands in these columns, and their values.

    ``source`` is the FROM clause, ``also`` names columns of it to hand on as they are.
    Two nested steps, so that each value is read once however many checks ask for it.
    """
    held = [f"{quoted(name)}" for name in also]
    values = []
    for column in columns:
        kind = stored[column.name]
        held.append(f"{reading.held(column, kind)} AS {_held(column)}")
        values.append(
            f"{reading.value(column, kind, _held(column))} AS {_read(column)}"
        )
    inner = f"SELECT rowid AS number, {', '.join(held)} FROM {source}"
    return f"SELECT *, {', '.join(values)} FROM ({inner})"


def faults(table: Table, stored: Mapping[str, str]) -> list[Fault]:
    """Every check of a table, in column order; duplicates are found separately.

    ``stored`` gives each column's SQL type in the file.
    """
    found: list[Fault] = []
    for column in table.columns:
        found += _column_faults(column, stored[column.name])
    for before, after in ORDERED.get(table.name, ()):
        found.append(_order_fault(table.column(before), table.column(after)))
    return found


def never(table: Table) -> list[str]:
    """Conditions no row meets, over the columns that no check asks for.

    They make the one pass read every column, so that a damaged block is found when
    the log is opened and not on some later screen.
    """
    return [
        f"len({_held(column)}::VARCHAR) < 0"
        for column in table.columns
        if column.kind in {"id", "token", "text"}
    ] or ["false"]


def duplicate_fault(table: Table) -> Fault:
    """The wording of a repeated id, or of a repeated row where there is no id."""
    if table.key is None:
        return Fault("", "duplicate", "true", "NULL", MUST["duplicate_row"])
    must = MUST["duplicate"].replace("{column}", table.key)
    key = _shown_value(table.column(table.key))
    return Fault(table.key, "duplicate", "true", key, must)


def same_row(table: Table) -> Sequence[Column]:
    """The columns that no two rows may share: the id, or else all of them."""
    return table.columns if table.key is None else (table.column(table.key),)


def place(table: Table, row: str) -> str:
    """SQL for the words that say which row: "treatment 1042", or "treatment row 7"."""
    noun = table.key.rsplit("_", 1)[0] if table.key else table.label.lower()
    by_row = f"{literal(noun + ' row ')} || ({row})"
    if table.key is None:
        return f"({by_row})"
    key = shown(_read(table.column(table.key)))
    return f"coalesce({literal(noun + ' ')} || {key}, {by_row})"


def message(fault: Fault) -> str:
    """SQL for the sentence of a fault, still without its place."""
    before, hole, after = fault.must.partition("{value}")
    if not hole:
        return literal(before)
    got = f"coalesce({shown(fault.value)}, 'nothing')"
    return f"({literal(before)} || {got} || {literal(after)})"


def shown(value: str) -> str:
    """SQL for a value fit to stand in a message: one line, no longer than needed."""
    plain = f"regexp_replace({value}, '[[:cntrl:]]+', ' ', 'g')"
    short = f"left({plain}, {SHOWN_CHARACTERS}) || '...'"
    return f"CASE WHEN len({plain}) > {SHOWN_CHARACTERS} THEN {short} ELSE {plain} END"


def _column_faults(column: Column, stored: str) -> list[Fault]:
    held, value = _held(column), _read(column)
    found = []
    if column.required:
        found.append(_fault(column, "missing", "missing", f"{held} IS NULL"))
    unread = f"{held} IS NOT NULL AND {value} IS NULL"
    if column.kind == "word":
        if not reading.exact_words(column, stored):
            said = f"lower({held}) <> 'unknown'"
            wrong = f"{unread} AND {said}"
            found.append(_fault(column, "unknown_word", "unknown_word", wrong))
    elif column.kind in {"number", "count", "time", "yes_no"}:
        must = f"unreadable_{column.kind}"
        found.append(_fault(column, "unreadable", must, unread))
    return found + _range_faults(column, value)


def _range_faults(column: Column, value: str) -> list[Fault]:
    if column.kind == "time":
        outside = f"year({value}) NOT BETWEEN {FIRST_YEAR} AND {LAST_YEAR}"
        return [_fault(column, "out_of_range", "out_of_range_time", outside)]
    if column.low is None or column.high is None:
        return []
    below = f"{value} < {figure(column.low)}"
    above = f"{value} > {figure(column.high)}"
    return [
        _fault(column, "out_of_range", "out_of_range_low", below),
        _fault(column, "out_of_range", "out_of_range_high", above),
    ]


def _order_fault(before: Column, after: Column) -> Fault:
    must = MUST["wrong_order"].replace("{column}", after.name)
    return Fault(
        after.name,
        "wrong_order",
        f"{_read(after)} < {_read(before)}",
        _shown_value(after),
        must.replace("{other}", before.name),
    )


def _fault(column: Column, code: str, must: str, when: str) -> Fault:
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
    return Fault(column.name, code, f"({when})", _shown_value(column), wording)


def _shown_value(column: Column) -> str:
    text = f"{_held(column)}::VARCHAR"
    # A stored 2.0 is shown as 2, the way it was most likely entered.
    if column.kind in {"number", "count"}:
        return f"regexp_replace({text}, '\\.0$', '')"
    return text


def _held(column: Column) -> str:
    return quoted(f"held_{column.name}")


def _read(column: Column) -> str:
    return quoted(f"read_{column.name}")
