"""Units as people write them, each brought to its UCUM symbol.

A figure is converted only where its unit is written beside it, or where the map says
in which unit the column's bare figures are. Nothing is inferred from how large it is.
"""

from __future__ import annotations

from engine.columns import Column
from engine.units import CONVERSIONS, converted

_SPELLINGS: dict[str, str] = {
    "L": "l, liter, liters, litre, litres",
    "mL": "ml, cc, milliliter, milliliters, millilitre, millilitres",
    "uL": "ul, µl, μl",
    "L/min": "l/min, lpm, l per min, liters/min, litres/min",
    "L/s": "l/s, lps, l/sec",
    "mL/s": "ml/s",
    "mg": "mg, milligram, milligrams",
    "ug": "ug, mcg, µg, μg, microgram, micrograms",
    "g": "g, gram, grams",
    "s": "s, sec, secs, second, seconds",
    "ms": "ms, msec",
    "min": "min, mins, minute, minutes",
    "cm": "cm",
    "mm": "mm",
    "[in_i]": 'in, inch, inches, "',
    "um": "um, µm, μm, micron, microns",
    "cm[H2O]": "cmh2o, cm h2o, cm[h2o]",
    "mbar": "mbar",
    "hPa": "hpa",
    "kPa": "kpa",
    "mm[Hg]": "mmhg, mm hg, mm[hg]",
    "/min": "/min, bpm, breaths/min, breaths per min",
    "cm[H2O].s/L": "cmh2o/l/s, cmh2o/(l/s), cmh2o·s/l, cmh2o.s/l, cm[h2o].s/l",
    "mbar.s/L": "mbar/l/s, mbar/(l/s), mbar·s/l, mbar.s/l, hpa/l/s, hpa/(l/s), hpa.s/l",
    "m3": "m3, m³",
    "/h": "/h, ach, per hour",
}

SYMBOLS: dict[str, str] = {
    spelling: symbol
    for symbol, spellings in _SPELLINGS.items()
    for spelling in spellings.split(", ")
}


def factors(column: Column) -> dict[str, float]:
    """What to multiply by, for each spelling of a unit this column can be given in."""
    can = {column.unit} | {unit for unit, to in CONVERSIONS if to == column.unit}
    return {
        spelling: converted(1.0, symbol, column.unit)
        for spelling, symbol in SYMBOLS.items()
        if symbol in can and column.unit not in {"", "1"}
    }
