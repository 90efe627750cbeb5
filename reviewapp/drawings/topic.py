"""Topics in pictures: where it was seen, and what the weeks around a session show."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np

from engine.reviews.sessions import Session
from engine.reviews.topics import SHIFTS, Sheet, Topics
from engine.stats.series import Segmented
from reviewapp.drawings.month import ticks
from reviewapp.drawings.svg import (
    Colours,
    circle,
    drawing,
    hatching,
    line,
    path,
    rectangle,
    text,
)

CELL = (104.0, 34.0)
LETTER = 6.6  # width of a letter of a unit's name, about
WEEKS = (760.0, 230.0)


def places_svg(sheet: Sheet, colours: Colours) -> str:
    """Unit by shift: the flagged share as a bar to scale, hidden cells hatched."""
    grid = sheet.places
    units = list(dict.fromkeys(grid["unit_token"]))
    left = max(60.0, LETTER * max(map(len, units), default=0) + 14)
    width = left + CELL[0] * len(SHIFTS)
    height = 22 + CELL[1] * len(units)
    name = f"places-{sheet.topic.id}"
    parts = [hatching(name, colours)]
    for column, shift in enumerate(SHIFTS):
        x = left + CELL[0] * column
        parts.append(text(x + 4, 13, shift, colours["faint"], 11.5))
    for row, unit in enumerate(units):
        y = 22 + CELL[1] * row
        parts += [
            line(0, y, width, y, colours["lost"], 0.6, opacity=0.6),
            text(0, y + 21, unit, colours["ink"], 12),
        ]
    cells = grid.set_index(["unit_token", "shift"])
    for row, unit in enumerate(units):
        for column, shift in enumerate(SHIFTS):
            place = left + CELL[0] * column, 22 + CELL[1] * row
            parts += _cell(cells.loc[(unit, shift)], place, name, colours)
    words = f"{sheet.topic.title} by unit and shift. {sheet.where}"
    return drawing(width, height, words, parts)


def _cell(cell, place: tuple[float, float], name: str, colours: Colours) -> list[str]:
    x, y = place
    width = CELL[0] - 12
    if cell["hidden"]:
        return [
            rectangle(
                x + 2, y + 7, width, 20, f"url(#{name})", words="hidden: too few"
            ),
        ]
    if not cell["asked"]:
        return [text(x + 4, y + 21, "–", colours["faint"], 12)]
    share = float(cell["share_frac"])
    blurred = float(cell["unknown"]) / float(cell["asked"])
    words = f"{cell['flagged']:.0f} of {cell['asked']:.0f}"
    return [
        rectangle(x + 2, y + 21, width, 6, colours["lost"], opacity=0.25),
        rectangle(x + 2, y + 21, width * share, 6, colours["fired"]),
        rectangle(x + 2 + width * share, y + 21, width * blurred, 6, f"url(#{name})"),
        text(x + 2, y + 16, f"{100 * share:.0f} %", colours["ink"], 12, weight=600),
        text(x + width, y + 16, words, colours["faint"], 10.5, "end"),
    ]


def ranking_svg(review: Topics, colours: Colours) -> str:
    """Every topic by what it would cover alone; the chosen ones filled."""
    table = review.ranking
    width, row_height, left = 620.0, 24.0, 270.0
    height = row_height * len(table) + 6
    top = max(float(table["covers_frac"].max() or 0), 0.05)
    parts = []
    for i, row in enumerate(table.to_dict("records")):
        y = row_height * i + 4
        share = row["covers_frac"] if math.isfinite(row["covers_frac"]) else 0.0
        long = (width - left - 60) * share / top
        colour = colours["aerosol"] if row["chosen"] else colours["lost"]
        weight = 650 if row["chosen"] else 400
        words = f"{100 * share:.0f} %"
        parts += [
            text(left - 8, y + 13, row["title"], colours["ink"], 12.5, "end", weight),
            rectangle(left, y + 3, long, 12, colour),
            text(left + long + 6, y + 13, words, colours["faint"], 11.5),
        ]
    words = "What each topic covers alone, by weight: " + ", ".join(
        f"{row['title']} {100 * row['covers_frac']:.0f} %"
        for row in table.head(6).to_dict("records")
        if math.isfinite(row["covers_frac"])
    )
    return drawing(width, height, words, parts)


def weeks_svg(session: Session, colours: Colours) -> str:
    """The weekly flagged share around a session, taught units and the others."""
    weeks = session.weeks
    width, height = WEEKS
    left, right, top, bottom = 48.0, width - 130.0, 16.0, height - 30.0
    n = len(weeks)
    seen = weeks[["share_frac", "other_frac"]].to_numpy(float)
    if not np.isfinite(seen).any():
        return drawing(width, 40, "No weeks to draw", [])
    high = min(1.0, float(np.nanmax(seen)) * 1.15 + 0.02)
    step = (right - left) / max(n - 1, 1)

    def to_x(i: float) -> float:
        return left + step * i

    def to_y(value: float) -> float:
        return bottom - (bottom - top) * min(max(value, 0.0), high) / high

    parts = []
    for value in ticks(0.0, high):
        words = f"{100 * value:.0f} %"
        parts += [
            line(
                left, to_y(value), right, to_y(value), colours["lost"], 0.6, opacity=0.5
            ),
            text(left - 6, to_y(value) + 4, words, colours["faint"], 10.5, "end"),
        ]
    parts += _session_line(session, to_x, (top, bottom), colours)
    parts += _series(weeks["other_frac"].to_numpy(float), to_x, to_y, colours["faint"])
    parts += _series(
        weeks["share_frac"].to_numpy(float), to_x, to_y, colours["aerosol"]
    )
    parts += _fit(session.own, weeks, to_x, to_y, colours)
    parts += _week_names(session, to_x, bottom, colours)
    parts += [
        text(right + 8, top + 14, "taught", colours["aerosol"], 12, weight=600),
        text(right + 8, top + 30, "lines: fit, dashed:", colours["faint"], 10.5),
        text(right + 8, top + 43, "as before, carried on", colours["faint"], 10.5),
    ]
    if session.units:
        parts.append(text(right + 8, top + 62, "other units", colours["faint"], 12))
    return drawing(width, height, session.sentence, parts)


def _session_line(
    session: Session,
    to_x: Callable[[float], float],
    span: tuple[float, float],
    colours: Colours,
) -> list[str]:
    before = int((session.weeks["week"] <= session.held_on).sum()) - 1.0
    x = to_x(before)
    left_out = int(session.weeks["left_out"].sum())
    parts = [line(x, span[0], x, span[1], colours["ink"], 1, "2 3")]
    if left_out:
        first = int(np.flatnonzero(session.weeks["left_out"])[0])
        wide = to_x(first + left_out - 0.5) - to_x(first - 0.5)
        parts.append(
            rectangle(
                to_x(first - 0.5),
                span[0],
                wide,
                span[1] - span[0],
                colours["lost"],
                opacity=0.2,
            )
        )
    return [*parts, text(x + 4, span[0] + 2, "session", colours["ink"], 10.5)]


def _series(
    values: np.ndarray,
    to_x: Callable[[float], float],
    to_y: Callable[[float], float],
    colour: str,
) -> list[str]:
    return [
        circle(to_x(i), to_y(value), 2.6, "none", colour)
        for i, value in enumerate(values)
        if math.isfinite(value)
    ]


def _fit(
    fit: Segmented,
    weeks,
    to_x: Callable[[float], float],
    to_y: Callable[[float], float],
    colours: Colours,
) -> list[str]:
    if fit.refusal:
        return []
    places = np.flatnonzero(~weeks["left_out"].to_numpy())
    after = weeks["after"].to_numpy()[places]

    def run(values: np.ndarray, which: np.ndarray, dash: str = "") -> str:
        points = [
            (to_x(int(p)), to_y(v))
            for p, v, yes in zip(places, values, which, strict=True)
            if yes
        ]
        return path(points, colours["ink"], 1.6, dash=dash)

    return [
        run(fit.fitted, ~after),
        run(fit.fitted, after),
        run(fit.expected, after, "4 3"),
    ]


def _week_names(
    session: Session, to_x: Callable[[float], float], bottom: float, colours: Colours
) -> list[str]:
    parts = []
    previous = ""
    for i, week in enumerate(session.weeks["week"]):
        name = week.strftime("%b")
        if name != previous:
            parts.append(text(to_x(i), bottom + 16, name, colours["faint"], 10.5))
        previous = name
    return parts
