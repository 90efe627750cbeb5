"""A review as it may leave the department: no date, device, patient or small cell.

A group with fewer than ``cells.shared_smallest_count`` treatments or patients is
hidden, and with it the next smallest where it could be worked out from a total. Months
become "month 1", units "unit 1", in the order of the log. What cannot be told without
naming a device or a day (single filters, incidents, signatures, free text) has no
shared form. This is no legal finding that a document is de-identified.
"""

from __future__ import annotations

import re
from calendar import month_name
from collections.abc import Mapping
from dataclasses import dataclass, replace
from html import escape, unescape

import numpy as np
import pandas as pd

from engine.errors import NothingToReview
from engine.replay import Replay
from engine.reviews.figures import month_words
from engine.reviews.month import Month
from engine.reviews.month_lines import Line
from engine.reviews.month_units import Units
from engine.reviews.scenario import Comparison
from engine.reviews.topics import Sheet, Topics
from engine.stats.cells import hidden_cells

LEFT_OUT = (
    "Months and units are numbered in the order of the log; the calendar is left out.",
    "Filters, ventilators, signatures, decisions and free text are left out.",
    "Counts below {n} treatments or patients are hidden, and so is what would give them"
    " away.",
    "A copy for sharing inside quality work. It is no legal finding that the document"
    " is de-identified: ask whoever decides on that before it leaves the house.",
)
_TOKENS = (
    ("asked", "ventilator_token"),
    ("asked", "patient_token"),
    ("asked", "bed_token"),
    ("asked", "treatment_id"),
    ("filter_use", "filter_id"),
    ("incident", "incident_id"),
)
_TELLING_LENGTH = 3  # shorter names, and bare numbers, are words of any sentence


@dataclass(frozen=True)
class Neutral:
    """What telling words of a log are called in a shared copy, and what may not stay.

    ``words``      telling words and what stands for them, the longest first
    ``forbidden``  names that must not be left anywhere
    """

    words: tuple[tuple[str, str], ...]
    forbidden: frozenset[str]

    def text(self, told: str) -> str:
        """The same words with months and units numbered."""
        for old, new in self.words:
            alone = rf"(?<![\w-]){re.escape(old)}(?![\w-])"
            told = re.sub(alone if old[0].isalnum() else re.escape(old), new, told)
        return told

    def still_named(self, told: str) -> list[str]:
        """Names and dates that are left; an empty list is what a copy needs."""
        told = unescape(told)
        words = {word.strip("./-") for word in re.findall(r"[\w./-]+", told)}
        found = words & self.forbidden
        # A name of several words, or with signs in it, is no single word of a text.
        found |= {n for n in self.forbidden if _SIGNS.search(n) and n in told}
        return sorted(found | set(_DATES.findall(told)))


_SIGNS = re.compile(r"[^\w./-]")
_NAMES = "|".join(month_name[1:])
_DATES = re.compile(
    rf"\b(?:(?:\d{{1,2}} )?(?:{_NAMES}) \d{{4}}|\d{{4}}-\d{{2}}(?:-\d{{2}})?)\b"
)


def neutral_of(replay: Replay) -> Neutral:
    """What to call the months and units of a log, and what may not be left."""
    months = replay.frame(
        "SELECT DISTINCT local_month FROM asked WHERE local_month IS NOT NULL"
        " ORDER BY 1"
    )["local_month"].astype(str)
    units = replay.frame(
        "SELECT unit_token FROM asked WHERE unit_token IS NOT NULL GROUP BY 1"
        " ORDER BY min(started_at), 1"
    )["unit_token"].astype(str)
    words: dict[str, str] = {}
    for number, month in enumerate(months, 1):
        whole = month_words(month)
        name, year = whole.split()
        words |= {whole: f"month {number}", month: f"month {number}"}
        words |= {f"{name[:3]} {year[-2:]}": str(number)}
        words |= {f"since {name}": f"since month {number}"}
        words |= {f">{name[:3]}<": f">{number}<"}
    for number, unit in enumerate(units, 1):
        words |= {unit: f"unit {number}", escape(unit): f"unit {number}"}
    listed = sorted(words.items(), key=lambda item: -len(item[0]))
    return Neutral(tuple(listed), frozenset(_forbidden(replay)) | set(units))


def _forbidden(replay: Replay) -> set[str]:
    found: set[str] = set()
    for table, column in _TOKENS:
        names = replay.frame(f"SELECT DISTINCT {column} AS n FROM {table}")["n"]
        found |= {str(name) for name in names.dropna()}
    return {n for n in found if len(n) >= _TELLING_LENGTH and not n.isdigit()}


