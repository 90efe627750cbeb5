"""The month on paper: one page that answers what happened, what changed, what is sure
and what to decide, then the lines behind it."""

from __future__ import annotations

from collections.abc import Sequence
from html import escape

import pandas as pd

from engine.reviews.figures import month_words, percent, significant
from engine.reviews.month import Month
from engine.reviews.signatures import signed_lines
from engine.rules.wording import word
from reviewapp.drawings.month_lines import Marks, UnitsOf, lines_html, style
from reviewapp.drawings.svg import LIGHT
from reviewapp.report import Report
from reviewapp.reports.pieces import bullets, paragraph, table
from reviewapp.reports.sheets import month_tables

PRINTED_ROWS = 40  # of filters and ventilators; the rest is counted


def month_report(month: Month, units: UnitsOf, marks: Marks = ()) -> Report:
    """The month as it leaves the app."""
    return Report(
        name=f"month-{month.month}",
        title=f"Month report, {month_words(month.month)}",
        sections=month_sections(month, units, marks),
        tables=month_tables(month, units),
    )


def month_sections(
    month: Month, units: UnitsOf, marks: Marks = ()
) -> list[tuple[str, str]]:
    """Heading and HTML of each section, in the order they are read."""
    return [
        ("In short", _short(month)),
        (
            "The indicators",
            style(LIGHT, paper=True) + lines_html(month, LIGHT, {}, marks=marks),
        ),
        ("What stands out, opened", _opened(month, units, marks)),
        ("Filters and sensors needing a look", _look(month)),
        ("Dose forgone, aerosol to room and sensors", _dose(month)),
        ("Flags and what reviewers said of them", _confirmations(month)),
        ("Decisions and actions", _decisions(month)),
        ("Signature", _signature(month)),
        ("How the figures were counted", _counting(month)),
    ]


def _short(month: Month) -> str:
    answers = (
        ("What happened", month.happened),
        ("What changed", month.changed),
        ("What is least sure", month.sure),
    )
    told = "".join(f"<p><b>{t}.</b> {escape(words)}</p>" for t, words in answers)
    asked = (
        bullets(month.to_decide)
        if month.to_decide
        else paragraph("Nothing asks for it.")
    )
    return f"{paragraph(month.sentence)}{told}<p><b>What to decide.</b></p>{asked}"


def _opened(month: Month, units: UnitsOf, marks: Marks) -> str:
    """Each line to be looked at stands open, as it would on screen."""
    looked = [each for each in month.lines if each.look]
    if not looked:
        return paragraph("No line stands past its start or outside its limits.")
    return "".join(
        lines_html(
            month,
            LIGHT,
            units,
            opened=each.indicator.id,
            marks=marks,
            only=(each.indicator.id,),
        )
        for each in looked
    )


def _look(month: Month) -> str:
    return (
        f"<h3>Filters</h3>{filters_table(month.filters)}"
        f"<h3>Ventilators</h3>{sensors_table(month.sensors)}"
    )


def filters_table(filters: pd.DataFrame) -> str:
    """Filters over or near their limit, rising, or suspected changed."""
    if filters.empty:
        return paragraph("No filter in use this month asks for a look.")
    shown = filters.head(PRINTED_ROWS)
    rows = [
        (
            row["filter_id"],
            row["ventilator_token"],
            word("filter_trend", str(row["state"])),
            row["readings_count"],
            _figure(row["slope_per_h"], 24.0),
            _figure(row["time_to_limit_h"]),
            "yes" if pd.notna(row["suspected_change_at"]) else "",
        )
        for row in shown.to_dict("records")
    ]
    heads = ("Filter", "Ventilator", "State", "Readings", "Rise a day, cmH2O/(L/s)")
    more = ("To the limit, h", "Unlogged change suspected")
    return table((*heads, *more), rows, "   rrr ") + _rest(filters, shown)


def sensors_table(sensors: pd.DataFrame) -> str:
    """Ventilators whose expiratory flow sensor asks for a look, and why."""
    if sensors.empty:
        return paragraph("No ventilator asks for a look.")
    shown = sensors.head(PRINTED_ROWS)
    rows = [
        (
            row["ventilator_token"],
            "yes" if row["drifting"] else "no",
            _percent(row["last_change_frac"]) if row["drifting"] else "",
            ""
            if pd.isna(row["unfiltered_count"])
            else f"{row['unfiltered_count']:.0f}",
            f"{row['failed_count']:.0f}",
        )
        for row in shown.to_dict("records")
    ]
    heads = ("Ventilator", "Volumes drifting", "Last change", "Unfiltered since check")
    return table((*heads, "Failed checks"), rows, "  rrr") + _rest(sensors, shown)


