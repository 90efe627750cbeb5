"""How much of each column nobody recorded, drawn as hatching."""

from __future__ import annotations

from collections.abc import Sequence

from reviewapp import theme
from reviewapp.drawings.svg import drawing, hatching, rectangle, text

ROW = 18.0


def unknown_svg(shares: Sequence[tuple[str, float]]) -> str:
    """One bar a column: known plain, unknown hatched; to scale."""
    colours = theme.colours()
    left, right = 250.0, 690.0
    parts, y = [hatching("unsaid-share", colours)], 6.0
    for label, share in shares:
        width = (right - left) * share
        parts += [
            text(left - 8, y + 11, label, colours["ink"], 12, "end"),
            rectangle(left, y + 2, right - left, 11, colours["aerosol"], opacity=0.18),
            rectangle(left, y + 2, width, 11, colours["panel"]),
            rectangle(left, y + 2, width, 11, "url(#unsaid-share)", colours["unknown"]),
            text(right + 8, y + 11, f"{share:.0%}", colours["ink"], 12),
        ]
        y += ROW
    title = "Unknown share of each column: " + ", ".join(
        f"{label} {share:.0%}" for label, share in shares[:8]
    )
    return f'<div style="max-width:820px">{drawing(760, y + 4, title, parts)}</div>'
