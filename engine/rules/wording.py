"""How one logged value, policy setting or published number reads in a sentence."""

from __future__ import annotations

from typing import Any, TypeGuard

from engine.batch import COLUMNS
from engine.columns import FRACTIONS, labels, shown_unit, words_of
from engine.evidence.shape import Number, Source

NOT_LOGGED = "not logged"

# What the physics adds to a treatment, for the rules that read it.
ESTIMATES: dict[str, str] = {
    "delivered_frac": "Estimated dose past the tube",
    "best_delivered_frac": "Estimated dose from the best site",
    "best_ratio": "Best site over logged site",
    "best_site": "Best site by the estimate",
    "difference_shown": "Estimate shows a difference",
    "assumed": "Assumptions of the estimate",
    **{f"{name}_frac": f"Estimate: {words}" for name, words in FRACTIONS.items()},
    "room_low_frac": "Estimate: reached the room directly, low",
    "room_high_frac": "Estimate: reached the room directly, high",
}

_WORDS: dict[str, dict[str, str]] = {
    "generator": {
        "jet": "jet nebulizer",
        "breath_enhanced_jet": "breath-enhanced jet nebulizer",
        "ultrasonic": "ultrasonic nebulizer",
        "pmdi_spacer": "metered-dose inhaler with chamber",
    },
    "site": {
        "ventilator_outlet": "at the ventilator outlet",
        "humidifier_inlet": "at the humidifier inlet",
        "humidifier_outlet": "at the humidifier outlet",
        "inspiratory_limb": "in the inspiratory limb",
        "wye": "at the Y",
        "airway_side": "between the Y and the airway",
        "expiratory_limb": "in the expiratory limb",
    },
    "synchrony": {
        "continuous": "continuous output",
        "inspiration_synchronised": "output with inspiration",
    },
    "humidification": {"hme": "HME", "hmef": "filter-HME"},
    "mode": {word: word.upper() for word in words_of("mode")[:-2]},
    "filter_trend": {"near_limit": "near its limit", "over_limit": "over its limit"},
}
_WORDS["best_site"] = _WORDS["site"]

_SETTING_UNITS = {
    "_cmh2o_per_lps": "cmH2O/(L/s)",
    "_mg_per_l": "mg/L",
    "_lpm": "L/min",
    "_min": "min",
    "_ml": "mL",
    "_mg": "mg",
    "_cm": "cm",
    "_h": "h",
    "_s": "s",
}


def is_logged(value: Any) -> TypeGuard[Any]:
    """False for None, NaN, and the missing values of a data frame."""
    if value is None or type(value).__name__ in {"NAType", "NaTType"}:
        return False
    return bool(value == value)


def label_of(name: str) -> str:
    """What a column is called on screen; estimates included."""
    return ESTIMATES.get(name) or labels().get(name, name)


def shown(name: str, value: Any) -> str:
    """A column's value with its unit, or that it is not logged."""
    if not is_logged(value):
        return NOT_LOGGED
    if name.endswith("_frac"):
        return percent(value)
    column = COLUMNS.get(name)
    if name == "best_site" or (column is not None and column.kind == "word"):
        return word(name, str(value))
    if name == "difference_shown" or (column is not None and column.kind == "yes_no"):
        return "yes" if int(value) == 1 else "no"
    if column is not None and column.kind in {"id", "token", "text", "time"}:
        return str(value)
    unit = shown_unit(column.unit) if column else ""
    return measured(value, unit)


def word(name: str, value: str) -> str:
    """A word of a column as people say it."""
    return _WORDS.get(name, {}).get(value, value.replace("_", " "))


def measured(value: float, unit: str) -> str:
    """A figure of three digits with its unit; thousands are written out."""
    figure = f"{float(value):.0f}" if abs(value) >= 1000 else f"{float(value):.3g}"
    return f"{figure} {unit}".strip()


def percent(frac: float) -> str:
    """A fraction as a percentage of two digits."""
    return f"{100 * float(frac):.2g} %" if abs(frac) < 0.995 else f"{100 * frac:.0f} %"


def setting(name: str, value: Any) -> str:
    """A policy setting with the unit its name ends in."""
    for ending, unit in _SETTING_UNITS.items():
        if name.endswith(ending):
            return measured(value, unit)
    if name.endswith("_frac"):
        return percent(value)
    return measured(value, "") if isinstance(value, int | float) else str(value)


def published(number: Number) -> str:
    """A number of the evidence: its range where it has one, else its value."""
    unit = _unit_of(number.unit)
    if number.low is None or number.high is None:
        return _figure(float(number), unit)
    return f"{_bare(number.low, unit)} to {_figure(number.high, unit)}"


def cited(source: Source) -> str:
    """A work by its first author and year; without an author, by its title."""
    if source.known in {"common practice", "ours"}:
        return source.title.split(",")[0].lower()
    unnamed = ("not shown", "image report", "label of")
    year = f" {source.year}" if source.year else ""
    if source.authors.startswith(unnamed):
        return f"“{source.title}”{year}"
    first = source.authors.split(",")[0].split(" (")[0]
    named = first.removesuffix(" and others").split()
    while len(named) > 1 and _is_initials(named[-1]):
        named.pop()
    several = "," in source.authors or "others" in source.authors
    return f"{' '.join(named)}{' and others' if several else ''}{year}"


def joined(parts: list[str], last: str = "or") -> str:
    """Words in a row as a sentence holds them."""
    if len(parts) < 2:
        return "".join(parts)
    return f"{', '.join(parts[:-1])} {last} {parts[-1]}"


def _unit_of(unit: str) -> str:
    return _SETTING_UNITS.get(f"_{unit}", "%" if unit == "frac" else "")


def _figure(value: float, unit: str) -> str:
    return percent(value) if unit == "%" else measured(value, unit)


def _bare(value: float, unit: str) -> str:
    return _figure(value, unit).removesuffix(unit).strip()


def _is_initials(part: str) -> bool:
    return part.isupper() and len(part) <= 3
