"""Cells as somebody typed them, brought to the log's own words, units and zone, in SQL.

Nothing is guessed: a word is translated only by the map, a figure converted only where
its unit is known, a local time placed in UTC only where it happened once. What stays
unreadable is left as it was typed, for the row checks to refuse in full words.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

from engine.columns import Column, Table
from engine.intake.identifiers import WITHHELD, looks_like_a_person
from engine.intake.mapping import SiteMap
from engine.intake.spelling import factors
from engine.log.checks import Fault
from engine.log.schema import figure, literal, quoted

# What counts as a repair, and how the load report says it.
REPAIRS: dict[str, str] = {
    "unit": "converted from the unit written or mapped",
    "word": "translated by the map",
    "end_of_day": "24:00 read as 00:00 of the next day",
    "mode": "read from the mode as charted",
    "constant": "filled with the constant of the map",
    "local": "placed in UTC from local time",
}

_FIGURE_AND_UNIT = r"^([-+]?[0-9]*\.?[0-9]+(?:[eE][-+]?[0-9]+)?)\s*(\S.*)$"
_LOCAL_TIME = r"\d{4}-\d{2}-\d{2}([ T]([01]\d|2[0-3]):\d{2}(:\d{2}(\.\d{1,9})?)?)?"
_END_OF_DAY = r"(\d{4}-\d{2}-\d{2})[ T]24:00(:00(\.0+)?)?( ?(Z|[+-]\d{2}(:?\d{2})?))?"

# Clocks are put back by an hour nearly everywhere, by half or two in a few zones.
_CLOCK_SHIFTS = ("30 minutes", "60 minutes", "120 minutes")


@dataclass
class Normal:
    """The SQL of one source, step by step: each later step may use the names before."""

    cells: list[str] = field(default_factory=list)
    read: list[str] = field(default_factory=list)
    placed: list[str] = field(default_factory=list)
    doubted: list[str] = field(default_factory=list)
    final: list[str] = field(default_factory=list)
    repairs: dict[tuple[str, str], str] = field(default_factory=dict)

    def steps(self, source: str) -> str:
        """Rows with everything worked out, still without the final names."""
        sql = f"SELECT * , {_listed(self.cells)} FROM {source}"
        for step in (self.read, self.placed, self.doubted):
            sql = f"SELECT *{''.join(', ' + each for each in step)} FROM ({sql})"
        return sql

    def select(self, source: str) -> str:
        """Rows under the log's own names, as text, with what made them doubtful."""
        return f'SELECT i, "row", {_listed(self.final)} FROM ({self.steps(source)})'

    def counts(self, source: str) -> str:
        """One row: how many values of each column were repaired in each way."""
        counts = [f"count_if({when})" for when in self.repairs.values()] or ["0"]
        return f"SELECT {_listed(counts)} FROM ({self.steps(source)})"


def doubt_columns(table: Table) -> dict[str, str]:
    """SQL type by name of the columns beside the log's own.

    who_<column>   the value looks like an identifier
    why_<column>   why a local time has no place in UTC: twice, never, or NULL
    """
    found = {f"who_{c.name}": "BOOLEAN" for c in table.columns if _may_identify(c)}
    times = {f"why_{c.name}": "VARCHAR" for c in table.columns if c.kind == "time"}
    return found | times


def doubts(table: Table, zone: str) -> list[Fault]:
    """Checks that only a raw export needs, over the columns ``doubt_columns`` names."""
    found = []
    for column in table.columns:
        name = column.name
        if _may_identify(column):
            must = f"{name} must not tell who somebody is; the value is withheld"
            who = quoted(f"who_{name}")
            found.append(Fault(name, "identifier", who, literal(WITHHELD), must))
        if column.kind == "time":
            for why, how in (("twice", "came twice"), ("never", "never came")):
                must = (
                    f"{name} must be a time that came once; "
                    f"got {{value}}, which {how} in {zone}"
                )
                when = f"({quoted(f'why_{name}')} = {literal(why)})"
                held = quoted(f"held_{name}")
                found.append(Fault(name, "unreadable", when, held, must))
    return found


def normal(
    table: Table, cells: Mapping[str, str], site_map: SiteMap, zone: str
) -> Normal:
    """The SQL that brings one source to the log's columns.

    ``cells`` gives the name of the cell column for each of our columns the source has.
    """
    plan = Normal()
    for column in table.columns:
        name = column.name
        x = quoted(f"x_{name}")
        if name in cells:
            plan.cells.append(f"nullif(trim({quoted(cells[name])}), '') AS {x}")
        elif name in site_map.constants:
            plan.cells.append(f"{literal(site_map.constants[name])} AS {x}")
            plan.repairs[name, "constant"] = "true"
        else:
            plan.cells.append(f"NULL::VARCHAR AS {x}")
        _add(plan, column, x, site_map, zone)
    return plan


def _add(plan: Normal, column: Column, x: str, site_map: SiteMap, zone: str) -> None:
    if column.kind == "time":
        _add_time(plan, column, x, site_map.times.get(column.name), zone)
    elif column.kind in {"number", "count"}:
        _add_number(plan, column, x, site_map.units.get(column.name))
    elif column.kind in {"word", "yes_no"}:
        _add_word(plan, column, x, site_map.words.get(column.name, {}))
    else:
        _add_text(plan, column, x)


