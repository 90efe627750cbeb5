"""The rows that were not used, each with where it stood and what it held."""

from __future__ import annotations

from collections.abc import Sequence

import duckdb
import pyarrow as pa

from engine.columns import RECORD_TABLES
from engine.intake.identifiers import WITHHELD, looks_like_a_person
from engine.intake.placing import Taken, cells_name, taken_name
from engine.log.schema import literal, quoted


def bad_rows(connection: duckdb.DuckDBPyConnection, taken: Sequence[Taken]) -> pa.Table:
    """Rows for the table ``bad_row``, in the order of sources and rows."""
    parts = [
        part for one in taken for part in (_broken(connection, one), _refused(one))
    ]
    return connection.sql(
        f'SELECT * FROM ({" UNION ALL ".join(parts)}) ORDER BY source, "row"'
    ).to_arrow_table()


def _refused(one: Taken) -> str:
    """Refused rows of one source, each with the cells it came with."""
    held = ", ".join(
        f"{literal(one.source.heads[int(cell[1:])])}: {_shielded(one, name, cell)}"
        for name, cell in one.cells.items()
    )
    return (
        f'SELECT {literal(one.source.name)} AS source, t."row" AS "row", '
        'r."table" AS "table", r."column" AS "column", r.code AS code, '
        "r.value AS value, r.message AS message, "
        f"to_json({{{held}}})::VARCHAR AS raw FROM refusal r "
        f"JOIN {taken_name(one.table)} t ON t.rowid = r.number "
        f"JOIN {cells_name(one)} c ON c.i = t.i "
        f'WHERE r."table" = {literal(one.table.name)} AND t.source = {one.place}'
    )


def _shielded(one: Taken, name: str, cell: str) -> str:
    if one.table.column(name).kind not in {"id", "token", "text"}:
        return f"c.{quoted(cell)}"
    who = f"t.{quoted('who_' + name)}"
    return f"CASE WHEN {who} THEN {literal(WITHHELD)} ELSE c.{quoted(cell)} END"


def _broken(connection: duckdb.DuckDBPyConnection, one: Taken) -> str:
    """Rows whose cells did not fit the head; their text only if it can be shown."""
    broken = one.source.broken
    name = f"broken_{one.place}"
    rows = pa.table(
        {
            "row": pa.array([b.row for b in broken], pa.int64()),
            "cells": pa.array([b.cells for b in broken], pa.int64()),
            "expected": pa.array([b.expected for b in broken], pa.int64()),
            "text": pa.array([b.text for b in broken], pa.string()),
        }
    )
    connection.register(name, rows)
    # In a row out of step nobody can tell which cell is which; it is kept only if
    # every column would have been taken in and nothing in it looks like a person.
    note = next(c for t in RECORD_TABLES for c in t.columns if c.kind == "text")
    hide = "true" if one.untaken else looks_like_a_person(note, "text")
    noun = one.table.key.rsplit("_", 1)[0] if one.table.key else one.table.label.lower()
    message = (
        "'a row must have ' || expected || ' cells; got ' || cells || ' (' || "
        f"{literal(noun)} || ' row ' || \"row\" || ')'"
    )
    return (
        f'SELECT {literal(one.source.name)} AS source, "row", '
        f'{literal(one.table.name)} AS "table", \'\' AS "column", '
        f"'unreadable' AS code, NULL::VARCHAR AS value, {message} AS message, "
        f"CASE WHEN {hide} THEN {literal(WITHHELD)} ELSE text END AS raw FROM {name}"
    )
