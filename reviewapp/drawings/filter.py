"""Filters in pictures: one small drawing a filter, and one filter in depth."""

from __future__ import annotations

import math
from collections.abc import Callable
from html import escape
from typing import Any

import pandas as pd

from engine.reviews.filters import STATE_WORDS, Filters, OneFilter
from reviewapp.drawings.svg import (
    Colours,
    circle,
    drawing,
    fading,
    hatching,
    line,
    path,
    rectangle,
    text,
)

SMALL = (280.0, 168.0)
LARGE = (960.0, 360.0)
_SEGMENT_COLUMNS = [
    "from_h",
    "to_h",
    "slope_per_h",
    "slope_low",
    "slope_high",
    "begins_with",
    "middle_h",
    "middle_cmh2o_per_lps",
]
# The state is told by a mark before its word: filled where it is to be looked at.
STATE_MARKS = {
    "over_limit": "■",
    "near_limit": "■",
    "rising": "▲",
    "too_few_readings": "?",
    "steady": "○",
}


def small_filter_svg(
    review: Filters, filter_id: str, colours: Colours, top: float | None = None
) -> str:
    """One filter at a glance; ``top`` puts several on one scale."""
    row = _row(review, filter_id)
    readings = review.drawn[review.drawn["filter_id"] == filter_id]
    segments = review.segments[review.segments["filter_id"] == filter_id]
    width, height = SMALL
    frame = (34.0, 44.0, width - 30.0, height - 20.0)
    parts = [
        hatching(f"h-{_safe(filter_id)}", colours),
        text(0, 13, filter_id, colours["ink"], 13, weight=650),
        text(width, 13, _state_words(row), _state_colour(row, colours), 12, "end"),
        text(0, 30, _second_line(row), colours["faint"], 11),
        *_plot(row, readings, segments, review, frame, colours, top),
        *_share_bar(row, (width - 16, 44.0, 10.0, height - 64.0), colours),
    ]
    return drawing(width, height, _told(row, review), parts)


def one_filter_svg(review: Filters, one: OneFilter, colours: Colours) -> str:
    """One filter in depth: readings, segments, break, forecast, treatments below."""
    filter_id = str(one.facts["filter_id"])
    segments = pd.DataFrame(
        [
            {
                "from_h": s.from_h,
                "to_h": s.to_h,
                "slope_per_h": s.slope_per_h,
                "slope_low": s.slope_low,
                "slope_high": s.slope_high,
                "begins_with": s.begins_with,
                **_middle(one.readings, s.from_h, s.to_h),
            }
            for s in one.life.segments
        ],
        columns=_SEGMENT_COLUMNS,
    )
    width, height = LARGE
    frame = (70.0, 14.0, width - 76.0, height - 74.0)
    parts = [
        hatching(f"h-{_safe(filter_id)}", colours),
        *_plot(one.facts, one.readings, segments, review, frame, colours, None, True),
        *_share_bar(one.facts, (width - 44, 14.0, 18.0, height - 88.0), colours, True),
        *_treatment_ticks(one, review, frame, height, colours),
    ]
    return drawing(width, height, one.sentence, parts)


def survival_svg(review: Filters, by: str, colours: Colours) -> str:
    """Share of filters still under the limit by hours in use, a step curve a group."""
    curves = review.curves[review.curves["by"] == by]
    width, height = 560.0, 240.0
    left, top, right, bottom = 48.0, 14.0, width - 130.0, height - 36.0
    high = float(curves["hours"].max()) * 1.05 if len(curves) else 1.0

    def x(hours: float) -> float:
        return left + hours / high * (right - left)

    def y(share: float) -> float:
        return bottom - share * (bottom - top)

    parts = [line(left, bottom, right, bottom, colours["lost"])]
    for share in (0.0, 0.5, 1.0):
        parts.append(line(left, y(share), right, y(share), colours["lost"], 0.5, "2 4"))
        parts.append(
            text(left - 6, y(share) + 4, f"{share:.0%}", colours["faint"], 11, "end")
        )
    for tick in _ticks(high):
        parts.append(
            text(x(tick), bottom + 15, f"{tick:g}", colours["faint"], 11, "middle")
        )
    parts.append(text(right, bottom + 30, "hours in use", colours["faint"], 11, "end"))
    taken: list[float] = []
    for number, (group, own) in enumerate(curves.groupby("group", sort=True)):
        dash = ("", "6 3", "2 3", "8 3 2 3", "1 4")[number % 5]
        points, share = [(x(0.0), y(1.0))], 1.0
        for row in own.to_dict("records"):
            points += [
                (x(row["hours"]), y(share)),
                (x(row["hours"]), y(row["surviving_frac"])),
            ]
            share = row["surviving_frac"]
        points.append((right, y(share)))
        parts.append(path(points, colours["aerosol"], 1.8, dash=dash))
        place = y(share) + 4
        while any(abs(place - other) < 13 for other in taken):
            place += 13
        taken.append(place)
        parts.append(
            text(right + 6, place, str(group).replace("_", " "), colours["ink"], 11)
        )
    told = f"Share of filters still under the limit by hours in use, by {by}"
    return drawing(width, height, told, parts)


