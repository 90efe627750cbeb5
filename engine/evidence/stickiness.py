"""Which drugs have been reported to load filters, and how firmly.

Context beside a filter, never a grade: most of it is single cases or advice.
"""

from __future__ import annotations

from dataclasses import dataclass

from engine.evidence.shape import Source
from engine.evidence.sources import (
    ANESTHESIOLOGY_2017,
    CHAN_2025,
    ESCMID_2017,
    FDA_2009,
    JIANG_2022,
    RIBAVIRIN_LABEL,
    WILLIAMS_2010,
)


@dataclass(frozen=True, kw_only=True)
class Stickiness:
    """What is on record of one drug; ``names`` are words looked for in its name."""

    names: tuple[str, ...]
    reported: str
    firmness: str
    source: Source


STICKINESS: tuple[Stickiness, ...] = (
    Stickiness(
        names=("zanamivir",),
        reported="a ventilator blocked by the dissolved powder with lactose, fatal",
        firmness="firm: that form is not for nebulisation",
        source=FDA_2009,
    ),
    Stickiness(
        names=("ribavirin",),
        reported="precipitate blocks valves and filters; the label warns of it",
        firmness="firm",
        source=RIBAVIRIN_LABEL,
    ),
    Stickiness(
        names=("epoprostenol", "prostacyclin"),
        reported="a filter clogged by the viscous diluent; changed every few hours by"
        " custom",
        firmness="good: a case and common custom",
        source=ANESTHESIOLOGY_2017,
    ),
    Stickiness(
        names=("tranexamic",),
        reported="a filter with crystals and slow exhalation after a night",
        firmness="one case",
        source=CHAN_2025,
    ),
    Stickiness(
        names=("interferon", "amphotericin"),
        reported="resistance of the median filter raised a little after two treatments",
        firmness="one study",
        source=JIANG_2022,
    ),
    Stickiness(
        names=("albuterol", "salbutamol", "ipratropium"),
        reported="an HME blocked within a day of continuous treatment",
        firmness="one case, of an HME",
        source=WILLIAMS_2010,
    ),
    Stickiness(
        names=("colistin", "amikacin", "tobramycin", "ceftazidime", "gentamicin"),
        reported="a new filter for each treatment is advised",
        firmness="advice",
        source=ESCMID_2017,
    ),
)


def stickiness_of(drug: str | None) -> Stickiness | None:
    """What is on record of this drug; None where nothing was found."""
    if not drug:
        return None
    text = drug.lower()
    for entry in STICKINESS:
        if any(name in text for name in entry.names):
            return entry
    return None