def _add_text(plan: Normal, column: Column, x: str) -> None:
    who = quoted(f"who_{column.name}")
    plan.read.append(f"{looks_like_a_person(column, x)} AS {who}")
    plan.final.append(
        f"CASE WHEN {who} THEN {literal(WITHHELD)} ELSE {x} END "
        f"AS {quoted(column.name)}"
    )
    plan.final.append(who)


def _add_word(plan: Normal, column: Column, x: str, words: Mapping[str, str]) -> None:
    value = x
    if words:
        cases = " ".join(
            f"WHEN {literal(theirs.lower())} THEN {literal(ours)}"
            for theirs, ours in words.items()
        )
        told = quoted(f"told_{column.name}")
        plan.read.append(f"CASE lower({x}) {cases} END AS {told}")
        plan.repairs[column.name, "word"] = f"{told} IS NOT NULL"
        value = f"coalesce({told}, {x})"
    if column.name == "mode":
        # A mode nobody charted as one of our words is looked for in the free text.
        empty = f"({value} IS NULL OR lower({value}) = 'unknown')"
        plan.repairs["mode", "mode"] = f"{empty} AND mode_found IS NOT NULL"
        value = f"CASE WHEN {empty} THEN mode_found ELSE {value} END"
    plan.final.append(f"{value} AS {quoted(column.name)}")


def _add_number(plan: Normal, column: Column, x: str, mapped: str | None) -> None:
    by_unit = factors(column)
    if not by_unit:
        plan.final.append(f"{x} AS {quoted(column.name)}")
        return
    bare, parts = quoted(f"bare_{column.name}"), quoted(f"parts_{column.name}")
    plan.read.append(f"TRY_CAST({x} AS DOUBLE) AS {bare}")
    split = f"regexp_extract({x}, {literal(_FIGURE_AND_UNIT)}, ['figure', 'unit'])"
    plan.read.append(
        f"CASE WHEN {x} IS NOT NULL AND TRY_CAST({x} AS DOUBLE) IS NULL "
        f"THEN {split} END AS {parts}"
    )
    cases = " ".join(
        f"WHEN {literal(unit)} THEN {figure(factor)}"
        for unit, factor in by_unit.items()
    )
    converted = quoted(f"converted_{column.name}")
    said = f"CASE lower({parts}.unit) {cases} END"
    written = f"TRY_CAST({parts}.figure AS DOUBLE) * {said}"
    if mapped is not None:
        factor = figure(by_unit[mapped.lower()])
        written = f"coalesce({written}, {bare} * {factor})"
    plan.placed.append(f"{written} AS {converted}")
    plan.repairs[column.name, "unit"] = f"{converted} IS NOT NULL"
    plan.final.append(f"coalesce({converted}::VARCHAR, {x}) AS {quoted(column.name)}")


def _add_time(
    plan: Normal, column: Column, x: str, written: str | None, zone: str
) -> None:
    name, there = column.name, literal(zone)
    text, local = quoted(f"text_{name}"), quoted(f"local_{name}")
    midnight = literal(_END_OF_DAY)
    day = f"regexp_extract({x}, {midnight}, 1)"
    rest = f"regexp_extract({x}, {midnight}, 4)"
    ends = f"(substr({x}, 12, 2) = '24' AND regexp_full_match({x}, {midnight}))"
    plan.read.append(
        f"CASE WHEN {ends} THEN coalesce((TRY_CAST({day} AS DATE) + 1)::VARCHAR "
        f"|| 'T00:00' || {rest}, {x}) ELSE {x} END AS {text}"
    )
    plain = f"regexp_full_match({text}, {literal(_LOCAL_TIME)})"
    naive = f"CASE WHEN {plain} THEN TRY_CAST({text} AS TIMESTAMP) END"
    if written:
        naive = f"coalesce(try_strptime({x}, {literal(written)}), {naive})"
    plan.placed.append(f"{naive} AS {local}")
    zoned, why = f"timezone({there}, {local})", quoted(f"why_{name}")
    twice = " OR ".join(
        f"timezone({there}, {zoned} {sign} INTERVAL '{shift}') = {local}"
        for shift in _CLOCK_SHIFTS
        for sign in "+-"
    )
    plan.doubted.append(
        f"CASE WHEN timezone({there}, {zoned}) <> {local} THEN 'never' "
        f"WHEN {twice} THEN 'twice' END AS {why}"
    )
    plan.final.append(
        f"CASE WHEN {local} IS NULL OR {why} IS NOT NULL THEN {text} "
        f"ELSE ({zoned} AT TIME ZONE 'UTC')::VARCHAR || 'Z' END AS {quoted(name)}"
    )
    plan.final.append(why)
    plan.repairs[name, "end_of_day"] = ends
    plan.repairs[name, "local"] = f"{local} IS NOT NULL AND {why} IS NULL"


def _may_identify(column: Column) -> bool:
    return column.kind in {"id", "token", "text"}


def _listed(parts: Sequence[str]) -> str:
    return ", ".join(parts)
