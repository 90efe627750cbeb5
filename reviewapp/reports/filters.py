"""Filters on paper: the table, the most urgent drawn, survival and cautions."""

from __future__ import annotations

from typing import Any

import pandas as pd

from engine.reviews.filters import STATE_WORDS, Filters
from reviewapp.drawings.filter import small_filter_svg, survival_svg
from reviewapp.drawings.svg import LIGHT
from reviewapp.report import Report
from reviewapp.reports.pieces import bullets, paragraph, table
from reviewapp.reports.sheets import filter_tables

PRINTED_FILTERS = 60  # rows of the table; the most urgent come first
DRAWN_FILTERS = 12


def filter_report(review: Filters) -> Report:
    """Every filter, as it leaves the app."""
    return Report(
        name="filters",
        title="Expiratory filters",
        sections=filter_sections(review),
        tables=filter_tables(review),
    )


def filter_sections(review: Filters) -> list[tuple[str, str]]:
    """Heading and HTML of each section, in the order they are read."""
    return [
        ("Filters", paragraph(review.sentence) + bullets(review.cautions)),
        ("The most urgent", _drawn(review)),
        ("All filters", _lives(review)),
        ("How long they last", _survival(review)),
        ("Readings not used", _doubts(review)),
    ]


def _drawn(review: Filters) -> str:
    cells = "".join(
        f'<div style="break-inside:avoid">{small_filter_svg(review, name, LIGHT)}</div>'
        for name in review.lives["filter_id"].head(DRAWN_FILTERS)
    )
    grid = "display:grid;grid-template-columns:repeat(3,1fr);gap:14px"
    key = (
        "Resistance against hours in use; dashed: the department's limit; the band:"
        " forecast up to its horizon; the bar: the share of the rise that goes along"
        " with captured aerosol, hatched where it cannot be told."
    )
    return f'<div style="{grid}">{cells}</div><p><small>{key}</small></p>'


def _lives(review: Filters) -> str:
    heads = (
        "Filter",
        "Ventilator",
        "State",
        "In use, h",
        "Readings",
        "Not used",
        "Last",
        "Slope a day",
        "To limit, h",
        "To aerosol",
        "Treatments",
    )
    shown = review.lives.head(PRINTED_FILTERS)
    rows = [
        (
            row["filter_id"],
            row["ventilator_token"],
            STATE_WORDS[row["state"]] + ("" if row["in_use"] else ", removed"),
            f"{row['in_use_h']:.0f}",
            row["readings_count"],
            row["doubted_count"],
            figure(row["last_cmh2o_per_lps"], "{:.2f}"),
            figure(row["slope_per_h"], "{:+.2f}", 24.0),
            figure(row["time_to_limit_h"], "{:.0f}"),
            share(row),
            row["treatments_count"],
        )
        for row in shown.to_dict("records")
    ]
    rest = len(review.lives) - len(shown)
    more = f" {rest} less urgent filters are not printed." if rest else ""
    return paragraph(f"Resistance in cmH2O/(L/s).{more}") + table(
        heads, rows, "   rrrrrrrr"
    )


def figure(value: Any, pattern: str, times: float = 1.0) -> str:
    """A figure as written, or an en dash where there is none."""
    if value is None or pd.isna(value):
        return "–"
    return pattern.format(value * times)


def share(row: Any) -> str:
    """The share that points to aerosol with its ends, or that it cannot be told."""
    if row["share"] is None or pd.isna(row["share"]):
        return "cannot tell"
    if row["share_low"] == row["share_high"]:
        return f"{row['share']:.0%}, only that on record"
    ends = f"({row['share_low']:.0%} to {row['share_high']:.0%})"
    told = "" if row["verdict"] != "cannot_tell" else ", cannot tell"
    return f"{row['share']:.0%} {ends}{told}"


def _survival(review: Filters) -> str:
    heads = ("By", "Group", "Filters", "Reached limit", "Median, h", "Log-rank p")
    rows = [
        (
            row["by"],
            str(row["group"]).replace("_", " "),
            row["lives_count"],
            row["reached_count"],
            figure(row["median_h"], "{:.0f}"),
            figure(row["log_rank_p"], "{:.3f}"),
        )
        for row in review.groups.to_dict("records")
    ]
    drawn = survival_svg(review, "filter kind", LIGHT) if len(review.curves) else ""
    return drawn + table(heads, rows, "  rrrr")


def _doubts(review: Filters) -> str:
    rows = [
        (row["doubt"] or "used", row["readings_count"])
        for row in review.doubts.to_dict("records")
    ]
    return table(("Reading", "Count"), rows, " r")
