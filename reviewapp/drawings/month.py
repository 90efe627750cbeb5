"""The month in pictures: an interval bar and a small run chart for each line, and the
line opened: its months with intervals and limits."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

import numpy as np
import pandas as pd

from engine.reviews.figures import month_words, significant
from engine.reviews.month_lines import Line
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

BAR = (136.0, 26.0)
SPARK = (104.0, 34.0)
CHART = (860.0, 236.0)
LETTERS = 26.0  # room below a chart for its month letters

Scale = Callable[[float], float]


def interval_bar_svg(each: Line, colours: Colours) -> str:
    """Known part with its interval on 0 to 100 %, the unknown share hatched behind.

    The whole length is all treatments: what is known lies left, what nobody recorded
    is the hatched end, both to scale.
    """
    width, height = BAR
    name = f"bar-{each.indicator.id}"
    if not each.indicator.is_share:
        return _amount_bar(each, colours)
    told = each.known + each.unknown
    unknown = each.unknown / told if told else 1.0
    known_width = width * (1 - unknown)
    parts = [
        hatching(name, colours),
        rectangle(0, 8, width, 10, colours["lost"], opacity=0.22),
        rectangle(known_width, 8, width * unknown, 10, f"url(#{name})"),
    ]
    if each.known and math.isfinite(each.low):
        share = each.count / each.known
        colour = _colour(each, colours)
        ends = known_width * each.low, known_width * each.high
        parts += [
            rectangle(0, 8, known_width * share, 10, colour, opacity=0.85),
            line(
                known_width * each.low, 13, known_width * each.high, 13, colours["ink"]
            ),
            *(line(end, 9.5, end, 16.5, colours["ink"]) for end in ends),
        ]
        parts += _start_mark(each, known_width, colours)
    return drawing(width, height, _bar_words(each), parts)


def _start_mark(each: Line, width: float, colours: Colours) -> list[str]:
    """A small notch above the bar where the indicator's start lies."""
    if each.indicator.start is None:
        return []
    x = width * float(each.indicator.start)
    return [path([(x - 3.5, 1), (x + 3.5, 1), (x, 6.5)], "none", 0, colours["faint"])]


def _amount_bar(each: Line, colours: Colours) -> str:
    """A figure without a whole: its interval on a scale of its own months."""
    width, height = BAR
    ends = each.months[["low", "high", "value"]].to_numpy(float)
    top = np.nanmax(ends) if np.isfinite(ends).any() else 1.0
    to_x: Scale = lambda v: width * min(max(v / top, 0.0), 1.0) if top else 0.0  # noqa: E731
    parts = [line(0, 13, width, 13, colours["lost"], 1, opacity=0.6)]
    if each.value is not None:
        if math.isfinite(each.low):
            low, high = to_x(each.low), to_x(each.high)
            parts.append(line(low, 13, high, 13, colours["ink"], 2))
        parts.append(circle(to_x(each.value), 13, 4, colours["aerosol"]))
    return drawing(width, height, _bar_words(each), parts)


def _bar_words(each: Line) -> str:
    unknown = each.unknown_frac
    tail = f" Unknown {100 * unknown:.0f} %." if math.isfinite(unknown) else ""
    return f"{each.says}{tail}"


def spark_svg(each: Line, colours: Colours) -> str:
    """The run of months, small: median or frozen centre, last point marked."""
    width, height = SPARK
    values = each.months["value"].to_numpy(float)
    if not np.isfinite(values).any():
        return drawing(width, height, "No figures to draw", [])
    low, high = _span(each, with_limits=False)
    to_x = _across(len(values), 6, width - 8)
    to_y = _up(low, high, height - 5, 5)
    centre = _centre(each)
    parts = []
    if math.isfinite(centre):
        parts.append(line(2, to_y(centre), width - 2, to_y(centre), colours["lost"], 1))
    for stretch in _stretches(values):
        points = [(to_x(i), to_y(values[i])) for i in stretch]
        parts.append(path(points, colours["aerosol"], 1.4))
    outside = each.months["outside"].to_numpy(bool)
    for i in map(int, np.flatnonzero(np.isfinite(values))):
        x, y = to_x(i), to_y(values[i])
        if outside[i]:
            parts.append(rectangle(x - 3, y - 3, 6, 6, _beyond(each, i, colours)))
        elif i == len(values) - 1:
            parts.append(circle(x, y, 3.2, colours["aerosol"]))
    return drawing(width, height, _spark_words(each), parts)


