"""The data dictionary and the import templates, written from ``engine.columns``."""

from __future__ import annotations

import csv
import io
import os
from pathlib import Path

import pandas as pd

from engine.columns import RECORD_TABLES, TABLES, Column, Table, shown_unit
from engine.log.schema import figure

_KINDS = {
    "id": "id, no two rows alike",
    "token": "token",
    "word": "word",
    "number": "number",
    "count": "whole number",
    "yes_no": "yes or no",
    "time": "date and time",
    "text": "free text",
}


def dictionary() -> pd.DataFrame:
    """One row for each column of the log.

    Columns  table, column, label, kind, unit (as shown), allowed, required, help.
    """
    return pd.DataFrame(
        [
            {
                "table": table.name,
                "column": column.name,
                "label": column.label,
                "kind": _kind(table, column),
                "unit": shown_unit(column.unit),
                "allowed": allowed(column),
                "required": column.required,
                "help": column.help,
            }
            for table in TABLES
            for column in table.columns
        ]
    )


def allowed(column: Column) -> str:
    """What a column may hold, in words: its word list, its range, or its form."""
    if column.words:
        return ", ".join(column.words)
    if column.low is not None and column.high is not None:
        return f"{figure(column.low)} to {figure(column.high)}"
    if column.kind == "yes_no":
        return "yes, no, unknown"
    if column.kind == "time":
        return "2026-03-01T08:15, with an offset or in the site's time"
    return ""


def template(table: Table) -> str:
    """An empty CSV file of one table: the row of column names."""
    text = io.StringIO()
    names = [column.name for column in table.columns]
    csv.writer(text, lineterminator="\n").writerow(names)
    return text.getvalue()


def write_templates(folder: str | os.PathLike[str]) -> list[Path]:
    """Write one empty CSV file a table, and the dictionary, into a folder that exists.

    Raises   OSError if the folder cannot be written to.
    """
    written = []
    for table in RECORD_TABLES:
        path = Path(folder) / f"{table.name}.csv"
        path.write_text(template(table), "utf-8")
        written.append(path)
    path = Path(folder) / "columns.csv"
    dictionary().to_csv(path, index=False, lineterminator="\n")
    return [*written, path]


def _kind(table: Table, column: Column) -> str:
    # An id that is another table's key may stand in many rows.
    if column.kind == "id" and column.name != table.key:
        return "id"
    return _KINDS[column.kind]
