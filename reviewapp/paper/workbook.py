"""The tables of a report as a workbook; no cell of it is ever run as a formula."""

from __future__ import annotations

import math
from collections.abc import Mapping
from io import BytesIO
from typing import Any

import pandas as pd
import xlsxwriter
from xlsxwriter.worksheet import Worksheet

from reviewapp.report import CAUTION, CONFIDENTIAL, Banner
from reviewapp.tables import labelled

_LONGEST_SHEET_NAME = 31
_SAFE = {
    "constant_memory": True,
    "in_memory": True,
    "strings_to_formulas": False,
    "strings_to_urls": False,
    "strings_to_numbers": False,
    "nan_inf_to_errors": False,
}


def workbook(title: str, banner: Banner, tables: Mapping[str, pd.DataFrame]) -> bytes:
    """One sheet a table, and a first one that says what they are."""
    out = BytesIO()
    with xlsxwriter.Workbook(out, _SAFE) as book:
        book.set_properties({"title": title, "comments": CONFIDENTIAL})
        bold = book.add_format({"bold": True, "bottom": 1, "text_wrap": True})
        about = book.add_worksheet("About")
        about.set_column(0, 0, 110, book.add_format({"text_wrap": True}))
        lines = (title, CONFIDENTIAL, CAUTION, *banner.lines, *_contents(tables))
        for row, words in enumerate(lines):
            about.write_string(row, 0, words)
        for name, table in tables.items():
            _sheet(book.add_worksheet(name[:_LONGEST_SHEET_NAME]), table, bold)
    return out.getvalue()


def _contents(tables: Mapping[str, pd.DataFrame]) -> list[str]:
    return [f"{name}: {len(table):,} rows" for name, table in tables.items()]


def _sheet(sheet: Worksheet, table: pd.DataFrame, bold: Any) -> None:
    named = labelled(table)
    sheet.freeze_panes(1, 0)
    sheet.set_footer("&LFindings need clinical confirmation&R&P / &N")
    sheet.set_landscape()
    sheet.fit_to_pages(1, 0)
    sheet.repeat_rows(0)
    for column, head in enumerate(named.columns):
        sheet.set_column(column, column, min(max(len(str(head)), 10), 40))
        sheet.write_string(0, column, str(head), bold)
    for row, values in enumerate(named.itertuples(index=False), start=1):
        for column, value in enumerate(values):
            _write(sheet, row, column, value)


def _write(sheet: Worksheet, row: int, column: int, value: Any) -> None:
    """A number as a number, an unknown as an empty cell, the rest as plain text."""
    if isinstance(value, list | tuple):
        value = ", ".join(str(each) for each in value)
    if value is None or value is pd.NaT or value is pd.NA:
        return
    if isinstance(value, bool):
        sheet.write_string(row, column, "yes" if value else "no")
    elif hasattr(value, "item") and not hasattr(value, "isoformat"):
        _write(sheet, row, column, value.item())
    elif isinstance(value, int | float):
        if math.isfinite(value):
            sheet.write_number(row, column, value)
    else:
        sheet.write_string(row, column, str(value))
