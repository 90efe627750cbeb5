"""Copies of a report that may be shared: what is left out is said on the last page."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import pandas as pd

from engine.errors import SharingRefused
from engine.replay import Replay
from engine.reviews.month import Month
from engine.reviews.month_units import Units
from engine.reviews.scenario import Comparison
from engine.reviews.sharing import (
    LEFT_OUT,
    Neutral,
    neutral_of,
    shared_month,
    shared_scenario,
    shared_topics,
)
from engine.reviews.topics import Topics
from reviewapp.report import Banner, Report
from reviewapp.reports.month import month_report
from reviewapp.reports.pieces import bullets
from reviewapp.reports.scenario import scenario_report
from reviewapp.reports.topics import Draw, topic_report

# Sections and sheets that name a device, a person or a day, or hold free text.
_TELLING = {
    "Filters and sensors needing a look",
    "Decisions and actions",
    "Signature",
    "What past sessions show",
    "Filters",
    "Sensors",
    "Decisions",
}
_NAMED_AT_MOST = 5  # of what is left, in the line that refuses


def shared_month_report(
    replay: Replay, month: Month, units: Mapping[str, Units]
) -> Report:
    """The month for sharing.

    Raises   SharingRefused if something telling is left.
    """
    smallest = replay.policy.cells.shared_smallest_count
    report = month_report(*shared_month(month, units, smallest))
    return _neutral(replay, report, "month-shared", smallest)


def shared_topic_report(replay: Replay, review: Topics, draw: Draw) -> Report:
    """The handout for sharing; raises as ``shared_month_report``."""
    smallest = replay.policy.cells.shared_smallest_count
    report = topic_report(shared_topics(review, smallest), draw)
    return _neutral(replay, report, "topics-shared", smallest)


def shared_scenario_report(replay: Replay, comparison: Comparison) -> Report:
    """The comparison for sharing; raises as ``shared_month_report``."""
    smallest = replay.policy.cells.shared_smallest_count
    report = scenario_report(shared_scenario(comparison, smallest))
    return _neutral(replay, report, f"{report.name}-shared", smallest)


def shared_banner(banner: Banner) -> Banner:
    """The stamp without the name of the log and without the day."""
    year = banner.made_at[:4]
    return replace(banner, log_name="of a department", made_at=f"in {year},")


def _neutral(replay: Replay, report: Report, name: str, smallest: int) -> Report:
    neutral = neutral_of(replay)
    left_out = bullets([line.format(n=smallest) for line in LEFT_OUT])
    kept = [(h, neutral.text(b)) for h, b in report.sections if h not in _TELLING]
    shared = Report(
        name=name,
        title=f"{neutral.text(report.title)} (copy for sharing)",
        sections=[*kept, ("Left out of this copy", left_out)],
        tables={
            sheet: _neutral_table(table, neutral)
            for sheet, table in report.tables.items()
            if sheet not in _TELLING
        },
    )
    _check(shared, neutral)
    return shared


def _neutral_table(table: pd.DataFrame, neutral: Neutral) -> pd.DataFrame:
    told = table.copy()
    for name in told.columns:
        if not pd.api.types.is_numeric_dtype(told[name]):
            told[name] = [
                neutral.text(v) if isinstance(v, str) else v for v in told[name]
            ]
    return told


def _check(report: Report, neutral: Neutral) -> None:
    said = [report.title, *(part for section in report.sections for part in section)]
    said += [table.to_csv(index=False) for table in report.tables.values()]
    left = sorted({name for part in said for name in neutral.still_named(part)})
    if left:
        named = ", ".join(left[:_NAMED_AT_MOST])
        raise SharingRefused(f"no copy was made: it would still name {named}")