def _spark_words(each: Line) -> str:
    seen = int(each.months["value"].notna().sum())
    shift = "too few months to show a shift"
    if each.run.signal is not None:
        shift = "a shift shows" if each.run.signal else "no shift shows"
    return f"{each.indicator.title}: {seen} months, {shift}"


def run_chart_svg(
    each: Line, colours: Colours, marks: Sequence[tuple[str, str]] = ()
) -> str:
    """Months with intervals, centre line and exact limits; outside as filled squares.

    ``marks``  month and words of what was done then (a session, a new filter stock)
    """
    width, height = CHART
    values = each.months["value"].to_numpy(float)
    if not np.isfinite(values).any():
        return drawing(width, 40, "No figures to draw", [])
    low, high = _span(each, with_limits=True)
    left, right, top, bottom = 62.0, width - 120.0, 18.0, height - LETTERS - 8
    to_x, to_y = (
        _across(len(values), left + 14, right - 14),
        _up(low, high, bottom, top),
    )
    parts = [*_axis(each, low, high, to_y, left, right, colours)]
    parts += _month_letters(each.months["local_month"], to_x, bottom, colours)
    parts += _limit_steps(each, to_x, to_y, right, colours)
    parts += _marks(marks, each.months["local_month"], to_x, (top, bottom), colours)
    for stretch in _stretches(values):
        parts.append(
            path([(to_x(i), to_y(values[i])) for i in stretch], colours["aerosol"], 1.6)
        )
    parts += _points(each, to_x, to_y, colours)
    return drawing(width, height, _chart_words(each), parts)


def _points(each: Line, to_x: Scale, to_y: Scale, colours: Colours) -> list[str]:
    parts = []
    for i, row in enumerate(each.months.to_dict("records")):
        if not math.isfinite(row["value"]):
            continue
        x, y = to_x(i), to_y(row["value"])
        words = (
            f"{month_words(row['local_month'])}: {_written(each, row['value'])},"
            f" {row['known']:.0f} known, {row['unknown']:.0f} unknown"
        )
        if math.isfinite(row["low"]) and math.isfinite(row["high"]):
            ends = to_y(row["low"]), to_y(row["high"])
            parts.append(
                line(x, *ends[:1], x, ends[1], colours["faint"], 1, opacity=0.7)
            )
        if row["outside"]:
            parts.append(
                rectangle(
                    x - 4.5, y - 4.5, 9, 9, _beyond(each, i, colours), words=words
                )
            )
        else:
            parts.append(circle(x, y, 4, colours["panel"], colours["aerosol"], words))
    return parts


def _limit_steps(
    each: Line, to_x: Scale, to_y: Scale, right: float, colours: Colours
) -> list[str]:
    parts = []
    centre = _centre(each)
    if math.isfinite(centre):
        first, last = to_x(0) - 12, to_x(len(each.months) - 1) + 12
        parts.append(line(first, to_y(centre), last, to_y(centre), colours["ink"], 1))
        label = "centre" if each.baseline is not None else "median"
        words = f"{label} {_written(each, centre)}"
        parts.append(text(right + 4, to_y(centre) + 4, words, colours["ink"], 11))
    half = (to_x(1) - to_x(0)) / 2 if len(each.months) > 1 else 20.0
    for column, name in (("limit_low", "lower limit"), ("limit_high", "upper limit")):
        limits = each.months[column].to_numpy(float)
        for i, value in enumerate(limits):
            if math.isfinite(value):
                y = to_y(value)
                start = max(to_x(i) - half, to_x(0) - 12)
                end = min(to_x(i) + half, right - 2)
                parts.append(line(start, y, end, y, colours["faint"], 1, "3 3"))
        if math.isfinite(limits[-1]):
            y = to_y(limits[-1])
            words = f"{name} {_written(each, limits[-1])}"
            if not math.isfinite(centre) or abs(y - to_y(centre)) > 12:
                parts.append(text(right + 4, y + 4, words, colours["faint"], 11))
    return parts


