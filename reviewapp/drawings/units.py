"""Units beside each other, by name: intervals, and a funnel where there are enough."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np
import pandas as pd

from engine.reviews.month_units import Units
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

Scale = Callable[[float], float]


def units_svg(units: Units, colours: Colours) -> str:
    """Units by name: raw rate with interval, shrunken rate below it, hidden hatched."""
    table = units.table
    width, row_height = 520.0, 30.0
    height = 34 + row_height * max(len(table), 1)
    left, right = 120.0, width - 70.0
    top = _top(table)
    to_x: Scale = lambda v: left + (right - left) * v / top  # noqa: E731
    name = f"units-{units.indicator.id}"
    parts = [hatching(name, colours)]
    for value in ticks(0, top, 5):
        parts += [
            line(to_x(value), 20, to_x(value), height - 8, colours["lost"], 0.6),
            text(
                to_x(value),
                14,
                f"{100 * value:.0f} %",
                colours["faint"],
                10.5,
                "middle",
            ),
        ]
    if math.isfinite(units.target):
        x = to_x(units.target)
        parts.append(line(x, 20, x, height - 8, colours["ink"], 1, "4 3"))
    for i, row in enumerate(table.to_dict("records")):
        y = 36 + row_height * i
        parts.append(text(0, y + 4, row["unit_token"], colours["ink"], 12))
        if row["hidden"]:
            parts += [
                rectangle(left, y - 8, right - left, 16, f"url(#{name})"),
                text(right + 6, y + 4, "hidden", colours["unknown"], 11),
            ]
        elif math.isfinite(row["value"]):
            parts += _unit_row(row, y, to_x, right, colours)
    words = f"{units.sentence} {' '.join(units.notes)}"
    return drawing(width, height, words, parts)


def _unit_row(
    row: dict[Any, Any], y: float, to_x: Scale, right: float, colours: Colours
) -> list[str]:
    colour = colours["fired"] if row["outside"] else colours["aerosol"]
    parts = [
        line(to_x(row["low"]), y, to_x(row["high"]), y, colour, 2),
        text(right + 6, y + 4, f"n {row['known']:.0f}", colours["faint"], 11),
    ]
    if row["outside"]:
        parts.append(rectangle(to_x(row["value"]) - 4.5, y - 4.5, 9, 9, colour))
    else:
        parts.append(circle(to_x(row["value"]), y, 4.5, colours["panel"], colour))
    if math.isfinite(row["shrunk"]):
        x = to_x(row["shrunk"])
        diamond = [(x - 3.5, y + 8), (x, y + 4.5), (x + 3.5, y + 8), (x, y + 11.5)]
        parts.append(path(diamond, "none", 0, colours["faint"]))
    return parts


def funnel_svg(units: Units, colours: Colours) -> str:
    """Units against their size, with 95 and 99.8 % lines around the whole."""
    funnel = units.funnel
    if funnel.empty:
        return ""
    width, height = 520.0, 250.0
    left, right, top, bottom = 46.0, width - 14.0, 14.0, height - 34.0
    most, ceiling = float(funnel["n"].max()), _top(units.table)
    ceiling = min(max(ceiling, float(funnel["high_998"].iloc[len(funnel) // 3])), 1.0)
    to_x: Scale = lambda n: left + (right - left) * n / most  # noqa: E731
    to_y: Scale = lambda v: bottom - (bottom - top) * min(v, ceiling) / ceiling  # noqa: E731
    parts = [
        line(left, to_y(units.target), right, to_y(units.target), colours["ink"], 1)
    ]
    for share in ticks(0, ceiling, 5):
        parts.append(
            text(
                left - 6,
                to_y(share) + 4,
                f"{100 * share:.0f} %",
                colours["faint"],
                10.5,
                "end",
            )
        )
    for column, dash in (("95", "4 3"), ("998", "1.5 3")):
        for end in ("low", "high"):
            points = [
                (to_x(n), to_y(v))
                for n, v in zip(funnel["n"], funnel[f"{end}_{column}"], strict=True)
            ]
            parts.append(path(points, colours["faint"], 1, dash=dash))
    for row in units.table.to_dict("records"):
        if row["hidden"] or not math.isfinite(row["value"]):
            continue
        x, y = to_x(row["known"] / row["design_effect"]), to_y(row["value"])
        if row["outside"]:
            parts.append(rectangle(x - 4.5, y - 4.5, 9, 9, colours["fired"]))
        else:
            parts.append(circle(x, y, 4.5, colours["panel"], colours["aerosol"]))
        parts.append(text(x + 7, y + 4, row["unit_token"], colours["ink"], 11))
    parts.append(
        text(
            (left + right) / 2,
            height - 6,
            "treatments, patients who come back allowed for",
            colours["faint"],
            11,
            "middle",
        )
    )
    words = f"{units.sentence} Dashed: 95 %, dotted: 99.8 % of units would lie inside."
    return drawing(width, height, words, parts)


def _top(table: pd.DataFrame) -> float:
    values = table[["high", "value"]].to_numpy(float)
    most = np.nanmax(values) if np.isfinite(values).any() else 1.0
    return float(min(1.0, math.ceil(most * 10 + 0.2) / 10))


def _percent(share: float) -> str:
    return f"{100 * share:.0f} %"
