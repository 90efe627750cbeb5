"""The month's lines as HTML, the same on screen and on paper.

Each line is a ``details`` element: closed it is one row, opened it shows its months,
its units and the way to its treatments. Nothing here computes.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from html import escape
from urllib.parse import urlencode

from engine.reviews.month import Month
from engine.reviews.month_lines import Line
from engine.reviews.month_units import Units
from engine.stats.cusum import ShareCusum
from reviewapp.drawings.month import interval_bar_svg, run_chart_svg, spark_svg
from reviewapp.drawings.svg import Colours
from reviewapp.drawings.units import funnel_svg, units_svg

UnitsOf = Mapping[str, Units]
Marks = Sequence[tuple[str, str]]
COLUMNS = (
    "minmax(128px,1.5fr) 78px minmax(88px,1fr) 70px minmax(68px,.75fr)"
    " minmax(112px,1.4fr)"
)


_PAPER = (
    ".m-table{font-size:8.4pt}.m-table summary{list-style:none;padding:2px 0;"
    "margin-left:0}.m-head{padding:2px 0;font-size:7.6pt}.m-row{gap:8px}"
    ".m-open{padding:4px 0 10px 0}.m-row small,.m-open small{font-size:7.4pt}"
    ".m-group{padding:8px 0 3px;break-after:avoid}.m-head{break-after:avoid}"
    ".m-change{font-size:7.8pt}"
)


def style(colours: Colours, paper: bool = False) -> str:
    """Rules of this table; class names begin with ``m-``. Closer on paper."""
    return (
        "<style>"
        ".m-table{border-top:1px solid var(--m-line)}"
        f".m-table{{--m-line:{colours['lost']};--m-faint:{colours['faint']}}}"
        f".m-head,.m-row{{display:grid;grid-template-columns:{COLUMNS};gap:12px;"
        "align-items:center}"
        ".m-head{font-size:.78rem;color:var(--m-faint);padding:4px 22px 4px 22px}"
        ".m-table details{border-top:1px solid var(--m-line)}"
        ".m-table summary{cursor:pointer;padding:5px 4px;list-style-position:outside;"
        "margin-left:18px}"
        ".m-row{line-height:1.3}.m-row b{font-weight:600}"
        ".m-row .m-n{text-align:right;font-variant-numeric:tabular-nums}"
        ".m-row small,.m-open small{color:var(--m-faint);font-size:.8rem}"
        ".m-figure{text-align:right;font-weight:650;font-variant-numeric:tabular-nums}"
        ".m-figure small{font-weight:400}"
        ".m-group{font-size:.86rem;font-weight:650;padding:16px 4px 5px}"
        ".m-change{font-size:.86rem;line-height:1.3}"
        ".m-open{padding:6px 22px 18px 40px}"
        ".m-two{display:flex;flex-wrap:wrap;gap:24px;margin-top:10px}"
        ".m-two>div{flex:1 1 380px;max-width:540px}"
        "@media(max-width:620px){.m-head{display:none}"
        ".m-row{grid-template-columns:1fr 92px 170px}"
        ".m-row .m-change,.m-row .m-spark,.m-row .m-n{grid-column:auto}}"
        "@media print{.m-table details{break-inside:avoid}"
        ".m-table summary{list-style:none}}" + (_PAPER if paper else "") + "</style>"
    )


def lines_html(
    month: Month,
    colours: Colours,
    units: UnitsOf,
    opened: str | None = None,
    marks: Marks = (),
    link: Callable[..., str] | None = None,
    only: Sequence[str] | None = None,
) -> str:
    """The table of indicators; ``opened`` is the id of the line that stands open."""

    def rows_of(lines: Sequence[Line]) -> str:
        return "".join(
            _details(each, month, colours, units, opened, marks, link) for each in lines
        )

    shown = [each for each in month.lines if only is None or each.indicator.id in only]
    groups = (
        ("To be looked at", [each for each in shown if each.look]),
        ("In order, or without a start to hold it against", _quiet(shown)),
        ("Nothing known this month", [each for each in shown if not each.known]),
    )
    if only is not None:
        return f'<div class="m-table">{rows_of(shown)}</div>'
    rows = "".join(
        f'<div class="m-group">{escape(title)} ({len(lines)})</div>' + rows_of(lines)
        for title, lines in groups
        if lines
    )
    heads = (
        "Indicator",
        '<span style="display:block;text-align:right">Figure</span>',
        "Of all treatments; hatched: unknown",
        '<span style="display:block;text-align:right">Known, patients</span>',
        "Months",
        "Since the month before",
    )
    head = "".join(f"<span>{cell}</span>" for cell in heads)
    return f'<div class="m-table"><div class="m-head">{head}</div>{rows}</div>'


def _quiet(lines: Sequence[Line]) -> list[Line]:
    return [each for each in lines if each.known and not each.look]


def _details(
    each: Line,
    month: Month,
    colours: Colours,
    units: UnitsOf,
    opened: str | None,
    marks: Marks,
    link: Callable[..., str] | None,
) -> str:
    own = units.get(each.indicator.id)
    state = " open" if opened == each.indicator.id else ""
    return (
        f'<details id="{escape(each.indicator.id)}"{state}>'
        f"<summary>{_row(each, colours)}</summary>"
        f"{_opened(each, month, colours, own, marks, link)}</details>"
    )


def _row(each: Line, colours: Colours) -> str:
    mark = _mark(each, colours)
    patients = f"<br><small>{each.patients:,} patients</small>" if each.patients else ""
    known = "" if each.known == 0 else f"{each.known:,}"
    return (
        '<span class="m-row" style="display:inline-grid;width:calc(100% - 8px);'
        'vertical-align:middle">'
        f"<span><b>{mark}{escape(each.indicator.title)}</b><br>"
        f"<small>{escape(each.indicator.id)} · {escape(_goal(each))}</small></span>"
        f'<span class="m-figure">{_figure(each)}</span>'
        f"<span>{interval_bar_svg(each, colours)}</span>"
        f'<span class="m-n">{known}{patients}</span>'
        f'<span class="m-spark">{spark_svg(each, colours)}</span>'
        f'<span class="m-change">{escape(each.changed)}</span></span>'
    )


def _figure(each: Line) -> str:
    words, _, unit = each.figure.partition(" ")
    if each.indicator.unit == "%" or each.value is None:
        return escape(each.figure)
    return f"{escape(words)}<br><small>{escape(unit)}</small>"


def _mark(each: Line, colours: Colours) -> str:
    """A filled square before a line to be looked at; shape first, colour second."""
    if not each.look:
        return ""
    return (
        f'<span style="color:{colours["fired"]}" role="img"'
        ' aria-label="to be looked at: ">■ </span>'
    )


def _goal(each: Line) -> str:
    wanted = {"up": "should rise", "down": "should fall", "none": "no side wanted"}
    words = wanted[each.indicator.wanted]
    start = each.indicator.start_words
    return f"{words}; look {start}" if start else words


def _opened(
    each: Line,
    month: Month,
    colours: Colours,
    units: Units | None,
    marks: Marks,
    link: Callable[..., str] | None,
) -> str:
    parts = [f"<p>{escape(each.says)} {escape(each.changed)}</p>"]
    parts.append(run_chart_svg(each, colours, marks))
    parts.append(_small(_how(each)))
    if units is not None:
        funnel = funnel_svg(units, colours)
        beside = f"<div>{funnel}</div>" if funnel else ""
        parts.append(
            f"<p>{escape(units.sentence)}</p>"
            f'<div class="m-two"><div>{units_svg(units, colours)}</div>{beside}</div>'
        )
        parts.append(_small(units.notes))
    parts.append(_small(each.notes))
    if each.indicator.kind == "rate":
        parts.append(f"<p>{escape(month.rare_sentence)}</p>")
    if link is not None:
        parts.append(_links(each, month, link))
    return f'<div class="m-open">{"".join(parts)}</div>'


def _links(each: Line, month: Month, link: Callable[..., str]) -> str:
    """The way from the figure to its rows."""
    made = []
    for rule in each.indicator.rules:
        for answer, words in (("fires", "flagged"), ("cannot_tell", "cannot tell")):
            href = link(month=month.month, rule=rule, answer=answer, unit=month.unit)
            made.append(
                f'<a href="{escape(href, quote=True)}" target="_self">'
                f"{escape(rule)}: {words}</a>"
            )
    if not made:
        return ""
    return f"<p><small>Its treatments:</small> {' · '.join(made)}</p>"


def _how(each: Line) -> tuple[str, ...]:
    """What was counted, and how the chart is to be read."""
    made = [f"Counted among {each.indicator.of}."]
    if each.indicator.left_out:
        made.append(f"Left out: {each.indicator.left_out}.")
    made.append(each.indicator.basis)
    if each.baseline is not None:
        made.append(each.baseline.words)
    run = each.run
    if run.signal is not None:
        made.append(
            f"Run rules: longest run {run.longest_run} (up to {run.run_limit}),"
            f" crossings {run.crossings} (at least {run.crossings_limit}); with no"
            f" change they signal in some {100 * run.false_alarm_frac:.1f} % of series."
        )
    else:
        made.append(
            f"Run rules need ten months off the centre line; there are"
            f" {run.useful_count}."
        )
    if each.cusum is not None:
        made.append(_cumulative(each.cusum))
    if math.isfinite(each.design_effect) and each.design_effect > 1.05:
        made.append(f"Design effect {each.design_effect:.1f}.")
    return tuple(made)


def _cumulative(cusum: ShareCusum) -> str:
    """What the cumulative sum stands at, and what it is tuned to find."""
    limit = f"above {cusum.limit:.1f}"
    if cusum.limit < 0.05:
        limit = "as soon as it leaves 0, for months this large tell by themselves"
    return (
        f"Cumulative sum {cusum.sums[-1]:.1f}, signals {limit}; tuned to"
        f" {100 * cusum.p0:.0f} % becoming {100 * cusum.p1:.0f} %, at most one signal"
        f" without cause in {cusum.false_alarm_points:.0f} months."
    )


def _small(lines: Sequence[str]) -> str:
    if not lines:
        return ""
    return f"<p><small>{escape(' '.join(lines))}</small></p>"


def address(screen: str, **wanted: str | None) -> str:
    """A link to a screen that opens on what the figure stands for."""
    given = {key: value for key, value in wanted.items() if value}
    return f"/{screen}?{urlencode(given)}" if given else f"/{screen}"
