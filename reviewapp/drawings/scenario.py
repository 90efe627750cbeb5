"""Before and after on one axis, each with its band."""

from __future__ import annotations

from engine.reviews.scenario import Comparison, Outcome, apart
from reviewapp.drawings.month import ticks
from reviewapp.drawings.svg import Colours, circle, drawing, line, path, rectangle, text

WIDTH = 620.0


def outcome_svg(outcome: Outcome, colours: Colours) -> str:
    """One share of the dose: as it was, as it would be, bands to scale."""
    height = 104.0
    left, right = 74.0, WIDTH - 84.0
    top = max(outcome.before_high, outcome.after_high, 1e-6) * 1.04

    def to_x(value: float) -> float:
        return left + (right - left) * value / top

    parts = []
    for value in ticks(0.0, top, 5):
        words = f"{100 * value:.3g} %"
        parts += [
            line(to_x(value), 8, to_x(value), height - 22, colours["lost"], 0.6),
            text(to_x(value), height - 6, words, colours["faint"], 10.5, "middle"),
        ]
    before, after = apart(outcome.before, outcome.after)
    rows = (
        ("as it was", before, outcome.before, outcome.before_low, outcome.before_high),
        ("would be", after, outcome.after, outcome.after_low, outcome.after_high),
    )
    for i, (name, words, value, low, high) in enumerate(rows):
        y = 26.0 + 34 * i
        colour = colours["ink"] if i == 0 else colours["aerosol"]
        fill = colours["panel"] if i == 0 else colour
        parts += [
            text(0, y + 4, name, colours["ink"], 12),
            rectangle(
                to_x(low), y - 6, to_x(high) - to_x(low), 12, colour, opacity=0.22
            ),
            circle(to_x(value), y, 5, fill, colour),
            text(right + 10, y + 4, words, colours["ink"], 13, weight=650),
        ]
    if outcome.changed_count:
        start, end = (to_x(outcome.before), 32.0), (to_x(outcome.after), 54.0)
        parts.append(path([start, end], colours["faint"], 1.2, dash="2 3"))
    return drawing(WIDTH, height, outcome.says, parts)


def filters_svg(comparison: Comparison, colours: Colours) -> str:
    """Filters it takes: sure part filled, what unrecorded filters add outlined."""
    counts = comparison.filters
    height = 84.0
    left, right = 74.0, WIDTH - 150.0
    top = max(counts["before_at_most"], counts["after_at_most"], 1)

    def long(value: float) -> float:
        return (right - left) * value / top

    parts = []
    for i, (name, key) in enumerate((("as it was", "before"), ("would be", "after"))):
        y = 12.0 + 32 * i
        colour = colours["ink"] if i == 0 else colours["aerosol"]
        least, most = counts[key], counts[f"{key}_at_most"]
        words = f"{least:,}" if least == most else f"{least:,} to {most:,}"
        parts += [
            text(0, y + 12, name, colours["ink"], 12),
            rectangle(left, y, long(most), 16, "none", colour),
            rectangle(left, y, long(least), 16, colour, opacity=0.75),
            text(right + 10, y + 12, words, colours["ink"], 13, weight=650),
        ]
    return drawing(WIDTH, height, comparison.filters_sentence, parts)
