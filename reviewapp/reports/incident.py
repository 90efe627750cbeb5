"""The incident on paper: one self-contained page a reviewer can print and sign."""

from __future__ import annotations

from collections.abc import Sequence
from html import escape

import pandas as pd

from engine.reviews.explanations import Explanation
from engine.reviews.incident import Incident
from engine.reviews.incident_scenario import OtherHistory
from engine.reviews.incident_words import local, millilitres
from engine.reviews.signatures import signed_lines
from reviewapp.drawings.incident import burden_svg, timeline_svg
from reviewapp.drawings.svg import LIGHT
from reviewapp.report import Report
from reviewapp.reports.pieces import bullets, paragraph, table
from reviewapp.reports.sheets import incident_tables

GRADE_MARKS = {"supported": "●", "consistent": "◐", "no record": "?", "against": "○"}
ROLES = {
    "needed": "needed",
    "against": "would speak against it",
    "also": "adds weight",
    "examination": "examination",
}
CITED_ROWS = 600  # of the timeline; the count of those left out is printed


def incident_report(
    incident: Incident, limit: float, other: OtherHistory | None = None
) -> Report:
    """The incident as it leaves the app."""
    named = incident.facts["incident_id"]
    return Report(
        name=f"incident-{named or 'by-hand'}",
        title=f"Incident {named or 'entered by hand'}",
        sections=incident_sections(incident, limit, other),
        tables=incident_tables(incident),
    )


def incident_sections(
    incident: Incident, limit: float, other: OtherHistory | None = None
) -> list[tuple[str, str]]:
    """Heading and HTML of each section, in the order they are read."""
    return [
        ("What happened", _facts(incident)),
        ("On one timeline", _timeline(incident, limit)),
        ("Aerosol to the sensor since the last passed check", _burden(incident, other)),
        ("What could explain it", _explanations(incident.explanations)),
        ("The same exposure elsewhere", _elsewhere(incident)),
        ("What the records do not support", bullets(incident.not_supported)),
        ("Harm and actions", _actions(incident)),
        ("Signature", _signature(incident)),
        ("Rows cited", _cited(incident)),
    ]


def _facts(incident: Incident) -> str:
    facts, look = incident.facts, incident.look_back
    rows = [
        ("Incident", facts["incident_id"] or "entered by hand"),
        ("Ventilator", facts["ventilator_token"]),
        ("Sensor", str(facts["sensor"]).replace("_", " ")),
        ("Happened (site time)", local(facts["happened_at"], incident.site_zone)),
        ("Harm as logged", facts["harm"]),
        ("Note", facts["note"] or "none"),
        ("Looked back to", local(look.from_at, incident.site_zone)),
        ("because", look.opened_by),
        ("Clock", incident.clock.sentence),
    ]
    return paragraph(incident.sentence) + table(("", ""), rows)


def _timeline(incident: Incident, limit: float) -> str:
    key = (
        "Filled square: no filter, failed check, alarm or fault. Hollow circle: filter"
        " present, check passed. Hatched with a question mark: not recorded. Cross:"
        " reading not used. Diamond: sensor recalibrated or replaced. A dotted thread"
        " leads from the ventilator's own clock to the site's."
    )
    return timeline_svg(incident, LIGHT, limit) + f"<p><small>{key}</small></p>"


def _burden(incident: Incident, other: OtherHistory | None) -> str:
    burden = incident.burden
    amount = millilitres(burden.sensor_ml, burden.sensor_low_ml, burden.sensor_high_ml)
    rows = [
        ("Treatments", burden.treatments_count),
        ("Filter present", burden.present_count),
        ("Filter absent", burden.absent_count),
        ("Filter unknown", burden.unknown_count),
        ("Without an estimate", burden.not_estimated_count),
        ("Nebulised liquid on to the sensor, estimate and band", amount),
        ("Place among ventilators", f"{burden.place or 'none'} of {burden.of}"),
    ]
    body = table(("", ""), rows, " r") + burden_svg(burden, LIGHT)
    if other is not None:
        body += paragraph(other.sentence)
    return body


def _explanations(explanations: Sequence[Explanation]) -> str:
    parts = []
    for explanation in explanations:
        mark = GRADE_MARKS[explanation.grade]
        asked = table(
            ("What the records were asked", "Role", "Answer", "Rows"),
            [
                (c.text, ROLES[c.role], _said(c.holds), _behind(c.rows))
                for c in explanation.conditions
            ],
        )
        parts.append(
            f"<h3>{mark} {escape(explanation.title)}:"
            f" <em>{escape(explanation.grade)}</em></h3>"
            f"{paragraph(explanation.sentence)}{asked}"
            f"<p><b>Would be refuted by.</b> {escape(explanation.refuted_by)}"
            f" <b>Would be settled by.</b> {escape(explanation.settled_by)}</p>"
        )
    return "".join(parts)


