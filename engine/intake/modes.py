"""What a charted mode means in our few words, where it means one thing only.

The terms were seen in the mode tables of two open intensive-care data projects
(github.com/clif-consortium/CLIF, github.com/MIT-LCP/mimic-code), a few are from memory;
``mode_terms.csv`` marks each. A term that sites use for different modes, and one that
is no ventilation mode, gives no word: the mode stays unknown and the text is kept.
"""

from __future__ import annotations

import csv
from collections.abc import Mapping
from functools import cache
from importlib import resources


@cache
def mode_terms() -> tuple[dict[str, str], ...]:
    """Every known term: term, mode, status (clear, ambiguous, not_a_mode), note."""
    text = (
        resources.files("engine.intake").joinpath("mode_terms.csv").read_text("utf-8")
    )
    return tuple(csv.DictReader(text.splitlines()))


def clear_modes(of_the_site: Mapping[str, str]) -> dict[str, str]:
    """Mode word by term, lower case with single blanks; the site's own terms win."""
    known = {row["term"]: row["mode"] for row in mode_terms() if row["mode"]}
    return known | {plain_term(term): word for term, word in of_the_site.items()}


def plain_term(term: str) -> str:
    """A term as it is looked up: case and spacing do not count."""
    return " ".join(term.lower().split())
