"""The incident in pictures: one timeline in lanes, the burden as a strip of dots."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from typing import Any

import pandas as pd

from engine.reviews.incident import Burden, Incident
from engine.reviews.incident_words import local, millilitres
from reviewapp.drawings.svg import (
    Colours,
    circle,
    drawing,
    hatching,
    in_order,
    line,
    not_said,
    path,
    rectangle,
    text,
    to_look_at,
)

WIDTH, LEFT, RIGHT = 960.0, 138.0, 12.0
TOP = 30.0
LANES = (
    ("treatments", 52.0),
    ("filters", 38.0),
    ("resistance", 68.0),
    ("volume ratio", 92.0),
    ("checks", 34.0),
    ("events", 50.0),
)
HATCH = "unsaid"


def timeline_svg(incident: Incident, colours: Colours, limit: float) -> str:
    """Everything around the fault on the site's clock, lane by lane.

    ``limit``  the department's filter limit, for the resistance lane
    """
    start, end = _ends(incident)
    x = _scale(start, end)
    tops, bottom = {}, TOP
    for name, height in LANES:
        tops[name] = bottom
        bottom += height
    zone = incident.site_zone
    parts = [
        hatching(HATCH, colours),
        *_frame(tops, bottom, start, end, x, zone, colours),
    ]
    parts += _since_check(incident, x, bottom, colours)
    parts += _treatments(incident, x, tops["treatments"], colours)
    parts += _filters(incident, x, tops["filters"], start, end, colours)
    parts += _readings(incident, x, tops["resistance"], limit, colours)
    parts += _ratio(incident, x, tops["volume ratio"], start, end, colours)
    parts += _checks(incident, x, tops["checks"], start, end, colours)
    parts += _events(incident, x, tops["events"], start, end, colours)
    at = x(incident.facts["happened_at"])
    parts.append(line(at, TOP - 12, at, bottom, colours["fired"], 2))
    parts.append(text(at - 5, TOP - 16, "fault", colours["fired"], 12, "end", 700))
    return drawing(WIDTH, bottom + 28, _told(incident), parts)


def burden_svg(burden: Burden, colours: Colours) -> str:
    """Every ventilator's aerosol to the sensor since its own last passed check."""
    table = burden.ventilators
    top = float(table["sensor_ml"].max()) if len(table) else 0.0
    own = table[table["is_this"]]
    high = max(top, float(own["sensor_high_ml"].max()) if len(own) else 0.0, 1e-9)
    left, right, y = 24.0, 40.0, 46.0

    def x(value: float) -> float:
        return left + value / high * (WIDTH - left - right)

    parts = [line(left, y, WIDTH - right, y, colours["lost"])]
    for tick in _round_ticks(high):
        parts.append(line(x(tick), y + 10, x(tick), y + 14, colours["faint"]))
        parts.append(text(x(tick), y + 28, f"{tick:g}", colours["faint"], 11, "middle"))
    parts.append(
        text(WIDTH - right, y + 42, "mL to the sensor", colours["faint"], 11, "end")
    )
    for row in table[~table["is_this"]].to_dict("records"):
        words = _row_words(row)
        parts.append(circle(x(row["sensor_ml"]), y, 5, "none", colours["faint"], words))
    for row in own.to_dict("records"):
        at = x(row["sensor_ml"])
        band = x(row["sensor_low_ml"]), x(row["sensor_high_ml"])
        parts.append(line(band[0], y, band[1], y, colours["fired"], 3, opacity=0.5))
        parts.append(to_look_at(at, y, colours, _row_words(row), 6))
        anchor = "end" if at > WIDTH * 0.75 else "start"
        parts.append(
            text(at, y - 16, row["ventilator_token"], colours["fired"], 12, anchor, 700)
        )
    amount = millilitres(burden.sensor_ml, burden.sensor_low_ml, burden.sensor_high_ml)
    told = (
        f"Aerosol to the sensor since the last passed check, {len(table)} ventilators;"
        f" this one {amount}" + (f", place {burden.place}" if burden.place else "")
    )
    return drawing(WIDTH, 94, told, parts)


