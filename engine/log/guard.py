"""Opening a database file as if it were a program: what is refused, in one line each.

A DuckDB file can carry views and macros that read other files when they are asked.
Nothing stored in the file is run: outside access is off before the catalogue is looked
at, only base tables are accepted, and the settings are locked.
"""

from __future__ import annotations

import os
import stat
import tempfile
from pathlib import Path

import duckdb

from engine.columns import TABLES, Table
from engine.errors import LogUnreadable
from engine.log import reading
from engine.log.schema import literal

MEMORY_LIMIT = "2GB"
THREADS = 2

# Bytes 8 to 11 of every DuckDB file.
_MAGIC = b"DUCK"

_CONFIG: dict[str, str | bool | int | float | list[str]] = {
    "threads": THREADS,
    "memory_limit": MEMORY_LIMIT,
    "python_enable_replacements": False,
    "autoinstall_known_extensions": False,
    "autoload_known_extensions": False,
    "allow_community_extensions": False,
}


def refuse_unless_database(path: Path) -> None:
    """Raise LogUnreadable unless the path is a whole, readable DuckDB file."""
    try:
        kind = path.stat()
        if stat.S_ISDIR(kind.st_mode):
            raise LogUnreadable(f"{path} is a folder; name the log file in it")
        if not stat.S_ISREG(kind.st_mode):
            raise LogUnreadable(f"{path} is not a file; name a log file")
        if kind.st_size == 0:
            raise LogUnreadable(f"{path} is empty; a log is a DuckDB file")
        with path.open("rb") as file:
            head = file.read(12)
    except FileNotFoundError:
        raise LogUnreadable(f"{path} does not exist; check the name") from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or error
        raise LogUnreadable(f"{path} cannot be read: {reason}") from None
    if head[8:] != _MAGIC:
        raise LogUnreadable(f"{path} is not a DuckDB file; a log is a DuckDB file")


def attached(path: Path) -> duckdb.DuckDBPyConnection:
    """A private connection with the file attached read-only as ``logged``, shut in.

    Settings are not yet locked; ``locked`` does that once the views stand.
    Raises   LogUnreadable if DuckDB cannot open the file.
    """
    connection = duckdb.connect(":memory:", config=_CONFIG)
    spill = Path(
        tempfile.gettempdir(), f"aerosol-review-{os.getpid()}-{id(connection)}"
    )
    try:
        connection.execute("SET TimeZone = 'UTC'")
        connection.execute(f"SET temp_directory = {literal(str(spill))}")
        connection.execute(
            f"ATTACH {literal(str(path))} AS logged (READ_ONLY, TYPE duckdb)"
        )
        connection.execute("SET enable_external_access = false")
    except duckdb.Error as error:
        connection.close()
        raise LogUnreadable(opening_failed(path, error)) from None
    return connection


def locked(connection: duckdb.DuckDBPyConnection) -> None:
    """From here on no setting can be changed back."""
    connection.execute("SET lock_configuration = true")


def opening_failed(path: Path, error: duckdb.Error) -> str:
    """One clear line for what DuckDB said about the file."""
    said = str(error)
    if "Could not set lock" in said or "Conflicting lock" in said:
        return f"{path} is being written by another program; close it there and retry"
    if "different configuration" in said or "already attached" in said:
        return f"{path} is open for writing in this program; close it and retry"
    if "Unique file handle conflict" in said:
        return f"{path} is open for writing in this program; close it and retry"
    if "encrypt" in said.lower():
        return f"{path} is encrypted; give the log as a plain DuckDB file"
    if "newer version" in said or "storage version" in said.lower():
        return f"{path} was written by a DuckDB this program does not know"
    if isinstance(error, duckdb.PermissionException):
        return f"{path} cannot be read: permission denied"
    return f"{path} is damaged or cut short; restore it from its source"


def stored_types(
    connection: duckdb.DuckDBPyConnection, path: Path
) -> tuple[dict[str, dict[str, str]], tuple[str, ...]]:
    """SQL type by column by table, and the names in the file that nobody reads.

    Raises   LogUnreadable for a view, macro, trigger or computed column anywhere in
             the file, for a missing table or column, and for a column of a type that
             cannot hold what ours holds.
    """
    _refuse_programs(connection, path)
    rows = connection.execute(
        "SELECT table_name, column_name, data_type, is_generated FROM duckdb_columns() "
        "WHERE database_name = 'logged' AND schema_name = 'main' ORDER BY 1, 2"
    ).fetchall()
    found: dict[str, dict[str, str]] = {}
    for table, column, stored, generated in rows:
        if generated:
            raise LogUnreadable(
                f"{path}: {table}.{column} is computed by the file; a log holds values"
            )
        found.setdefault(table.lower(), {})[column.lower()] = stored
    kept = {table.name: _columns_of(table, found, path) for table in TABLES}
    ignored = [name for name in found if name not in kept]
    for name in kept:
        ignored += [f"{name}.{c}" for c in found[name] if c not in kept[name]]
    return kept, tuple(sorted(ignored))


def _columns_of(
    table: Table, found: dict[str, dict[str, str]], path: Path
) -> dict[str, str]:
    if table.name not in found:
        raise LogUnreadable(f"{path} has no table {table.name}; every log has one")
    columns = found[table.name]
    if "rowid" in columns:
        raise LogUnreadable(f"{path}: {table.name} has a column rowid; rename it")
    for column in table.columns:
        if column.name not in columns:
            raise LogUnreadable(
                f"{path}: table {table.name} has no column {column.name}"
            )
        stored = columns[column.name]
        if not reading.stored_ok(column, stored):
            raise LogUnreadable(
                f"{path}: {table.name}.{column.name} is stored as "
                f"{stored[:40]}; it must hold a {_KINDS[column.kind]}"
            )
    return {column.name: columns[column.name] for column in table.columns}


def _refuse_programs(connection: duckdb.DuckDBPyConnection, path: Path) -> None:
    for kind, function, name in (
        ("view", "duckdb_views()", "view_name"),
        ("macro", "duckdb_functions()", "function_name"),
        ("trigger", "duckdb_triggers()", "trigger_name"),
    ):
        rows = connection.execute(
            f"SELECT {name} FROM {function} WHERE database_name = 'logged' ORDER BY 1"
        ).fetchall()
        if rows:
            raise LogUnreadable(
                f"{path}: {str(rows[0][0])[:60]} is a {kind}; "
                "a log holds base tables only; not opened"
            )


_KINDS = {
    "id": "id",
    "token": "token",
    "text": "text",
    "word": "word",
    "number": "number",
    "count": "whole number",
    "yes_no": "yes or no",
    "time": "time",
}