def _plot(
    row: Any,
    readings: pd.DataFrame,
    segments: pd.DataFrame,
    review: Filters,
    frame: tuple[float, float, float, float],
    colours: Colours,
    top: float | None,
    large: bool = False,
) -> list[str]:
    left, up, right, bottom = frame
    used = readings.dropna(subset=["resistance_cmh2o_per_lps"])
    span, end = _reach(row, used)
    values = used["resistance_cmh2o_per_lps"]
    high = top or max(
        review.limit_cmh2o_per_lps * 1.15,
        float(values.max()) * 1.05 if len(used) else 0,
    )

    def x(hours: float) -> float:
        return left + max(hours, 0) / max(end, 1e-9) * (right - left)

    def y(value: float) -> float:
        return bottom - min(value, high) / high * (bottom - up)

    size = 12 if large else 11
    limit, near = review.limit_cmh2o_per_lps, review.near_cmh2o_per_lps
    parts = [
        line(left, bottom, right, bottom, colours["lost"]),
        line(left, y(limit), right, y(limit), colours["fired"], 1, "5 3"),
        line(left, y(near), right, y(near), colours["lost"], 0.7, "2 3"),
        text(left - 4, y(limit) + 3, f"{limit:g}", colours["fired"], size, "end"),
        text(left - 4, bottom + 3, "0", colours["faint"], size, "end"),
    ]
    for tick in _ticks(end):
        parts.append(
            text(x(tick), bottom + 12, f"{tick:g}", colours["faint"], size, "middle")
        )
    if large:
        parts.append(text(left, bottom + 26, "hours in use", colours["faint"], 11))
        words = "cmH2O/(L/s) at " + f"{review.reference_flow_lpm:g} L/min"
        parts.append(text(left + 6, up + 10, words, colours["faint"], 11))
        parts.append(
            text(right - 4, y(limit) - 5, "limit", colours["fired"], 11, "end")
        )
        parts.append(text(right - 4, y(near) - 5, "near", colours["faint"], 11, "end"))
    parts += _segments(segments, x, y, up, bottom, colours, large)
    parts += _forecast(row, segments, span, x, y, limit, colours)
    for reading in readings.to_dict("records"):
        value = reading["resistance_cmh2o_per_lps"]
        if value is None or pd.isna(value):
            words = f"{reading['reading_id']} not used: {reading['doubt']}"
            parts.append(
                text(
                    x(reading["hours_h"]),
                    bottom - 2,
                    "×",
                    colours["unknown"],
                    10,
                    "middle",
                )
            )
            parts.append(
                circle(x(reading["hours_h"]), bottom - 5, 4, "transparent", words=words)
            )
        else:
            words = (
                f"{reading['reading_id']}, hour {reading['hours_h']:.0f}: {value:.2f}"
            )
            r = 3.2 if large else 2.2
            parts.append(
                circle(x(reading["hours_h"]), y(value), r, colours["ink"], words=words)
            )
    if used.empty:
        parts.append(
            text(
                (left + right) / 2,
                (up + bottom) / 2,
                "no usable reading",
                colours["unknown"],
                11,
                "middle",
            )
        )
    return parts


