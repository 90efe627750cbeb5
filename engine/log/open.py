"""Opening a log: locked down, read-only, every row either used or refused.

``open_log`` makes one pass over the file to find the rows that fail a check and the
ids that stand twice. The views then read the file itself, leaving those rows out.
"""

from __future__ import annotations

import hashlib
import os
from collections.abc import Mapping
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo

import duckdb
import pandas as pd

from engine.columns import (
    BAD_ROW,
    LOG_INFO,
    RECORD_TABLES,
    SCHEMA_VERSION,
    Column,
    Table,
)
from engine.errors import LogUnreadable
from engine.log import guard, reading
from engine.log.schema import create_types, literal, quoted, sql_type, wal_of
from engine.log.sift import make_refusal, not_refused, sift

Stored = Mapping[str, Mapping[str, str]]
Stamp = tuple[tuple[int, int, int] | None, ...]


class Log:
    """An opened log. Ask it through SQL; it never changes the file.

    ``ignored`` names tables and columns of the file that the log does not have.
    """

    def __init__(
        self,
        path: Path,
        connection: duckdb.DuckDBPyConnection,
        fingerprint: str,
        site_zone: str,
        ignored: tuple[str, ...],
    ) -> None:
        self.path = path
        self.fingerprint = fingerprint
        self.site_zone = site_zone
        self.ignored = ignored
        self._connection = connection

    def cursor(self) -> duckdb.DuckDBPyConnection:
        """A cursor of its own; an open result on one does not disturb another."""
        return self._connection.cursor()

    def frame(self, sql: str, params: Any = None) -> pd.DataFrame:
        """The rows an SQL question gives, as a DataFrame.

        Raises   LogUnreadable if the file can no longer be read.
        """
        try:
            with self.cursor() as cursor:
                return cursor.execute(sql, params).df()
        except duckdb.IOException as error:
            raise LogUnreadable(guard.opening_failed(self.path, error)) from None

    def accounts(self) -> pd.DataFrame:
        """One row a table: rows_in = rows_used + rows_refused, always."""
        return self.frame(
            'SELECT "table", rows_in, rows_used, rows_refused FROM accounts '
            'ORDER BY place, "table"'
        )

    def reopened(self) -> Log:
        """The same file opened afresh on a connection of its own."""
        return open_log(self.path)

    def close(self) -> None:
        """Let go of the file."""
        self._connection.close()

    def __enter__(self) -> Log:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()


def open_log(path: str | os.PathLike[str]) -> Log:
    """Open a log file, locked down and read-only.

    Raises   LogUnreadable, one line saying what is wrong with which file.
    """
    path = Path(os.path.abspath(path))
    guard.refuse_unless_database(path)
    connection = guard.attached(path)
    try:
        stored, ignored = guard.stored_types(connection, path)
        site_zone = _site_zone(connection, path, stored)
        _make_views(connection, path, stored)
        guard.locked(connection)
        return Log(path, connection, fingerprint_of(path), site_zone, ignored)
    except duckdb.Error as error:
        connection.close()
        raise LogUnreadable(guard.opening_failed(path, error)) from None
    except BaseException:
        connection.close()
        raise


def fingerprint_of(path: str | os.PathLike[str]) -> str:
    """The first twelve digits of the SHA-256 of the file as it stands.

    What a crash left in the write-ahead file is part of the log, so it counts too.
    """
    path = Path(path)
    digest = hashlib.sha256()
    for part in (path, wal_of(path)):
        if part.exists():
            with part.open("rb") as file:
                while block := file.read(1 << 20):
                    digest.update(block)
    return digest.hexdigest()[:12]


def stamp_of(path: str | os.PathLike[str]) -> Stamp:
    """A cheap mark that differs once the file is replaced or written to.

    Which file, how large, how old, for the log and its write-ahead file.
    """
    return tuple(_stamp(part) for part in (Path(path), wal_of(Path(path))))


def _stamp(path: Path) -> tuple[int, int, int] | None:
    try:
        found = path.stat()
    except OSError:
        return None
    return found.st_ino, found.st_size, found.st_mtime_ns


