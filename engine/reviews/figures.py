"""Figures in words: percentages, ranges, months; shared by month, topics, scenario."""

from __future__ import annotations

import math
from calendar import month_name

from engine.errors import NothingToReview

NO_FIGURE = "–"
PER_CENT = "\N{NO-BREAK SPACE}%"  # a figure and its sign stay on one line


def percent(share: float, places: int | None = None) -> str:
    """``71 %``; small shares keep one place, so that 0.4 % is not 0 %."""
    value = 100 * share
    if places is None:
        places = 1 if 0 < abs(value) < 9.95 and abs(value - round(value)) > 0.05 else 0
    if round(abs(value), places) == 0 and value != 0 and places:
        return f"under {10**-places:g}{PER_CENT}"
    return f"{value:.{places}f}{PER_CENT}"


def percent_range(low: float, high: float) -> str:
    """``66 to 76 %``; as many places as tell the two ends apart."""
    return f"{_plain(100 * low)} to {_plain(100 * high)}{PER_CENT}"


def points(low: float, high: float | None = None) -> str:
    """A difference of two shares in percentage points."""
    if high is None:
        size = _plain(abs(100 * low))
        return f"{size} point" if size == "1" else f"{size} points"
    return f"{_signed(100 * low)} to {_signed(100 * high)} points"


def significant(value: float, digits: int = 2) -> str:
    """A figure to so many significant digits, without exponents."""
    if not math.isfinite(value):
        return NO_FIGURE
    if value == 0:
        return "0"
    places = max(digits - 1 - math.floor(math.log10(abs(value))), 0)
    return (
        f"{round(value, digits - 1 - math.floor(math.log10(abs(value)))):,.{places}f}"
    )


def signed(value: float) -> str:
    """A difference with its sign, to two significant digits."""
    if value == 0:
        return "0"
    return f"{'−' if value < 0 else '+'}{significant(abs(value))}"


def inside(title: str) -> str:
    """A title inside a sentence; what begins in capitals stays so."""
    return title if title[:2].isupper() else f"{title[0].lower()}{title[1:]}"


def month_words(month: str) -> str:
    """``2026-10`` as ``October 2026``.

    Raises   NothingToReview if it is no month.
    """
    try:
        year, number = month.split("-")
        if len(year) != 4 or len(number) != 2 or not 1 <= int(number) <= 12:
            raise ValueError
        return f"{month_name[int(number)]} {int(year)}"
    except ValueError:
        raise NothingToReview(
            f"{month!r} is not a month; give one as 2026-10"
        ) from None


def month_after(month: str, by: int = 1) -> str:
    """The month so many after it, before it where negative."""
    year, number = map(int, month.split("-"))
    place = year * 12 + number - 1 + by
    return f"{place // 12:04d}-{place % 12 + 1:02d}"


def months_between(first: str, last: str) -> list[str]:
    """Every month from the first to the last, so that a gap shows."""
    months = [first]
    while months[-1] < last:
        months.append(month_after(months[-1]))
    return months


def _plain(value: float) -> str:
    return f"{value:.1f}" if abs(value) < 0.95 and abs(value) > 0.05 else f"{value:.0f}"


def _signed(value: float) -> str:
    text = _plain(abs(value))
    if text == "0":
        return "0"
    return f"{'−' if value < 0 else '+'}{text}"