def _ends(incident: Incident) -> tuple[pd.Timestamp, pd.Timestamp]:
    start, at = incident.look_back.shown_from, incident.facts["happened_at"]
    checks = incident.timeline[incident.timeline["lane"].isin(["checks", "events"])]
    last = checks["at"].max() if len(checks) else at
    span = max(at - start, pd.Timedelta(hours=12))
    end = min(max(last, at), at + span * 0.25) + span * 0.02
    return start - span * 0.02, end


def _scale(start: pd.Timestamp, end: pd.Timestamp) -> Callable[[Any], float]:
    span = (end - start).total_seconds()

    def x(at: Any) -> float:
        share = (pd.Timestamp(at) - start).total_seconds() / span
        return LEFT + min(max(share, 0.0), 1.0) * (WIDTH - LEFT - RIGHT)

    return x


def _frame(
    tops: dict[str, float],
    bottom: float,
    start: pd.Timestamp,
    end: pd.Timestamp,
    x: Callable[[Any], float],
    zone: str,
    colours: Colours,
) -> list[str]:
    parts = []
    for name, height in LANES:
        y = tops[name]
        parts.append(line(0, y, WIDTH - RIGHT, y, colours["lost"], 0.6))
        parts.append(text(4, y + min(height / 2 + 4, 24), name, colours["ink"], 12))
    parts.append(line(0, bottom, WIDTH - RIGHT, bottom, colours["lost"], 0.6))
    for moment in _days(start, end, zone):
        parts.append(
            line(x(moment), TOP, x(moment), bottom, colours["lost"], 0.5, "2 4")
        )
        shown = pd.Timestamp(moment).tz_localize("UTC").tz_convert(zone)
        label = f"{shown:%d %b}" if shown.hour == 0 else f"{shown:%H:%M}"
        edge = x(moment) > WIDTH - 24
        parts.append(
            text(
                WIDTH if edge else x(moment),
                bottom + 15,
                label,
                colours["faint"],
                11,
                "end" if edge else "middle",
            )
        )
    parts.append(text(4, bottom + 15, "site time", colours["faint"], 11))
    return parts


def _since_check(
    incident: Incident, x: Callable[[Any], float], bottom: float, colours: Colours
) -> list[str]:
    look = incident.look_back
    if look.hours_h is None:
        return []
    left, right = x(look.from_at), x(look.to_at)
    return [
        rectangle(
            left, TOP, right - left, bottom - TOP, colours["aerosol"], opacity=0.06
        ),
        line(left, TOP - 8, left, bottom, colours["aerosol"], 1.2, "4 3"),
        text(left + 4, TOP - 16, "last passed check", colours["aerosol"], 11),
    ]


def _treatments(
    incident: Incident, x: Callable[[Any], float], top: float, colours: Colours
) -> list[str]:
    """Three rows in one lane, so that marks of one kind stand in line."""
    rows = {"absent": top + 11, "unknown": top + 26, "present": top + 41}
    parts = []
    for row in incident.treatments.to_dict("records"):
        state = row["filter_state"]
        at, y = x(row["started_at"]), rows[state]
        words = (
            f"{row['treatment_id']}, {local(row['started_at'], incident.site_zone)}:"
            f" filter {state}"
        )
        if state == "absent":
            parts.append(to_look_at(at, y, colours, words, 3.2))
        elif state == "present":
            parts.append(in_order(at, y, colours, words, 3.4))
        else:
            parts.append(not_said(at, y, colours, HATCH, words, 4))
    labels = (("absent", "fired"), ("unknown", "unknown"), ("present", "aerosol"))
    for state, colour in labels:
        parts.append(text(LEFT - 6, rows[state] + 4, state, colours[colour], 11, "end"))
    return parts


