"""Finding the rows of one table that fail a check, and the ids that stand twice."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import duckdb

from engine.columns import Table
from engine.log import checks
from engine.log.schema import literal, quoted

_REFUSAL = """
CREATE TABLE refusal (
  "table" VARCHAR, number BIGINT, "column" VARCHAR, code VARCHAR, value VARCHAR,
  message VARCHAR
)
"""


def make_refusal(connection: duckdb.DuckDBPyConnection) -> None:
    """The table ``refusal``: one row for each refused row, by its row number."""
    connection.execute(_REFUSAL)


def sift(
    connection: duckdb.DuckDBPyConnection,
    table: Table,
    stored: Mapping[str, str],
    source: str,
    *,
    extra: Sequence[checks.Fault] = (),
    also: Sequence[str] = (),
    row: str = "number + 1",
) -> int:
    """Put the failing rows of ``source`` into ``refusal``; return how many there are.

    ``extra`` are checks of the caller's own, asked first; ``also`` the columns of the
    source they speak of, and ``row`` SQL for the row number a message gives.
    """
    _find_failing(connection, table, stored, source, extra, also, row)
    _find_repeated(connection, table, stored, source, also, row)
    return _count(
        connection,
        f'SELECT count(*) FROM refusal WHERE "table" = {literal(table.name)}',
    )


def not_refused(table: Table) -> str:
    """SQL condition on rowid: the row passed every check."""
    return (
        "rowid NOT IN (SELECT number FROM refusal "
        f'WHERE "table" = {literal(table.name)})'
    )


def _find_failing(
    connection: duckdb.DuckDBPyConnection,
    table: Table,
    stored: Mapping[str, str],
    source: str,
    extra: Sequence[checks.Fault],
    also: Sequence[str],
    row: str,
) -> None:
    found = [*extra, *checks.faults(table, stored)]
    flags = ", ".join([*checks.never(table), *(fault.when for fault in found)])
    # An aggregate, not a filter: DuckDB would push a filter down through the staging
    # and read every value again for every check that asks for it.
    connection.execute(
        "CREATE TEMP TABLE suspect AS SELECT unnest(numbers) AS number FROM ("
        f"SELECT list(number) FILTER (WHERE greatest({flags})) AS numbers "
        f"FROM ({checks.staged(table.columns, stored, source, also)}))"
    )
    if _count(connection, "SELECT count(*) FROM suspect"):
        suspects = f"{source} WHERE rowid IN (SELECT number FROM suspect)"
        cases = ", ".join(
            f"CASE WHEN {fault.when} THEN {_as_struct(fault)} END" for fault in found
        )
        connection.execute(
            "INSERT INTO refusal "
            f"SELECT {literal(table.name)}, number, f[1].c, f[1].d, f[1].v, "
            "array_to_string(list_transform(f, lambda x: x.m), '; ') "
            "|| ' (' || place || ')' FROM ("
            f"SELECT number, {checks.place(table, row)} AS place, "
            f"list_filter([{cases}], lambda x: x IS NOT NULL) AS f "
            f"FROM ({checks.staged(table.columns, stored, suspects, also)}))"
        )
    connection.execute("DROP TABLE suspect")


def _find_repeated(
    connection: duckdb.DuckDBPyConnection,
    table: Table,
    stored: Mapping[str, str],
    source: str,
    also: Sequence[str],
    row: str,
) -> None:
    """A repeat counts only among rows that pass every other check."""
    columns = checks.same_row(table)
    names = [quoted(f"read_{column.name}") for column in columns]
    keys = ", ".join(names)
    passed = f"{source} WHERE {not_refused(table)}"
    rows = checks.staged(columns, stored, passed, also)
    connection.execute(
        f"CREATE TEMP TABLE repeated AS SELECT {keys}, min(number) AS first "
        f"FROM ({rows}) GROUP BY {keys} HAVING count(*) > 1"
    )
    if _count(connection, "SELECT count(*) FROM repeated"):
        fault = checks.duplicate_fault(table)
        same = " AND ".join(f"r.{name} IS NOT DISTINCT FROM d.{name}" for name in names)
        connection.execute(
            f"INSERT INTO refusal SELECT {literal(table.name)}, r.number, "
            f"{literal(fault.column)}, 'duplicate', r.value, r.message FROM ("
            f"SELECT number, {keys}, {fault.value} AS value, {checks.message(fault)} "
            f"|| ' (' || {checks.place(table, row)} || ')' AS message FROM ({rows})) r "
            f"JOIN repeated d ON {same} WHERE r.number > d.first"
        )
    connection.execute("DROP TABLE repeated")


def _as_struct(fault: checks.Fault) -> str:
    return (
        f"{{'c': {literal(fault.column)}, 'd': {literal(fault.code)}, "
        f"'v': left({fault.value}, {checks.KEPT_CHARACTERS}), "
        f"'m': {checks.message(fault)}}}"
    )


def _count(connection: duckdb.DuckDBPyConnection, sql: str) -> int:
    return int(connection.execute(sql).fetchall()[0][0])
