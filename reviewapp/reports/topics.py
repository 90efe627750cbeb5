"""The topic handout: one sheet a topic, safe to hang on a wall.

No dates, no tokens of patients or devices, no treatment ids; small cells stay hidden.
"""

from __future__ import annotations

from collections.abc import Callable
from html import escape

from engine.reviews.sessions import Session
from engine.reviews.topics import Example, Sheet, Topics
from engine.reviews.wording import counted
from engine.rules.wording import word
from reviewapp.drawings.svg import LIGHT, Colours
from reviewapp.drawings.topic import places_svg, ranking_svg, weeks_svg
from reviewapp.report import Report
from reviewapp.reports.pieces import bullets, paragraph, table
from reviewapp.reports.sheets import topic_tables

Draw = Callable[[Example], str]


def topic_report(review: Topics, draw: Draw) -> Report:
    """The handout as it leaves the app."""
    return Report(
        name=f"topics-{review.since}-{review.until}",
        title="Topics",
        sections=topic_sections(review, draw),
        tables=topic_tables(review),
    )


def topic_sections(review: Topics, draw: Draw | None = None) -> list[tuple[str, str]]:
    """Heading and HTML of each section; ``draw`` gives the circuit of an example."""
    sheets = [
        (f"{number}. {sheet.topic.title}", sheet_html(sheet, draw))
        for number, sheet in enumerate(review.sheets, start=1)
    ]
    return [
        ("Topics", paragraph(review.sentence)),
        *sheets,
        ("How they were chosen", _choice(review)),
        ("What past sessions show", sessions_html(review.sessions)),
        ("Read this with it", bullets(review.cautions)),
    ]


def sheet_html(
    sheet: Sheet,
    draw: Draw | None = None,
    colours: Colours = LIGHT,
    folded: bool = False,
) -> str:
    """One topic: seen, where, why, both sides, two circuits, a system change.

    ``folded``  the evidence is closed until asked for, as on screen
    """
    change = f"{sheet.topic.change} ({sheet.topic.change_strength})"
    parts = [
        paragraph(sheet.sentence),
        f"<p><small>{escape(sheet.seen)}</small></p>",
        _two(
            _head("Where")
            + paragraph(sheet.where)
            + f'<div style="max-width:440px">{places_svg(sheet, colours)}</div>',
            _head("Why it matters")
            + paragraph(sheet.topic.why)
            + _head("The system change beside the teaching")
            + paragraph(change)
            + _head("What the department has written down")
            + paragraph(sheet.table),
        ),
        _evidence(sheet, folded),
    ]
    if sheet.examples:
        drawn = [
            '<div style="break-inside:avoid">'
            f"{_head(f'Example {number}')}{example_html(example, draw)}</div>"
            for number, example in enumerate(sheet.examples, start=1)
        ]
        parts.append(_two(*drawn) if draw is None else "".join(drawn))
    return "".join(parts)


def _evidence(sheet: Sheet, folded: bool) -> str:
    """What the rules rest on, and the works that found otherwise, side by side."""
    title = "What it rests on"
    body = bullets(sheet.evidence)
    if sheet.against:
        title += ", and who found otherwise"
        body = _two(body, _head("The other side") + bullets(sheet.against))
    if not folded:
        return _head(title) + body
    return f"<details><summary>{escape(title)}</summary>{body}</details>"


def _head(words: str) -> str:
    return f'<p style="margin:.8em 0 .2em"><b>{escape(words)}</b></p>'


def _two(*columns: str) -> str:
    """Columns side by side where there is room."""
    cells = "".join(
        f'<div style="flex:1 1 340px;min-width:0">{column}</div>' for column in columns
    )
    return f'<div style="display:flex;flex-wrap:wrap;gap:0 32px">{cells}</div>'


def example_html(example: Example, draw: Draw | None = None) -> str:
    """One setup without who or when: drawn, then what each rule said."""
    instead = ""
    if example.instead:
        sites = " or ".join(word("site", site) for site in example.instead)
        note = f" ({example.table_note})" if example.table_note else ""
        instead = paragraph(f"The department's table would have it {sites}{note}.")
    drawn = draw(example) if draw is not None else ""
    return paragraph(example.sentence) + drawn + bullets(example.says) + instead


def _choice(review: Topics) -> str:
    return (
        f'<div style="max-width:640px">{ranking_svg(review, LIGHT)}</div>'
        + paragraph(review.runner_up)
        + paragraph(_capped(review))
        + weights_table(review)
    )


def _capped(review: Topics) -> str:
    if not review.capped_patients:
        return "No patient carried more than a twentieth of the weight."
    who = counted(review.capped_patients, "patient counts", "patients count")
    return f"{who} less, so that none carries more than a twentieth of the weight."


def weights_table(review: Topics) -> str:
    """Weight of each rule: severity times the share reviewers confirmed."""
    rows = [
        (
            row["rule_id"],
            row["topic"].replace("_", " "),
            f"{row['severity']:.2g}",
            f"{row['confirmed']} of {row['judged']}",
            f"{row['confirmed_frac']:.2f}",
            f"{row['weight']:.2f}",
        )
        for row in review.weights.to_dict("records")
    ]
    heads = ("Rule", "Topic", "Severity", "Confirmed", "Share used", "Weight")
    return table(heads, rows, "  rrrr")


def sessions_html(sessions: tuple[Session, ...], colours: Colours = LIGHT) -> str:
    """Each past session with its weeks and what they can and cannot show."""
    if not sessions:
        return paragraph("No session has been recorded.")
    parts = []
    for each in sessions:
        parts += [
            paragraph(each.sentence),
            weeks_svg(each, colours),
            session_table(each),
            bullets(each.cautions),
        ]
    return "".join(parts)


def session_table(session: Session) -> str:
    """Level and slope change with both kinds of standard error."""
    if session.own.level_change is None or session.own.slope_change is None:
        return ""
    fits = [("taught", session.own)]
    if session.other is not None and session.other.level_change is not None:
        fits.append(("other units", session.other))
    if session.difference is not None and session.difference.level_change is not None:
        fits.append(("difference", session.difference))
    rows = []
    for name, fit in fits:
        for what, change in (
            ("level at once", fit.level_change),
            ("slope, a week", fit.slope_change),
        ):
            if change is not None:
                rows.append(
                    (
                        name,
                        what,
                        _points(change.value),
                        f"{_points(change.low_ols)} to {_points(change.high_ols)}",
                        f"{_points(change.low_hac)} to {_points(change.high_hac)}",
                    )
                )
    heads = ("Series", "Change", "Points", "Ordinary interval", "Autocorrelation-proof")
    return table(heads, rows, "  rrr")


def _points(share: float) -> str:
    return f"{100 * share:+.1f}".replace("-", "−")