def _marks(
    marks: Sequence[tuple[str, str]],
    months: pd.Series,
    to_x: Scale,
    span: tuple[float, float],
    colours: Colours,
) -> list[str]:
    parts = []
    places = {month: i for i, month in enumerate(months)}
    for month, words in marks:
        if month in places:
            x = to_x(places[month])
            parts += [
                line(x, span[0], x, span[1], colours["ink"], 1, "1 3"),
                text(x + 4, span[0] + 4, words, colours["ink"], 10.5),
            ]
    return parts


def _axis(
    each: Line,
    low: float,
    high: float,
    to_y: Scale,
    left: float,
    right: float,
    colours: Colours,
) -> list[str]:
    parts = []
    for value in ticks(low, high):
        y = to_y(value)
        parts += [
            line(left, y, right, y, colours["lost"], 0.6, opacity=0.5),
            text(left - 6, y + 4, _written(each, value), colours["faint"], 11, "end"),
        ]
    return parts


def _month_letters(
    months: pd.Series, to_x: Scale, bottom: float, colours: Colours
) -> list[str]:
    every = max(1, math.ceil(len(months) / 13))
    parts = []
    for i, month in enumerate(months):
        if (len(months) - 1 - i) % every:
            continue
        name = month_words(month)
        words = f"{name[:3]} {name[-2:]}" if i == 0 or month[-2:] == "01" else name[:3]
        parts.append(text(to_x(i), bottom + 18, words, colours["faint"], 11, "middle"))
    return parts


def _chart_words(each: Line) -> str:
    rows = each.months[each.months["value"].notna()].tail(12)
    told = ", ".join(
        f"{month_words(row['local_month'])} {_written(each, row['value'])}"
        for row in rows.to_dict("records")
    )
    return f"{each.indicator.title} by month: {told}. {each.changed}"


def _span(each: Line, with_limits: bool) -> tuple[float, float]:
    columns = ["value", "low", "high"] if with_limits else ["value"]
    if with_limits:
        columns += ["limit_low", "limit_high"]
    seen = each.months[columns].to_numpy(float)
    low, high = float(np.nanmin(seen)), float(np.nanmax(seen))
    if each.indicator.is_share:
        pad = max(0.04, 0.15 * (high - low)) if not with_limits else 0.02
        return max(low - pad, 0.0), min(high + pad, 1.0)
    pad = 0.1 * (high - low) or abs(high) * 0.2 or 1.0
    return max(low - pad, 0.0) if low >= 0 else low - pad, high + pad


def _centre(each: Line) -> float:
    centre = each.months["centre"].dropna()
    if len(centre):
        return float(centre.iloc[-1])
    return float(each.months["value"].median())


def ticks(low: float, high: float, about: int = 4) -> list[float]:
    """Round values inside the span, some four of them."""
    if not high > low:
        return [low]
    raw = (high - low) / about
    size = 10.0 ** math.floor(math.log10(raw))
    step = next(size * m for m in (1, 2, 2.5, 5, 10) if size * m >= raw * 0.999)
    first = math.ceil(low / step - 1e-9)
    last = math.floor(high / step + 1e-9)
    return [step * i for i in range(first, last + 1)]


def _across(n: int, left: float, right: float) -> Scale:
    step = (right - left) / max(n - 1, 1)
    return lambda i: (left + step * i) if n > 1 else (left + right) / 2


def _up(low: float, high: float, bottom: float, top: float) -> Scale:
    span = (high - low) or 1.0
    return lambda v: bottom - (bottom - top) * (v - low) / span


def _stretches(values: np.ndarray) -> list[np.ndarray]:
    """Runs of months with a figure: a month without one is a gap."""
    known = np.flatnonzero(np.isfinite(values))
    if not len(known):
        return []
    return np.split(known, np.flatnonzero(np.diff(known) > 1) + 1)


def _written(each: Line, value: float) -> str:
    if each.indicator.unit == "%":
        figure = 100 * value
        return f"{figure:.0f} %" if figure >= 10 or figure == 0 else f"{figure:.1f} %"
    return significant(value)


def _beyond(each: Line, i: int, colours: Colours) -> str:
    """The colour of a month outside its limits: to be looked at where unwanted."""
    row = each.months.iloc[i]
    side = 1 if row["value"] > row["centre"] else -1
    wanted = side == each.indicator.wanted_side
    return colours["aerosol" if wanted else "fired"]


def _colour(each: Line, colours: Colours) -> str:
    return colours["fired"] if each.look else colours["aerosol"]
