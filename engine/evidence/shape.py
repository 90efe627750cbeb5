"""How a figure and the work it came from are written down."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Known = Literal[
    "read",  # seen in the cited source, often only its abstract
    "from memory",  # not seen again when written down
    "common practice",  # a fact of the trade, no source
    "fitted",  # fitted once to the calibration studies, see calibration.py
    "ours",  # a choice made for this project
]


@dataclass(frozen=True, kw_only=True)
class Source:
    """One published work, standard or body of practice."""

    key: str
    authors: str
    year: int | None
    title: str
    journal: str = ""
    address: str = ""
    known: Known = "read"


@dataclass(frozen=True, kw_only=True)
class Number:
    """One figure with its unit, range and origin; it stands nowhere else.

    The constant that holds it ends in its unit. ``value`` is a tuple for the
    coefficients of one equation (unit ``coef``).
    """

    value: float | tuple[float, ...]
    unit: str
    source: Source
    where: str
    known: Known
    low: float | None = None
    high: float | None = None
    holds_for: str = ""
    note: str = ""

    def __float__(self) -> float:
        if isinstance(self.value, tuple):
            raise TypeError("a set of coefficients is not one number")
        return float(self.value)

    def __int__(self) -> int:
        return int(float(self))