def _segments(
    segments: pd.DataFrame,
    x: Callable[[float], float],
    y: Callable[[float], float],
    up: float,
    bottom: float,
    colours: Colours,
    large: bool,
) -> list[str]:
    parts = []
    for row in segments.to_dict("records"):
        if not math.isnan(row["slope_per_h"]):
            ends = [row["from_h"], row["to_h"]]
            points = [
                (
                    x(h),
                    y(
                        row["middle_cmh2o_per_lps"]
                        + row["slope_per_h"] * (h - row["middle_h"])
                    ),
                )
                for h in ends
            ]
            parts.append(path(points, colours["aerosol"], 2))
        if row["begins_with"] != "installation":
            at = x(row["from_h"]) - 2
            parts.append(line(at, up, at, bottom, colours["unknown"], 1.4, "3 3"))
            words = row["begins_with"] if large else "change?"
            parts.append(
                text(at + 3, bottom - 4, words, colours["unknown"], 12 if large else 11)
            )
    return parts


def _forecast(
    row: Any,
    segments: pd.DataFrame,
    span: float,
    x: Callable[[float], float],
    y: Callable[[float], float],
    limit: float,
    colours: Colours,
) -> list[str]:
    """A band that fades towards its horizon; without a date it stops at once."""
    last = row["last_h"]
    if segments.empty or last is None or pd.isna(last):
        return []
    own = segments.iloc[-1]
    at_last = own["middle_cmh2o_per_lps"] + own["slope_per_h"] * (
        last - own["middle_h"]
    )
    if row["time_to_limit_h"] is None or pd.isna(row["time_to_limit_h"]):
        if math.isnan(own["slope_per_h"]) or row["state"] == "over_limit":
            return []
        return [
            line(
                x(last) + 3,
                y(at_last) - 5,
                x(last) + 3,
                y(at_last) + 5,
                colours["unknown"],
                2,
            )
        ]
    name = f"f-{_safe(str(row['filter_id']))}"
    hours = [last + span * k / 24 for k in range(25)]

    def course(slope: float) -> list[tuple[float, float]]:
        start = own["middle_cmh2o_per_lps"] - slope * own["middle_h"]
        return [(x(h), y(start + slope * h)) for h in hours]

    band = [*course(own["slope_high"]), *course(own["slope_low"])[::-1]]
    crossing = x(last + row["time_to_limit_h"])
    return [
        fading(name, colours["aerosol"]),
        path(band, "none", fill=f"url(#{name})"),
        line(x(last), y(at_last), crossing, y(limit), colours["aerosol"], 1.2, "4 3"),
        circle(crossing, y(limit), 3.5, "none", colours["fired"]),
    ]


def _share_bar(
    row: Any,
    box: tuple[float, float, float, float],
    colours: Colours,
    large: bool = False,
) -> list[str]:
    """How much of the rise points to aerosol: the filled part of a bar."""
    x, y, width, height = box
    name = f"h-{_safe(str(row['filter_id']))}"
    if row["share"] is None or pd.isna(row["share"]):
        parts = [rectangle(x, y, width, height, f"url(#{name})", colours["unknown"])]
        parts.append(
            text(
                x + width / 2,
                y + height / 2,
                "?",
                colours["unknown"],
                11,
                "middle",
                700,
            )
        )
        return parts
    fill = height * row["share"]
    ends_words = f"{row['share_low']:.0%} to {row['share_high']:.0%}"
    words = f"{row['share']:.0%} ({ends_words}) points to aerosol"
    told = row["verdict"] != "cannot_tell"
    parts = [
        rectangle(x, y, width, height, colours["panel"], colours["lost"], words=words),
        rectangle(
            x,
            y + height - fill,
            width,
            fill,
            colours["aerosol"] if told else f"url(#{name})",
            words=words,
        ),
    ]
    ends = (y + height * (1 - row["share_high"]), y + height * (1 - row["share_low"]))
    middle = x + width / 2
    parts.append(line(middle, ends[0], middle, ends[1], colours["ink"], 1.2))
    if large:
        parts.append(
            text(
                x + width,
                y + height + 14,
                f"{row['share']:.0%}",
                colours["ink"],
                11,
                "end",
            )
        )
        parts.append(
            text(x + width, y + height + 27, "to aerosol", colours["faint"], 11, "end")
        )
    return parts


