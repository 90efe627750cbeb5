"""Small pieces of inline SVG: marks, axes and text, everything escaped.

Marks carry meaning by shape first: a hollow circle is in order, a filled square is to
be looked at, a hatched square with "?" is what the record does not say.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from html import escape

Colours = Mapping[str, str]  # paper, panel, ink, faint, aerosol, fired, unknown, lost

LIGHT: Colours = {
    "paper": "#FAF8F3",
    "panel": "#FFFFFF",
    "ink": "#1C2430",
    "faint": "#6A7280",
    "aerosol": "#2F6F73",
    "fired": "#A9471F",
    "unknown": "#6B6478",
    "lost": "#B9B3A5",
}
DARK: Colours = {
    "paper": "#12161C",
    "panel": "#1A2029",
    "ink": "#E9E6DE",
    "faint": "#9AA3AF",
    "aerosol": "#63B3AE",
    "fired": "#E08A5B",
    "unknown": "#B3A9C4",
    "lost": "#6E6A60",
}
FONT = "system-ui, -apple-system, 'Segoe UI', sans-serif"


def drawing(width: float, height: float, title: str, parts: Iterable[str]) -> str:
    """A whole drawing, its words for a screen reader in ``title``."""
    return (
        f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {width:g} {height:g}"'
        f' width="100%" role="img" aria-label="{escape(title, quote=True)}"'
        f' font-family="{escape(FONT, quote=True)}">{"".join(parts)}</svg>'
    )


def text(
    x: float,
    y: float,
    words: object,
    fill: str,
    size: float = 12,
    anchor: str = "start",
    weight: int = 400,
    halo: str = "",
) -> str:
    """Words at a place; ``anchor`` start, middle or end, ``halo`` the colour around
    them where they lie on something drawn."""
    around = (
        f' paint-order="stroke" stroke="{halo}" stroke-width="4"'
        ' stroke-linejoin="round"'
        if halo
        else ""
    )
    return (
        f'<text x="{x:.1f}" y="{y:.1f}" fill="{fill}" font-size="{size:g}"'
        f' text-anchor="{anchor}" font-weight="{weight}"{around}'
        f' style="font-variant-numeric:tabular-nums">{escape(str(words))}</text>'
    )


def line(
    x1: float,
    y1: float,
    x2: float,
    y2: float,
    stroke: str,
    width: float = 1,
    dash: str = "",
    opacity: float = 1,
) -> str:
    """A straight line."""
    dashed = f' stroke-dasharray="{dash}"' if dash else ""
    return (
        f'<line x1="{x1:.1f}" y1="{y1:.1f}" x2="{x2:.1f}" y2="{y2:.1f}"'
        f' stroke="{stroke}" stroke-width="{width:g}" opacity="{opacity:g}"{dashed}/>'
    )


def rectangle(
    x: float,
    y: float,
    width: float,
    height: float,
    fill: str,
    stroke: str = "none",
    opacity: float = 1,
    words: str = "",
) -> str:
    """A rectangle, with words on hover where given."""
    return (
        f'<rect x="{x:.1f}" y="{y:.1f}" width="{max(width, 0):.1f}"'
        f' height="{max(height, 0):.1f}" fill="{fill}" stroke="{stroke}"'
        f' opacity="{opacity:g}">{_hover(words)}</rect>'
    )


def circle(
    x: float, y: float, r: float, fill: str, stroke: str = "none", words: str = ""
) -> str:
    """A dot, hollow where ``fill`` is none."""
    return (
        f'<circle cx="{x:.1f}" cy="{y:.1f}" r="{r:g}" fill="{fill}"'
        f' stroke="{stroke}" stroke-width="1.4">{_hover(words)}</circle>'
    )


def path(
    points: Sequence[tuple[float, float]],
    stroke: str,
    width: float = 1.5,
    fill: str = "none",
    dash: str = "",
    opacity: float = 1,
) -> str:
    """A run of straight pieces; closed where it is filled."""
    if not points:
        return ""
    body = "L".join(f"{x:.1f} {y:.1f}" for x, y in points)
    close = "Z" if fill != "none" else ""
    dashed = f' stroke-dasharray="{dash}"' if dash else ""
    return (
        f'<path d="M{body}{close}" stroke="{stroke}" stroke-width="{width:g}"'
        f' fill="{fill}" opacity="{opacity:g}"{dashed}/>'
    )


def in_order(
    x: float, y: float, colours: Colours, words: str = "", r: float = 4
) -> str:
    """A hollow circle."""
    return circle(x, y, r, "none", colours["aerosol"], words)


def to_look_at(
    x: float, y: float, colours: Colours, words: str = "", r: float = 4
) -> str:
    """A filled square."""
    return rectangle(
        x - r, y - r, 2 * r, 2 * r, colours["fired"], colours["fired"], words=words
    )


def not_said(
    x: float, y: float, colours: Colours, name: str, words: str = "", r: float = 4.5
) -> str:
    """A hatched square with a question mark; ``name`` is that of the hatching."""
    box = rectangle(
        x - r, y - r, 2 * r, 2 * r, f"url(#{name})", colours["unknown"], words=words
    )
    return box + text(x, y + 3.2, "?", colours["unknown"], 9, "middle", 700)


def hatching(name: str, colours: Colours, gap: float = 4) -> str:
    """The pattern for what nobody knows, to be drawn once in each drawing."""
    return (
        f'<defs><pattern id="{name}" width="{gap:g}" height="{gap:g}"'
        ' patternUnits="userSpaceOnUse" patternTransform="rotate(45)">'
        f'<line x1="0" y1="0" x2="0" y2="{gap:g}" stroke="{colours["unknown"]}"'
        ' stroke-width="1" opacity="0.55"/></pattern></defs>'
    )


def fading(name: str, colour: str) -> str:
    """A gradient that fades out to the right."""
    return (
        f'<defs><linearGradient id="{name}" x1="0" x2="1" y1="0" y2="0">'
        f'<stop offset="0" stop-color="{colour}" stop-opacity="0.45"/>'
        f'<stop offset="1" stop-color="{colour}" stop-opacity="0.03"/>'
        "</linearGradient></defs>"
    )


def _hover(words: str) -> str:
    return f"<title>{escape(words)}</title>" if words else ""
