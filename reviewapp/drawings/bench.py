"""Every bench result against its estimate, on one pair of axes."""

from __future__ import annotations

import math

import pandas as pd

from reviewapp.drawings.svg import Colours, circle, drawing, line, rectangle, text

LOWEST, HIGHEST = 0.005, 0.8


def bench_svg(rows: pd.DataFrame, colours: Colours) -> str:
    """Observed across, estimate with band up; both as a share, on odds scales."""
    size, left, top = 460.0, 60.0, 14.0
    low, high = _odds(LOWEST), _odds(HIGHEST)

    def at(share: float) -> float:
        inside = min(max(share, LOWEST), HIGHEST)
        return (_odds(inside) - low) / (high - low) * size

    parts = []
    for share in (0.01, 0.03, 0.1, 0.2, 0.4, 0.6):
        x, y = left + at(share), top + size - at(share)
        parts += [
            line(x, top, x, top + size, colours["lost"], 0.5),
            line(left, y, left + size, y, colours["lost"], 0.5),
            text(x, top + size + 16, f"{share:.0%}", colours["faint"], 11, "middle"),
            text(left - 6, y + 4, f"{share:.0%}", colours["faint"], 11, "end"),
        ]
    parts.append(line(left, top + size, left + size, top, colours["ink"], 1, "5 4"))
    for row in rows.to_dict("records"):
        fitted = row["kind"] == "calibration"
        x = left + at(row["observed_frac"])
        ends = [top + size - at(row[name]) for name in ("low", "high", "estimate")]
        stroke = colours["lost"] if fitted else colours["aerosol"]
        words = (
            f"{row['study']}, {row['condition']}: observed {row['observed_frac']:.1%}, "
            f"estimate {row['estimate']:.1%} ({row['low']:.1%} to {row['high']:.1%})"
        )
        parts.append(line(x, ends[0], x, ends[1], stroke, 1.2, opacity=0.6))
        if row["inside"]:
            fill = colours["paper"] if fitted else stroke
            parts.append(circle(x, ends[2], 4, fill, stroke, words))
        else:
            fill = colours["fired"]
            parts.append(rectangle(x - 4, ends[2] - 4, 8, 8, fill, fill, words=words))
    faint, ink = colours["faint"], colours["ink"]
    key_x = left + size + 24
    key = (
        (circle(key_x, 40, 4, colours["aerosol"]), "not fitted, inside its band"),
        (circle(key_x, 62, 4, colours["paper"], colours["lost"]), "fitted"),
        (
            rectangle(key_x - 4, 80, 8, 8, colours["fired"]),
            "outside its band",
        ),
    )
    for place, (mark, words) in enumerate(key):
        parts += [mark, text(key_x + 12, 44 + 22 * place, words, ink, 12)]
    parts += [
        text(
            left + size / 2,
            top + size + 34,
            "observed, % of nominal dose",
            faint,
            12,
            "middle",
        ),
        text(6, top + 4, "estimate,", faint, 12),
        text(6, top + 18, "% of dose", faint, 12),
    ]
    title = f"{len(rows)} bench results, observed against estimated dose"
    body = drawing(760, top + size + 44, title, parts)
    return f'<div style="max-width:760px">{body}</div>'


def _odds(share: float) -> float:
    return math.log(share / (1 - share))
