"""Tables as they leave the engine: columns under their names, text made harmless."""

from __future__ import annotations

from typing import Any

import pandas as pd

from engine.rules.wording import label_of

_FORMULA = ("=", "+", "-", "@", "\t", "\r", "\0")


# Columns a review adds, which the dictionary of the log does not hold.
_ADDED = {
    "hours_h": "Hours in use",
    "resistance_cmh2o_per_lps": "At the reference flow, cmH2O/(L/s)",
    "doubt": "Why not used",
    "captured_ml": "Caught, mL",
    "treatments": "Treatments",
    "treatments_count": "Treatments",
    "present_count": "Filter present",
    "absent_count": "No filter",
    "unknown_count": "Filter unknown",
    "not_estimated_count": "Without an estimate",
    "patients_count": "Patients",
    "sensor_ml": "To the sensor, mL",
    "sensor_low_ml": "Low, mL",
    "sensor_high_ml": "High, mL",
    "slope_per_h": "Slope, cmH2O/(L/s) per h",
    "time_to_limit_h": "To the limit, h",
    "patients": "Patients",
    "text": "What",
    "strength": "Strength",
    "owner_role": "Owner (role)",
    "measure": "Measured by",
    "due": "Due",
    "actor": "By",
    "role": "Role",
    "at": "At (UTC)",
    "about": "About",
}


def labelled(table: pd.DataFrame) -> pd.DataFrame:
    """The same table with its columns called what the dictionary calls them."""
    return table.rename(
        columns={name: _ADDED.get(name) or _label(str(name)) for name in table.columns}
    )


def _label(name: str) -> str:
    """The dictionary's label, else the name in plain words."""
    label = label_of(name)
    return label if label != name else f"{name[:1].upper()}{name[1:]}".replace("_", " ")


def csv_of(table: pd.DataFrame) -> bytes:
    """A table as CSV; text that a spreadsheet would run as a formula is made text."""
    safe = table.copy()
    for name in safe.columns:
        if not pd.api.types.is_numeric_dtype(safe[name]):
            safe[name] = [harmless(value) for value in safe[name]]
    return safe.to_csv(index=False, lineterminator="\r\n").encode("utf-8-sig")


def harmless(value: Any) -> Any:
    if isinstance(value, str) and value.startswith(_FORMULA):
        return f"'{value}"
    return value