def _filters(
    incident: Incident,
    x: Callable[[Any], float],
    top: float,
    start: pd.Timestamp,
    end: pd.Timestamp,
    colours: Colours,
) -> list[str]:
    parts = []
    for number, row in enumerate(incident.filters.to_dict("records")):
        left = x(max(row["installed_at"], start))
        ended = end if pd.isna(row["removed_at"]) else row["removed_at"]
        right = x(min(ended, end))
        y = top + 5 + (number % 2) * 15
        words = f"filter {row['filter_id']}"
        parts.append(
            rectangle(
                left, y, max(right - left - 1, 2), 12, colours["lost"], words=words
            )
        )
        if right - left > 60:
            parts.append(text(left + 4, y + 10, row["filter_id"], colours["ink"], 11))
    return parts


def _readings(
    incident: Incident,
    x: Callable[[Any], float],
    top: float,
    limit: float,
    colours: Colours,
) -> list[str]:
    values = incident.readings["resistance_cmh2o_per_lps"]
    high = max(limit * 1.15, float(values.max()) if values.notna().any() else 0.0)
    bottom = top + 62

    def y(value: float) -> float:
        return bottom - value / high * 56

    parts = [
        line(LEFT, y(limit), WIDTH - RIGHT, y(limit), colours["fired"], 0.9, "5 3"),
        text(LEFT - 6, y(limit) + 3, f"limit {limit:g}", colours["fired"], 11, "end"),
        text(4, top + 42, "cmH2O/(L/s)", colours["faint"], 11),
    ]
    for row in incident.readings.to_dict("records"):
        at, value = x(row["read_at"]), row["resistance_cmh2o_per_lps"]
        if value is None or pd.isna(value):
            words = f"{row['reading_id']} not used: {row['doubt']}"
            parts.append(text(at, bottom, "×", colours["unknown"], 11, "middle"))
            parts.append(circle(at, bottom - 3, 4, "transparent", words=words))
        else:
            words = f"{row['reading_id']}, filter {row['filter_id']}: {value:.2f}"
            parts.append(circle(at, y(value), 2.2, colours["ink"], words=words))
    return parts


def _ratio(
    incident: Incident,
    x: Callable[[Any], float],
    top: float,
    start: pd.Timestamp,
    end: pd.Timestamp,
    colours: Colours,
) -> list[str]:
    checks = incident.checks
    checks = checks[(checks["checked_at"] >= start) & (checks["checked_at"] <= end)]
    known = checks.dropna(subset=["ratio"])
    parts = [text(4, top + 42, "exhaled / inspired", colours["faint"], 11)]
    if known.empty:
        return [
            *parts,
            text(LEFT + 8, top + 48, "no volumes on record", colours["unknown"]),
        ]
    values = [known["ratio"], known["low"].dropna(), known["high"].dropna()]
    low = min(float(v.min()) for v in values if len(v)) - 0.01
    high = max(float(v.max()) for v in values if len(v)) + 0.01

    def y(value: float) -> float:
        return top + 84 - (value - low) / (high - low) * 76

    band = known.dropna(subset=["low"])
    places = [x(at) for at in band["checked_at"]]

    def course(column: str) -> list[tuple[float, float]]:
        return [(at, y(float(v))) for at, v in zip(places, band[column], strict=True)]

    upper, lower = course("high"), course("low")
    if len(upper) > 1:
        parts.append(
            path([*upper, *lower[::-1]], "none", fill=colours["lost"], opacity=0.35)
        )
    parts.append(path(course("ewma"), colours["aerosol"], 1.8))
    for row in known.to_dict("records"):
        words = f"{row['check_id']}: {row['ratio']:.3f}"
        parts.append(
            circle(
                x(row["checked_at"]), y(row["ratio"]), 2.4, colours["ink"], words=words
            )
        )
    for value in (low + 0.01, high - 0.01):
        parts.append(
            text(LEFT - 6, y(value) + 3, f"{value:.2f}", colours["faint"], 11, "end")
        )
    started = incident.drift_started_at
    if started is not None and started >= start:
        at = x(started)
        parts.append(line(at, top + 4, at, top + 88, colours["fired"], 1.4, "4 3"))
        parts.append(text(at + 4, top + 14, "drift begins", colours["fired"], 11))
    return parts


