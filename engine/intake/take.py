"""Raw exports in, one log out, and a report of what became of every row."""

from __future__ import annotations

import hashlib
import os
import tempfile
from collections.abc import Mapping, Sequence
from datetime import datetime
from pathlib import Path
from typing import Any

import duckdb
import numpy as np
import pandas as pd
import pyarrow as pa

from engine.columns import RECORD_TABLES, Table
from engine.errors import LogUnreadable, SourceUnreadable
from engine.intake.mapping import SiteMap, load_map, zone_of
from engine.intake.modes import clear_modes, plain_term
from engine.intake.normal import doubt_columns, doubts
from engine.intake.placing import Taken, cells_name, place_source, taken_name
from engine.intake.refused import bad_rows
from engine.intake.report import LoadReport, report_of
from engine.log import open_log, reading, write_log
from engine.log.guard import refuse_unless_database
from engine.log.schema import create_types, quoted
from engine.log.sift import make_refusal, not_refused, sift

_MEMORY_LIMIT = "4GB"


def take_in(
    sources: Sequence[str | os.PathLike[str]],
    into: str | os.PathLike[str],
    site_zone: str | None,
    created_at: datetime,
    mapping: str | os.PathLike[str] | Mapping[str, Any] | None = None,
) -> LoadReport:
    """Read exports, check every row, write the log ``into`` and say what happened.

    A source holds one table, told by the map, its file name or its columns. Times
    without an offset are in ``site_zone`` (or the map's). A row that fails a check goes
    to ``bad_row`` with where it stood and what it held.
    Raises   SourceUnreadable for a file, map or zone that cannot be used at all, and
             where ``into`` is there already and is no log.
    """
    site_map = load_map(mapping)
    zone = zone_of(site_zone or site_map.site_zone, "site_zone")
    into = Path(into)
    _refuse_to_overwrite(into, sources)
    if not sources:
        raise SourceUnreadable("no source given; name the files to take in")
    taken = [place_source(i, path, site_map, zone) for i, path in enumerate(sources)]
    tables = [t for t in RECORD_TABLES if any(one.table is t for one in taken)]
    with _working(tables) as connection:
        repaired = [_fill(connection, one, site_map) for one in taken]
        for table in tables:
            _sift(connection, table, zone)
        rows = {table.name: _used(connection, table) for table in tables}
        bad = bad_rows(connection, taken)
    report = report_of(taken, rows, bad, pd.concat(repaired))
    names = "; ".join(
        f"{t.source.name} {_digest(p)}" for t, p in zip(taken, sources, strict=True)
    )
    write_log(into, {**rows, "bad_row": bad}, zone, created_at, names)
    _compare(into, report)
    return report


def _working(tables: Sequence[Table]) -> duckdb.DuckDBPyConnection:
    connection = duckdb.connect(
        ":memory:",
        config={
            "threads": 2,
            "memory_limit": _MEMORY_LIMIT,
            "python_enable_replacements": False,
            "autoinstall_known_extensions": False,
            "autoload_known_extensions": False,
            "temp_directory": str(
                Path(tempfile.gettempdir(), f"aerosol-intake-{os.getpid()}")
            ),
        },
    )
    connection.execute("SET TimeZone = 'UTC'")
    create_types(connection)
    make_refusal(connection)
    for table in tables:
        columns = [f"{quoted(c.name)} VARCHAR" for c in table.columns]
        columns += [f"{quoted(n)} {kind}" for n, kind in doubt_columns(table).items()]
        connection.execute(
            f"CREATE TABLE {taken_name(table)} "
            f'(source INTEGER, i BIGINT, "row" BIGINT, {", ".join(columns)})'
        )
    return connection


def _fill(
    connection: duckdb.DuckDBPyConnection, one: Taken, site_map: SiteMap
) -> pd.DataFrame:
    """Put a source's rows, brought to our columns, into its table; count repairs."""
    cells = one.source.cells
    cells = cells.append_column("i", pa.array(np.arange(len(cells))))
    cells = cells.append_column("row", pa.array(one.source.rows, pa.int64()))
    cells = cells.append_column("mode_found", _modes_found(one, site_map))
    name = cells_name(one)
    connection.register(name, cells)
    columns = [*(c.name for c in one.table.columns), *doubt_columns(one.table)]
    listed = ", ".join(quoted(column) for column in columns)
    connection.execute(
        f'INSERT INTO {taken_name(one.table)} (source, i, "row", {listed}) '
        f'SELECT {one.place}, i, "row", {listed} FROM ({one.plan.select(name)})'
    )
    counts = connection.execute(one.plan.counts(name)).fetchall()[0]
    rows = [
        (one.table.name, column, repair, count)
        for (column, repair), count in zip(one.plan.repairs, counts, strict=False)
        if count
    ]
    return pd.DataFrame(rows, columns=["table", "column", "repair", "values_repaired"])


def _modes_found(one: Taken, site_map: SiteMap) -> pa.Array:
    """The mode word of each row's free text, where that means one thing only."""
    if "mode_text" not in one.cells:
        return pa.nulls(len(one.source.cells), pa.string())
    known = clear_modes(site_map.modes)
    texts = one.source.cells[one.cells["mode_text"]].combine_chunks()
    texts = texts.dictionary_encode()
    words = [known.get(plain_term(term or "")) for term in texts.dictionary.to_pylist()]
    return pa.array(words, pa.string()).take(texts.indices)


def _sift(connection: duckdb.DuckDBPyConnection, table: Table, zone: str) -> None:
    sift(
        connection,
        table,
        _stored(table),
        taken_name(table),
        extra=doubts(table, zone),
        also=[*doubt_columns(table), "row"],
        row='"row"',
    )


def _used(connection: duckdb.DuckDBPyConnection, table: Table) -> pa.Table:
    values = ", ".join(
        f"{reading.value(c, 'VARCHAR', reading.held(c, 'VARCHAR'))} AS {quoted(c.name)}"
        for c in table.columns
    )
    return connection.sql(
        f"SELECT {values} FROM {taken_name(table)} WHERE {not_refused(table)} "
        "ORDER BY rowid"
    ).to_arrow_table()


def _compare(into: Path, report: LoadReport) -> None:
    """Open what was written and hold its accounts against what was read."""
    by_table = report.sources.groupby("table")["rows_read"].sum()
    read = {str(name): int(count) for name, count in by_table.items()}
    names = ["table", "rows_in", "rows_used", "rows_refused"]
    with open_log(into) as log:
        found = {row["table"]: row for row in log.accounts().to_dict("records")}
    for row in report.tables[names].to_dict("records"):
        if row != found[row["table"]] or row["rows_in"] != read[row["table"]]:
            raise RuntimeError(f"{row['table']}: rows read and written do not add up")


def _refuse_to_overwrite(into: Path, sources: Sequence[str | os.PathLike[str]]) -> None:
    if not into.parent.is_dir():
        raise SourceUnreadable(f"{into.parent} is not a folder; make it first")
    if not into.exists():
        return
    try:
        refuse_unless_database(into)
    except LogUnreadable:
        raise SourceUnreadable(
            f"{into} is there already and is no log; give another name"
        ) from None
    if any(Path(source).resolve() == into.resolve() for source in sources):
        raise SourceUnreadable(f"{into} is a source; give another name")


def _digest(path: str | os.PathLike[str]) -> str:
    with Path(path).open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()[:12]


def _stored(table: Table) -> dict[str, str]:
    return {column.name: "VARCHAR" for column in table.columns}