def shared_month(
    month: Month, units: Mapping[str, Units], smallest: int
) -> tuple[Month, dict[str, Units]]:
    """The month with small cells hidden and without what names a device or a person."""
    lines = tuple(_line(each, smallest) for each in month.lines)
    forgone = month.forgone
    if not forgone.empty:
        forgone = forgone[forgone["treatments"] >= smallest]
    empty = {
        name: getattr(month, name).iloc[0:0]
        for name in ("filters", "sensors", "decisions", "open_decisions", "sign_offs")
    }
    flags = month.confirmations.rules
    n = flags["flags"].to_numpy(float)
    small = flags["flags"].between(1, smallest - 1).to_numpy(bool)
    told = flags[~hidden_cells(n[None, :], small[None, :])[0]]
    confirmations = replace(month.confirmations, rules=told)
    shared = replace(
        month, lines=lines, forgone=forgone, confirmations=confirmations, **empty
    )
    kept = {each.indicator.id for each in lines if each.known}
    return shared, {
        key: _units(found, smallest) for key, found in units.items() if key in kept
    }


def _line(line: Line, smallest: int) -> Line:
    """The line, or nothing known where the month itself is small."""
    months = line.months.copy()
    small = _small(months["count"], months["known"], months["patients"], smallest)
    figures = [n for n in ("value", "low", "high", "count", "known") if n in months]
    months[figures] = months[figures].astype(float)
    months.loc[small, figures] = np.nan
    count, known, patients = (
        pd.Series([float(v)]) for v in (line.count, line.known, line.patients)
    )
    if not _small(count, known, patients, smallest).iloc[0]:
        return replace(line, months=months)
    return replace(
        line,
        months=months.iloc[0:0],
        value=None,
        count=0,
        known=0,
        unknown=0,
        patients=0,
        look=False,
        says=f"Hidden: fewer than {smallest} treatments or patients.",
        changed="Hidden in a shared copy.",
        change=None,
        change_shown=False,
        notes=(),
    )


def _small(
    count: pd.Series, known: pd.Series, patients: pd.Series, smallest: int
) -> pd.Series:
    """True where the flagged, the rest, or the patients behind them are few."""
    few = known.between(1, smallest - 1) | patients.between(1, smallest - 1)
    rest = known - count
    return few | count.between(0.5, smallest - 0.5) | rest.between(0.5, smallest - 0.5)


def _units(units: Units, smallest: int) -> Units:
    table = units.table.copy()
    small = _small(table["count"], table["known"], table["patients"], smallest)
    n = table["known"].fillna(0).to_numpy(float)
    hide = hidden_cells(n[None, :], (small | table["hidden"]).to_numpy()[None, :])[0]
    blank = [
        name
        for name in table.columns
        if name not in {"unit_token", "hidden", "outside", "design_effect"}
    ]
    table[blank] = table[blank].astype(float)
    table.loc[hide, blank] = np.nan
    table["hidden"] = hide
    if not hide.any():
        return replace(units, table=table)
    return replace(units, table=table, sentence="Some units are hidden: too few.")


def shared_topics(review: Topics, smallest: int) -> Topics:
    """The topics with small cells hidden, and examples only where many are alike."""
    sheets = tuple(_sheet(each, smallest) for each in review.sheets)
    return replace(review, sheets=sheets, sessions=())


def _sheet(sheet: Sheet, smallest: int) -> Sheet:
    places = sheet.places.copy()
    grid = places.pivot(index="unit_token", columns="shift", values="asked").fillna(0)
    small = _small(places["flagged"], places["asked"], places["patients"], smallest)
    marked = places.assign(small=small | places["hidden"])
    asked = marked.pivot(index="unit_token", columns="shift", values="small")
    hide = pd.DataFrame(
        hidden_cells(grid.to_numpy(float), asked.fillna(False).to_numpy(bool)),
        index=grid.index,
        columns=grid.columns,
    )
    hidden = np.array(
        [
            hide.loc[u, s]
            for u, s in zip(places["unit_token"], places["shift"], strict=True)
        ],
        dtype=bool,
    )
    counts = ["flagged", "unknown", "asked", "patients", "share_frac"]
    places[counts] = places[counts].astype(float)
    places.loc[hidden, counts] = np.nan
    rules = sheet.rules[
        ~_small(
            sheet.rules["flags"],
            sheet.rules["treatments"],
            sheet.rules["patients"],
            smallest,
        )
    ]
    where = sheet.where if not hidden.any() else "Cells with few treatments are hidden."
    return replace(
        sheet,
        seen="",
        where=where,
        places=places.assign(hidden=hidden),
        rules=rules,
        examples=tuple(e for e in sheet.examples if e.alike_count >= smallest),
    )


def shared_scenario(comparison: Comparison, smallest: int) -> Comparison:
    """The comparison, if enough treatments stand behind it.

    Raises   NothingToReview if fewer than ``smallest`` could be compared.
    """
    if comparison.compared < smallest:
        raise NothingToReview(
            f"{comparison.compared} treatments were compared; a shared copy needs"
            f" {smallest}"
        )
    by_class = comparison.by_class
    rules = comparison.rules
    if "treatments" in by_class:
        by_class = by_class[by_class["treatments"] >= smallest]
    few = (
        rules[["before", "after"]]
        .apply(lambda column: column.between(1, smallest - 1))
        .any(axis=1)
    )
    return replace(comparison, by_class=by_class, rules=rules[~few])
