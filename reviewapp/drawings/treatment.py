"""Small drawings beside one treatment: its other sites, and the split at the Y."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from engine.columns import CHOICE_SITES
from engine.physics.picture import SplitPicture
from engine.rules.wording import is_logged, word
from reviewapp.drawings.circuit import band
from reviewapp.drawings.svg import (
    Colours,
    circle,
    drawing,
    hatching,
    line,
    path,
    rectangle,
    text,
    to_look_at,
)


def sites_svg(row: Mapping[str, Any], colours: Colours) -> str:
    """What every site this generator may use would have given, with its band."""
    width, left, right, step = 760.0, 232.0, 560.0, 27.0
    top = _top(row)
    parts, y = [], 34.0
    for value in (0.0, top / 2, top):
        x = left + (right - left) * value / top
        parts.append(
            line(x, 22, x, 22 + step * len(CHOICE_SITES), colours["lost"], 0.6)
        )
        parts.append(
            text(x, 15, f"{value * 100:.0f} %", colours["faint"], 11, "middle")
        )
    for site in CHOICE_SITES:
        here = row.get("site") == site
        ink = colours["ink"] if here else colours["faint"]
        parts.append(
            text(
                left - 10,
                y + 4,
                word("site", site),
                ink,
                13,
                "end",
                600 if here else 400,
            )
        )
        parts += _bar(row, site, y, left, right, top, colours, here)
        y += step
    words = "Estimated dose past the tube at each site, share of the nominal dose"
    return drawing(width, y + 4, words, parts)


def _bar(
    row: Mapping[str, Any],
    site: str,
    y: float,
    left: float,
    right: float,
    top: float,
    colours: Colours,
    here: bool,
) -> list[str]:
    name = f"delivered_at_{site}"
    if not is_logged(row.get(f"{name}_frac")):
        return [
            text(left + 6, y + 4, "not a site for this setup", colours["faint"], 12)
        ]
    point, low, high = (
        float(row[f"{name}{end}_frac"]) for end in ("", "_low", "_high")
    )
    at = [left + (right - left) * min(value, top) / top for value in (point, low, high)]
    mark = (
        to_look_at(at[0], y, colours, r=5)
        if here
        else circle(at[0], y, 5, colours["paper"], colours["aerosol"])
    )
    return [
        rectangle(at[1], y - 4, at[2] - at[1], 8, colours["aerosol"], opacity=0.28),
        mark,
        text(right + 12, y + 4, band(point, low, high), colours["ink"], 12.5),
    ]


def _top(row: Mapping[str, Any]) -> float:
    highs = [row.get(f"delivered_at_{site}_high_frac") for site in CHOICE_SITES]
    known = [float(value) for value in highs if is_logged(value)]
    return max([0.1, *known])


def split_svg(picture: SplitPicture, colours: Colours) -> str:
    """One breath as gas passing the Y: what arrives with it, and what becomes of it."""
    width, height, left, right, base = 760.0, 210.0, 40.0, 720.0, 150.0
    share = picture.arriving_per_ml / max(float(picture.arriving_per_ml.max()), 1e-12)

    def to_x(volume_ml: float) -> float:
        return left + (right - left) * volume_ml / picture.cycle_ml

    points = [
        (to_x(float(v)), base - 104 * float(s))
        for v, s in zip(picture.position_ml, share, strict=True)
    ]
    inhaled = [p for p, yes in zip(points, picture.is_inhaled, strict=True) if yes]
    swept = [p for p, yes in zip(points, picture.is_inhaled, strict=True) if not yes]
    parts = [hatching("parked", colours, 6)]
    if picture.carried_ml >= 1:
        begun = to_x(picture.inspired_ml)
        parts.append(rectangle(begun, 30, right - begun, base - 30, "url(#parked)"))
    for run, fill, opacity in (
        (inhaled, colours["aerosol"], 0.75),
        (swept, colours["fired"], 0.55),
    ):
        if len(run) > 1:
            closed = [(run[0][0], base), *run, (run[-1][0], base)]
            parts.append(path(closed, "none", 0, fill, opacity=opacity))
    ink, faint = colours["ink"], colours["faint"]
    ends = (
        (0.0, picture.inspired_ml, "patient breathes in"),
        (picture.inspired_ml, picture.cycle_ml, "breathes out"),
    )
    parts.append(line(left, base, right, base, ink))
    for begin, end, words in ends:
        if end - begin < 1:
            continue
        a, b = to_x(begin), to_x(end)
        parts.append(line(b, base, b, base + 8, ink))
        parts.append(text((a + b) / 2, base + 22, words, faint, 12, "middle"))
        parts.append(
            text((a + b) / 2, base + 38, f"{end - begin:.0f} mL", faint, 12, "middle")
        )
    parts.append(
        text(
            left,
            18,
            f"inhaled {picture.inhaled_frac:.0%}",
            colours["aerosol"],
            13,
            weight=600,
        )
    )
    parts.append(
        text(
            right,
            18,
            f"swept past the Y {picture.swept_frac:.0%}",
            colours["fired"],
            13,
            "end",
            600,
        )
    )
    parts.append(
        text(left, height - 6, "gas passing the Y in one breath, mL", faint, 12)
    )
    return drawing(width, height, picture.sentence, parts)
