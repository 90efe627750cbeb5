"""The log file's tables, written from ``engine.columns``, and how a log is written.

A log is never changed in place: a new file is built beside it, closed whole, and put
in its place in one step, so that a reader sees the old log or the new one.
"""

from __future__ import annotations

import os
from collections.abc import Iterator, Mapping
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import duckdb
import pandas as pd
import pyarrow as pa

from engine.columns import SCHEMA_VERSION, TABLES, Column, Table

# The newest format that puts no random identifier into the file: the same rows give the
# same bytes, on one thread.
STORAGE = "v1.3.0"

_SQL_TYPES = {
    "id": "VARCHAR",
    "token": "VARCHAR",
    "text": "VARCHAR",
    "number": "DOUBLE",
    "count": "BIGINT",
    "yes_no": "BOOLEAN",
    "time": "TIMESTAMP",
}


def quoted(name: str) -> str:
    """A name as an SQL identifier."""
    return '"' + name.replace('"', '""') + '"'


def literal(text: str) -> str:
    """A text as an SQL literal."""
    return "'" + text.replace("'", "''") + "'"


def figure(value: float) -> str:
    """A limit as it stands in SQL and in messages: no more digits than it has."""
    return f"{value:.15g}"


def words_type(column: Column) -> str:
    """The name of the ENUM type that holds this column's words."""
    return f"{column.name}_words"


def sql_type(column: Column) -> str:
    """The type the column has in the file and in the views."""
    return words_type(column) if column.kind == "word" else _SQL_TYPES[column.kind]


def create(connection: duckdb.DuckDBPyConnection) -> None:
    """Make the word types and every table of an empty log."""
    create_types(connection)
    for table in TABLES:
        connection.execute(definition(table))


def create_types(connection: duckdb.DuckDBPyConnection) -> None:
    """Make one ENUM type for each word column, words in declared order."""
    for name, words in word_types().items():
        listed = ", ".join(literal(word) for word in words)
        connection.execute(f"CREATE TYPE {name} AS ENUM ({listed})")


def word_types() -> dict[str, tuple[str, ...]]:
    """Words by ENUM type name; tables that share a column name share its words."""
    types: dict[str, tuple[str, ...]] = {}
    for column in _word_columns():
        if types.setdefault(words_type(column), column.words) != column.words:
            raise ValueError(f"{column.name} has two word lists; rename one column")
    return types


def definition(table: Table) -> str:
    """The CREATE TABLE statement; limits and required values are constraints."""
    lines = ",\n  ".join(_column_line(column) for column in table.columns)
    return f"CREATE TABLE {quoted(table.name)} (\n  {lines}\n)"


def write_log(
    path: str | os.PathLike[str],
    tables: Mapping[str, pd.DataFrame | pa.Table],
    site_zone: str,
    created_at: datetime,
    sources: str = "",
) -> None:
    """Write a new log file of these rows, in place of any file of that name.

    The same rows give the same bytes. Columns left out are missing throughout; NaN is
    missing. Times without a zone are UTC. Rows must already hold the limits of
    ``engine.columns``: what does not belongs in the table ``bad_row``.
    Raises   ValueError for a table or column the log does not have, or a value a
             column cannot hold.
    """
    path = Path(path)
    building = path.with_name(f".{path.name}.{os.getpid()}.building")
    building.unlink(missing_ok=True)
    try:
        _build(building, tables, site_zone, created_at, sources)
        building.chmod(0o600)
        # A write-ahead file left by a crash belongs to the old file, not to this one.
        wal_of(path).unlink(missing_ok=True)
        os.replace(building, path)
    finally:
        building.unlink(missing_ok=True)
        wal_of(building).unlink(missing_ok=True)


def wal_of(path: Path) -> Path:
    """Where DuckDB keeps what it has not yet folded into the file."""
    return path.with_name(path.name + ".wal")


def _build(
    path: Path,
    tables: Mapping[str, pd.DataFrame | pa.Table],
    site_zone: str,
    created_at: datetime,
    sources: str,
) -> None:
    known = {table.name: table for table in TABLES if table.name != "log_info"}
    strangers = sorted(set(tables) - set(known))
    if strangers:
        raise ValueError(f"a log has no table {strangers[0]}")
    with duckdb.connect(
        ":memory:",
        config={
            "threads": 1,
            "python_enable_replacements": False,
            "temp_directory": f"{path}.spill",
        },
    ) as connection:
        connection.execute("SET TimeZone = 'UTC'")
        connection.execute(
            f"ATTACH {literal(str(path))} AS built (STORAGE_VERSION '{STORAGE}')"
        )
        connection.execute("USE built")
        create(connection)
        for name, rows in tables.items():
            _insert(connection, known[name], rows)
        connection.execute(
            "INSERT INTO log_info VALUES (?, ?, ?, ?)",
            [SCHEMA_VERSION, site_zone, _as_utc(created_at), sources],
        )
        connection.execute("CHECKPOINT built")
        connection.execute("USE memory")
        connection.execute("DETACH built")


def _insert(
    connection: duckdb.DuckDBPyConnection,
    table: Table,
    rows: pd.DataFrame | pa.Table,
) -> None:
    given = list(rows.columns if isinstance(rows, pd.DataFrame) else rows.column_names)
    declared = {column.name: column for column in table.columns}
    strangers = sorted(set(given) - set(declared))
    if strangers:
        raise ValueError(f"{table.name} has no column {strangers[0]}")
    if not given:
        return
    names = ", ".join(quoted(name) for name in given)
    values = ", ".join(_value(declared[name]) for name in given)
    connection.register("rows_given", rows)
    try:
        connection.execute(
            f"INSERT INTO {quoted(table.name)} ({names}) SELECT {values} "
            "FROM rows_given"
        )
    except duckdb.Error as error:
        raise ValueError(f"{table.name}: {str(error).splitlines()[0]}") from error
    finally:
        connection.unregister("rows_given")


def _value(column: Column) -> str:
    name = quoted(column.name)
    if column.kind == "number":
        return f"CASE WHEN NOT isnan({name}::DOUBLE) THEN {name}::DOUBLE END"
    if column.kind == "count":
        return f"CASE WHEN NOT isnan({name}::DOUBLE) THEN {name}::BIGINT END"
    return f"{name}::{sql_type(column)}"


def _column_line(column: Column) -> str:
    line = f"{quoted(column.name)} {sql_type(column)}"
    if column.required:
        line += " NOT NULL"
    if column.low is not None and column.high is not None:
        low, high = figure(column.low), figure(column.high)
        line += f" CHECK ({quoted(column.name)} BETWEEN {low} AND {high})"
    return line


def _word_columns() -> Iterator[Column]:
    for table in TABLES:
        yield from (column for column in table.columns if column.kind == "word")


def _as_utc(at: datetime) -> Any:
    return at.astimezone(UTC).replace(tzinfo=None) if at.tzinfo else at