def _treatment_ticks(
    one: OneFilter,
    review: Filters,
    frame: tuple[float, float, float, float],
    height: float,
    colours: Colours,
) -> list[str]:
    left, _, right, _ = frame
    used = one.readings.dropna(subset=["resistance_cmh2o_per_lps"])
    _, end = _reach(one.facts, used)
    y = height - 22
    parts = [text(left - 8, y + 4, "treatments", colours["faint"], 11, "end")]
    for row in one.treatments.to_dict("records"):
        at = left + max(row["hours_h"], 0) / max(end, 1e-9) * (right - left)
        if at > right:
            continue
        caught = row["captured_ml"]
        words = f"{row['treatment_id']}: {row['drug'] or 'drug not recorded'}"
        if caught is None or pd.isna(caught):
            parts.append(text(at, y + 4, "?", colours["unknown"], 10, "middle"))
        else:
            words += f", about {caught:.2f} mL caught"
            tall = min(4 + 10 * caught, 16)
            parts.append(
                rectangle(
                    at - 1.2, y + 6 - tall, 2.4, tall, colours["aerosol"], words=words
                )
            )
    return parts


def _reach(row: Any, used: pd.DataFrame) -> tuple[float, float]:
    """The observed span, and where the axis ends: the forecast's horizon if any."""
    hours = used["hours_h"]
    last = float(hours.max()) if len(used) else float(row["in_use_h"] or 1.0)
    span = last - float(hours.min()) if len(used) else 0.0
    if row["time_to_limit_h"] is not None and not pd.isna(row["time_to_limit_h"]):
        return span, last + span
    return span, max(last * 1.08, 1.0)


def _middle(readings: pd.DataFrame, from_h: float, to_h: float) -> dict[str, float]:
    inside = readings[
        readings["hours_h"].between(from_h, to_h)
        & readings["resistance_cmh2o_per_lps"].notna()
    ]
    return {
        "middle_h": float(inside["hours_h"].median()),
        "middle_cmh2o_per_lps": float(inside["resistance_cmh2o_per_lps"].median()),
    }


def _row(review: Filters, filter_id: str) -> dict[str, Any]:
    found = review.lives[review.lives["filter_id"] == filter_id]
    return {str(name): value for name, value in found.iloc[0].items()}


def _state_words(row: dict[str, Any]) -> str:
    return f"{STATE_MARKS[row['state']]} {STATE_WORDS[row['state']]}"


def _state_colour(row: dict[str, Any], colours: Colours) -> str:
    if row["state"] in {"over_limit", "near_limit", "rising"}:
        return colours["fired"]
    return colours["unknown" if row["state"] == "too_few_readings" else "faint"]


def _second_line(row: dict[str, Any]) -> str:
    where = row["ventilator_token"] or "ventilator not recorded"
    use = "in use" if row["in_use"] else "removed"
    left = row["time_to_limit_h"]
    ahead = "" if left is None or pd.isna(left) else f", limit in about {left:.0f} h"
    return f"{where}, {use}, {row['in_use_h']:.0f} h{ahead}"


def _told(row: dict[str, Any], review: Filters) -> str:
    last = row["last_cmh2o_per_lps"]
    value = "no usable reading" if last is None or pd.isna(last) else f"last {last:.2f}"
    return (
        f"Filter {row['filter_id']}, {STATE_WORDS[row['state']]}: {value} of a limit of"
        f" {review.limit_cmh2o_per_lps:g} cmH2O/(L/s); {_second_line(row)}"
    )


def _ticks(high: float) -> list[float]:
    if high <= 0:
        return [0.0]
    step = 10 ** math.floor(math.log10(high))
    for divide in (1, 2, 5):
        if high / (step / divide) >= 3:
            step /= divide
            break
    return [k * step for k in range(int(high / step) + 1)]


def _safe(name: str) -> str:
    """An id fit for an SVG reference."""
    return "".join(c if c.isalnum() else f"_{ord(c):x}" for c in escape(name))