def _checks(
    incident: Incident,
    x: Callable[[Any], float],
    top: float,
    start: pd.Timestamp,
    end: pd.Timestamp,
    colours: Colours,
) -> list[str]:
    checks = incident.checks
    checks = checks[(checks["checked_at"] >= start) & (checks["checked_at"] <= end)]
    parts = []
    for row in checks.to_dict("records"):
        at, y = x(row["checked_at"]), top + 17
        outcome = row["outcome"]
        words = f"{row['check_id']}: {outcome if outcome else 'outcome not recorded'}"
        if outcome == "passed":
            parts.append(in_order(at, y, colours, words))
        elif outcome == "failed":
            parts.append(to_look_at(at, y, colours, words))
        elif outcome in {"recalibrated", "replaced"}:
            diamond = [(at, y - 6), (at + 6, y), (at, y + 6), (at - 6, y)]
            parts.append(path(diamond, colours["aerosol"], 1.4, colours["panel"]))
            parts.append(circle(at, y, 5, "transparent", words=words))
        else:
            parts.append(line(at, y - 4, at, y + 4, colours["unknown"], 1.2))
    return parts


def _events(
    incident: Incident,
    x: Callable[[Any], float],
    top: float,
    start: pd.Timestamp,
    end: pd.Timestamp,
    colours: Colours,
) -> list[str]:
    """Events on the site's clock; a thread leads from where the ventilator put them."""
    events = incident.events
    events = events[(events["at"] >= start) & (events["at"] <= end)]
    parts: list[str] = []
    free = {12.0: -math.inf, 38.0: -math.inf}  # where the last label of a row ends
    for row in events.to_dict("records"):
        at, y = x(row["at"]), top + 22
        logged = x(row["happened_at"])
        words = f"{row['event_id']}: {row['kind']} {row['code'] or ''}"
        if abs(logged - at) > 2:
            grey = colours["unknown"]
            parts.append(line(logged, y + 8, at, y, grey, 1))
            parts.append(line(logged, y + 4, logged, y + 12, grey, 1, "1 2"))
        urgent = row["kind"] in {"alarm", "fault"}
        mark = to_look_at if urgent else in_order
        parts.append(mark(at, y, colours, words, 3.5))
        label = str(row["kind"] or "event").replace("_", " ")
        wide = 6.2 * len(label)
        left = min(at - wide / 2, WIDTH - RIGHT - wide)
        for height, taken in free.items():
            if left > taken + 6:
                parts.append(text(left, top + height, label, colours["ink"], 11))
                free[height] = left + wide
                break
    return parts


def _days(start: pd.Timestamp, end: pd.Timestamp, zone: str) -> list[pd.Timestamp]:
    """Local midnights, thinned to about a dozen; hours where less than two days."""
    first = start.tz_localize("UTC").tz_convert(zone)
    last = end.tz_localize("UTC").tz_convert(zone)
    days = (last - first).total_seconds() / 86400
    if days < 2:
        step = f"{max(1, round(days * 2))}h"
        marks = pd.date_range(first.ceil("h"), last, freq=step)
    else:
        marks = pd.date_range(
            first.normalize() + pd.Timedelta(days=1),
            last,
            freq=f"{max(1, math.ceil(days / 12))}D",
        )
    return [mark.tz_convert("UTC").tz_localize(None) for mark in marks]


def _round_ticks(high: float) -> list[float]:
    step = 10 ** math.floor(math.log10(high))
    for divide in (1, 2, 5):
        if high / (step / divide) >= 4:
            step /= divide
            break
    return [k * step for k in range(int(high / step) + 1)]


def _row_words(row: Mapping[Any, Any]) -> str:
    amount = millilitres(row["sensor_ml"], row["sensor_low_ml"], row["sensor_high_ml"])
    return (
        f"{row['ventilator_token']}: {amount}, {row['treatments_count']} treatments,"
        f" {row['absent_count']} without a filter, {row['unknown_count']} unknown"
    )


def _told(incident: Incident) -> str:
    return (
        f"Timeline from {local(incident.look_back.shown_from, incident.site_zone)} to"
        f" the fault: {incident.sentence}"
    )