def _said(holds: bool | None) -> str:
    return {True: "yes", False: "no", None: "not on record"}[holds]


def _behind(rows: Sequence[tuple[str, str]]) -> str:
    if not rows:
        return "–"
    shown = ", ".join(row for _, row in rows[:8])
    rest = f" and {len(rows) - 8} more" if len(rows) > 8 else ""
    return f"{rows[0][0].replace('_', ' ')} {shown}{rest}"


def _elsewhere(incident: Incident) -> str:
    exposed = incident.exposed_ventilators
    parts = [paragraph(incident.windows.sentence)]
    if incident.pairs.sets_used:
        pairs = incident.pairs
        parts.append(
            paragraph(
                f"Over {incident.faults_count} faults, {pairs.sets_used} differ from"
                f" their own earlier window: exact odds ratio {pairs.ratio:.1f}"
                f" ({pairs.low:.1f} to {pairs.high:.1f}), p {pairs.p:.3f}; the smallest"
                f" p so many could give is {pairs.smallest_p:.3f}. A high ratio is a"
                " reason to inspect, not a cause."
            )
        )
    if exposed.empty:
        parts.append(
            paragraph("No other ventilator has as many unfiltered treatments.")
        )
    else:
        heads = ("Ventilator", "Treatments", "No filter", "Unknown", "mL to sensor")
        rows = [
            (
                row["ventilator_token"],
                row["treatments_count"],
                row["absent_count"],
                row["unknown_count"],
                f"{row['sensor_ml']:.1f}",
            )
            for row in exposed.to_dict("records")
        ]
        parts.append(table(heads, rows, " rrrr"))
    if not incident.patients.empty:
        named = ("Patient token", "Treatments", "No filter", "Unknown")
        names = ("patient_token", "treatments_count", "absent_count", "unknown_count")
        people = [
            tuple(row[name] for name in names)
            for row in incident.patients.to_dict("records")
        ]
        parts.append(paragraph("Patients on this ventilator in the look-back:"))
        parts.append(table(named, people, " rrr"))
    return "".join(parts)


def _actions(incident: Incident) -> str:
    parts = [paragraph(incident.harm_sentence)]
    if not incident.harm.empty:
        rated = [
            (row["role"], row["harm"], row["reason"] or "")
            for row in incident.harm.to_dict("records")
        ]
        parts.append(table(("Rater's role", "Harm", "Reason"), rated))
    if incident.actions.empty:
        parts.append(paragraph("No action has been decided yet."))
    else:
        kept = ("text", "strength", "owner_role", "measure", "due")
        decided = [
            tuple(row[name] for name in kept)
            for row in incident.actions.to_dict("records")
        ]
        heads = ("Decided", "Strength", "Owner (role)", "Measured by", "Due")
        parts.append(table(heads, decided))
    names = ("strength", "text", "measure", "because")
    offered = [
        tuple(row[name] for name in names)
        for row in incident.suggested_actions.to_dict("records")
    ]
    parts.append(
        paragraph("To choose from, the strongest first; none of it is decided here:")
    )
    parts.append(table(("Strength", "Action", "Measured by", "Because of"), offered))
    return "".join(parts)


def _signature(incident: Incident) -> str:
    if incident.sign_offs.empty:
        return paragraph("Not signed. Grades may change until it is.")
    return bullets(signed_lines(incident.sign_offs, incident.snapshot))


def _cited(incident: Incident) -> str:
    shown = incident.timeline.tail(CITED_ROWS)
    zone = incident.site_zone
    rows = [
        (
            local(row["at"], zone),
            row["lane"],
            row["text"],
            f"{row['table']} {row['row_id']}".strip(),
            ""
            if pd.isna(row["offset_s"])
            else f"{local(row['at_logged'], zone)} by its own clock",
        )
        for row in shown.to_dict("records")
    ]
    left_out = len(incident.timeline) - len(shown)
    more = f" The earliest {left_out} rows are not printed." if left_out else ""
    opening = paragraph(f"Every row on the timeline, site time.{more}")
    return opening + table(("When", "Lane", "What", "Row", "As logged"), rows)
