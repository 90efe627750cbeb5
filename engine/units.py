"""The only conversion factors; the log is brought to these units once, on entry."""

from __future__ import annotations

from collections.abc import Callable

# Exact by definition, or to the last digit given.
S_PER_MIN = 60.0
MIN_PER_H = 60.0
S_PER_H = 3600.0
ML_PER_L = 1000.0
UG_PER_MG = 1000.0
UM_PER_MM = 1000.0
MM_PER_CM = 10.0
CM_PER_IN = 2.54
CMH2O_PER_MBAR = 1.01972
CMH2O_PER_KPA = 10.1972
CMH2O_PER_MMHG = 1.35951
KELVIN_AT_0_C = 273.15

# (unit as written in an export, unit of the engine) -> how to bring it over
CONVERSIONS: dict[tuple[str, str], Callable[[float], float]] = {
    ("L", "mL"): lambda value: value * ML_PER_L,
    ("uL", "mL"): lambda value: value / ML_PER_L,
    ("ug", "mg"): lambda value: value / UG_PER_MG,
    ("g", "mg"): lambda value: value * UG_PER_MG,
    ("L/s", "L/min"): lambda value: value * S_PER_MIN,
    ("mL/s", "L/min"): lambda value: value * S_PER_MIN / ML_PER_L,
    ("[in_i]", "cm"): lambda value: value * CM_PER_IN,
    ("mm", "cm"): lambda value: value / MM_PER_CM,
    ("cm", "mm"): lambda value: value * MM_PER_CM,
    ("mbar", "cm[H2O]"): lambda value: value * CMH2O_PER_MBAR,
    ("hPa", "cm[H2O]"): lambda value: value * CMH2O_PER_MBAR,
    ("kPa", "cm[H2O]"): lambda value: value * CMH2O_PER_KPA,
    ("mm[Hg]", "cm[H2O]"): lambda value: value * CMH2O_PER_MMHG,
    ("ms", "s"): lambda value: value / 1000.0,
    ("min", "s"): lambda value: value * S_PER_MIN,
    ("mbar.s/L", "cm[H2O].s/L"): lambda value: value * CMH2O_PER_MBAR,
}


def converted(value: float, unit: str, to_unit: str) -> float:
    """The value in the engine's unit.

    Raises   ValueError if nobody has said how to convert this pair.
    Source   UCUM; conversion factors exact or from memory of physics.
    """
    if unit == to_unit:
        return value
    if (unit, to_unit) not in CONVERSIONS:
        raise ValueError(f"no conversion from {unit} to {to_unit}")
    return CONVERSIONS[unit, to_unit](value)
