"""A scenario on paper: the change in words, before and after, the cost, what stays."""

from __future__ import annotations

from html import escape

from engine.reviews.figures import percent
from engine.reviews.scenario import CANNOT_TELL, Comparison
from engine.rules.wording import word
from reviewapp.drawings.scenario import filters_svg, outcome_svg
from reviewapp.drawings.svg import LIGHT
from reviewapp.report import Report
from reviewapp.reports.pieces import bullets, paragraph, table
from reviewapp.reports.sheets import scenario_tables


def scenario_report(comparison: Comparison) -> Report:
    """The comparison as it leaves the app."""
    return Report(
        name=f"what-if-{comparison.scenario.name}",
        title=f"What if: {comparison.scenario.title}",
        sections=scenario_sections(comparison),
        tables=scenario_tables(comparison),
    )


def scenario_sections(comparison: Comparison) -> list[tuple[str, str]]:
    """Heading and HTML of each section, in the order they are read."""
    return [
        ("What if", paragraph(comparison.sentence)),
        ("The change", _change(comparison)),
        ("Before and after", _outcomes(comparison)),
        ("Filters it takes", _filters(comparison)),
        ("Flags", rules_table(comparison)),
        ("What it would not change", bullets(comparison.unchanged)),
        ("Read this with it", bullets(comparison.cautions)),
    ]


def _change(comparison: Comparison) -> str:
    parts = []
    if comparison.scenario.note:
        parts.append(paragraph(comparison.scenario.note))
    parts.append(paragraph(comparison.change))
    if len(comparison.settings):
        rows = [
            (row["key"].replace("_", " "), row["before"], row["after"])
            for row in comparison.settings.to_dict("records")
        ]
        parts.append(table(("Setting", "As it was", "Would be"), rows, " rr"))
    return "".join(parts)


def _outcomes(comparison: Comparison) -> str:
    drawn = "".join(
        f"<h3>{escape(each.title)}</h3>"
        f'<div style="max-width:640px">{outcome_svg(each, LIGHT)}</div>'
        f"{paragraph(each.says)}"
        for each in comparison.outcomes
    )
    return (drawn or paragraph(CANNOT_TELL)) + classes_table(comparison)


def classes_table(comparison: Comparison) -> str:
    """Median share past the tube by drug class; small classes left out."""
    rows = [
        (
            word("drug_class", str(row["drug_class"] or "unknown")),
            f"{row['treatments']:,}",
            percent(row["before_frac"]),
            percent(row["after_frac"]),
            f"{row['before_mg'] / row['treatments']:.3g}",
            f"{row['after_mg'] / row['treatments']:.3g}",
        )
        for row in comparison.by_class.to_dict("records")
    ]
    heads = ("Drug class", "Treatments", "Median past the tube", "would be")
    return table((*heads, "mg a treatment", "would be"), rows, " rrrrr")


def _filters(comparison: Comparison) -> str:
    drawn = f'<div style="max-width:640px">{filters_svg(comparison, LIGHT)}</div>'
    return drawn + paragraph(comparison.filters_sentence)


def rules_table(comparison: Comparison, changed_only: bool = True) -> str:
    """Flags before and after, the most changed first."""
    rules = comparison.rules
    moved = (rules["difference"] != 0) | (
        rules["unknown_before"] != rules["unknown_after"]
    )
    shown = rules[moved] if changed_only else rules
    if shown.empty:
        return paragraph("No rule would answer otherwise.")
    rows = [
        (
            row["rule_id"],
            row["title"],
            f"{row['before']:,}",
            f"{row['after']:,}",
            _signed(row["difference"]),
            f"{row['unknown_before']:,}",
            f"{row['unknown_after']:,}",
        )
        for row in shown.to_dict("records")
    ]
    heads = ("Rule", "Question", "Flags", "would be", "Difference", "Cannot tell")
    return table((*heads, "would be"), rows, "  rrrrr")


def _signed(value: int) -> str:
    return "0" if value == 0 else f"{value:+,}".replace("-", "−")