def _site_zone(
    connection: duckdb.DuckDBPyConnection, path: Path, stored: Stored
) -> str:
    rows = connection.execute(
        "SELECT TRY_CAST(schema_version AS BIGINT), site_zone::VARCHAR "
        "FROM logged.main.log_info LIMIT 2"
    ).fetchall()
    if len(rows) != 1:
        count = "no row" if not rows else "more than one row"
        raise LogUnreadable(f"{path}: log_info has {count}; it must have one")
    version, zone = rows[0]
    if version != SCHEMA_VERSION:
        raise LogUnreadable(
            f"{path}: log_info.schema_version must be {SCHEMA_VERSION}; got {version}"
        )
    try:
        ZoneInfo(zone or "")
        connection.execute("SELECT timezone(?, TIMESTAMP '2000-01-01')", [zone])
    except Exception:
        shown = str(zone)[:60]
        raise LogUnreadable(
            f"{path}: log_info.site_zone must be a time zone such as Etc/UTC; "
            f"got {shown}"
        ) from None
    return str(zone)


def _make_views(
    connection: duckdb.DuckDBPyConnection, path: Path, stored: Stored
) -> None:
    create_types(connection)
    make_refusal(connection)
    counts = {}
    for table in RECORD_TABLES:
        types = stored[table.name]
        counts[table.name] = sift(connection, table, types, _logged(table))
        connection.execute(_view(table, types, any_refused=counts[table.name] > 0))
    connection.execute(_info_view(stored))
    connection.execute(_refused_view(path))
    connection.execute(_accounts(counts))


def _view(table: Table, stored: Mapping[str, str], any_refused: bool) -> str:
    columns = ", ".join(
        f"{_value(column, stored[column.name])} AS {quoted(column.name)}"
        for column in table.columns
    )
    where = f" WHERE {not_refused(table)}" if any_refused else ""
    return f"CREATE VIEW {table.name} AS SELECT {columns} FROM {_logged(table)}{where}"


def _value(column: Column, stored: str) -> str:
    return reading.value(column, stored, reading.held(column, stored))


def _info_view(stored: Stored) -> str:
    return _view(LOG_INFO, stored["log_info"], any_refused=False)


def _refused_view(path: Path) -> str:
    """Rows refused at intake, then rows refused now with their text as stored."""
    parts = [
        "SELECT "
        + ", ".join(
            f"TRY_CAST({quoted(column.name)} AS {sql_type(column)}) "
            f"AS {quoted(column.name)}"
            for column in BAD_ROW.columns
        )
        + f" FROM {_logged(BAD_ROW)}"
    ]
    for table in RECORD_TABLES:
        parts.append(
            f'SELECT {literal(path.name)}, r.number + 1, r."table", '
            'r."column", r.code, r.value, r.message, to_json(t)::VARCHAR '
            f"FROM refusal r JOIN {_logged(table)} t ON t.rowid = r.number "
            f'WHERE r."table" = {literal(table.name)}'
        )
    return "CREATE VIEW refused AS " + " UNION ALL ".join(parts)


def _accounts(counts: Mapping[str, int]) -> str:
    names = [table.name for table in RECORD_TABLES]
    rows = ", ".join(
        f"({place}, {literal(table.name)}, "
        f"(SELECT count(*) FROM {_logged(table)}), {counts[table.name]})"
        for place, table in enumerate(RECORD_TABLES)
    )
    listed = ", ".join(literal(name) for name in names)
    return f"""
    CREATE TABLE accounts AS
    WITH here(place, "table", stored, refused) AS (VALUES {rows}),
    before AS (
      SELECT CASE WHEN lower("table"::VARCHAR) IN ({listed})
             THEN lower("table"::VARCHAR) ELSE 'unknown' END AS "table",
             count(*) AS refused
      FROM {_logged(BAD_ROW)} GROUP BY 1
    )
    SELECT coalesce(here.place, {len(names)}) AS place, "table",
           coalesce(here.stored, 0) + coalesce(before.refused, 0) AS rows_in,
           coalesce(here.stored, 0) - coalesce(here.refused, 0) AS rows_used,
           coalesce(here.refused, 0) + coalesce(before.refused, 0) AS rows_refused
    FROM here FULL JOIN before USING ("table")
    """


def _logged(table: Table) -> str:
    return f"logged.main.{quoted(table.name)}"