def _rest(whole: pd.DataFrame, shown: pd.DataFrame) -> str:
    rest = len(whole) - len(shown)
    return paragraph(f"{rest} more are not printed.") if rest else ""


def _dose(month: Month) -> str:
    return (
        paragraph(month.dose_sentence)
        + forgone_table(month)
        + paragraph(month.exposure_sentence)
    )


def forgone_table(month: Month) -> str:
    """Groups of treatments for which another site gives more, small ones left out."""
    if month.forgone.empty:
        return ""
    rows = [
        (
            _word("drug_class", row["drug_class"]),
            _word("generator", row["generator"]),
            _word("site", row["site"]),
            _word("best_site", row["best_site"]),
            f"{row['treatments']:,}",
            percent(row["delivered_frac"]),
            percent(row["best_delivered_frac"]),
        )
        for row in month.forgone.to_dict("records")
    ]
    heads = ("Drug class", "Generator", "Logged", "Most by the estimate", "Treatments")
    return table((*heads, "Past the tube", "Would be"), rows, "    rrr")


def _confirmations(month: Month) -> str:
    checked = month.confirmations
    rows = [
        (
            row["rule_id"],
            row["title"],
            f"{row['flags']:,}",
            f"{row['reviewed']:,}",
            f"{row['confirmed']:,}",
            f"{row['dismissed']:,}",
            _share(row),
            "needs work" if row["needs_work"] else "",
        )
        for row in checked.rules.to_dict("records")
    ]
    heads = ("Rule", "Question", "Flags", "Reviewed", "Confirmed", "Dismissed")
    return paragraph(checked.sentence) + table((*heads, "Share", ""), rows, "  rrrrr")


def _decisions(month: Month) -> str:
    said = paragraph("None recorded for this month.")
    if not month.decisions.empty:
        said = _decided(month.decisions)
    earlier = month.open_decisions[month.open_decisions["month"] < month.month]
    if earlier.empty:
        return said
    late = int(earlier["late"].sum())
    past = f", {late} of them past the date" if late else ""
    head = f"Not yet done from earlier months{past}:"
    return said + paragraph(head) + _decided(earlier)


def _decided(decisions: pd.DataFrame) -> str:
    rows = [
        tuple(str(row[name]) for name in _DECIDED)
        for row in decisions.to_dict("records")
    ]
    heads = ("About", "What", "Strength", "Owner (role)", "Measure", "Due")
    return table(heads, rows)


_DECIDED = ("indicator", "text", "strength", "owner_role", "measure", "due")


def _signature(month: Month) -> str:
    if month.sign_offs.empty:
        return paragraph("Not signed. Figures may change until it is.")
    return bullets(signed_lines(month.sign_offs, month.snapshot))


def _counting(month: Month) -> str:
    rows = [
        (
            f"{each.indicator.id} {each.indicator.title}",
            each.indicator.of,
            each.indicator.left_out,
            each.indicator.basis,
        )
        for each in month.lines
    ]
    heads = ("Indicator", "Counted among", "Left out", "Why")
    stamp = month.snapshot
    held = (
        f"Engine {stamp['engine_version']}, log {stamp['log_fingerprint']}, policy"
        f" {stamp['policy_name']} {stamp['policy_hash']}."
    )
    return table(heads, rows) + paragraph(held) + bullets(month.cautions)


def _share(row: dict) -> str:
    if pd.isna(row["share_frac"]):
        return ""
    span = f"{100 * row['low']:.0f} to {100 * row['high']:.0f}"
    return f"{percent(row['share_frac'])} ({span})"


def _word(column: str, value: object) -> str:
    if value is None or (isinstance(value, float) and pd.isna(value)):
        return "unknown"
    return word(column, str(value))


def _figure(value: float | None, times: float = 1.0) -> str:
    return "" if value is None or pd.isna(value) else significant(value * times)


def _percent(value: float | None) -> str:
    return "" if value is None or pd.isna(value) else percent(value)


def month_marks(sessions: Sequence) -> Marks:
    """Months in which something was taught, for the charts."""
    return tuple(
        (f"{each.held_on:%Y-%m}", f"session: {each.topic.title}") for each in sessions
    )
