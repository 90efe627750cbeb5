"""Paragraphs, lists and tables of a report, everything escaped."""

from __future__ import annotations

from collections.abc import Sequence
from html import escape
from typing import Any

import pandas as pd


def table(
    heads: Sequence[str], rows: Sequence[Sequence[Any]], figures: str = ""
) -> str:
    """A table; ``figures`` has an ``r`` for each column set to the right."""
    aligned = [
        ' style="text-align:right;font-variant-numeric:tabular-nums"'
        if f == "r"
        else ""
        for f in figures.ljust(len(heads))
    ]
    head = "".join(
        f'<th scope="col"{a}>{escape(str(h))}</th>'
        for h, a in zip(heads, aligned, strict=True)
    )
    body = "".join(
        "<tr>"
        + "".join(f"<td{a}>{_cell(v)}</td>" for v, a in zip(row, aligned, strict=True))
        + "</tr>"
        for row in rows
    )
    return f"<table><thead><tr>{head}</tr></thead><tbody>{body}</tbody></table>"


def _cell(value: Any) -> str:
    if value is None or (not isinstance(value, list | tuple) and pd.isna(value)):
        return "unknown"
    return escape(str(value))


def paragraph(words: str) -> str:
    """One paragraph of plain words."""
    return f"<p>{escape(words)}</p>"


def bullets(lines: Sequence[str]) -> str:
    """A list of plain words."""
    return "<ul>" + "".join(f"<li>{escape(line)}</li>" for line in lines) + "</ul>"
