"""Made departments with one sensor fault of known cause, written as whole logs.

Used by detection.py. Every department has the same untidy background: one treatment
in seven without its filter, one in ten that does not say, routine checks, drains and
circuit changes, one clock off. The cause is laid over it, or leaves nothing at all.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pandas as pd

START = pd.Timestamp("2026-01-05")
DAYS, FAULT_DAY, VENTILATORS = 75, 70.0, 5
FAULTY = "V0"
CAUSES = (
    "aerosol_film",
    "electronics",
    "filter_loading",
    "condensate",
    "external_gas",
    "circuit_change",
    "exhalation_valve",
    "calibration_overdue",
    "none",
)
SETUP = {
    "status": "given",
    "unit_token": "U1",
    "drug": "salbutamol",
    "drug_class": "bronchodilator",
    "nominal_dose_mg": 2.5,
    "fill_volume_ml": 3.0,
    "synchrony": "continuous",
    "circuit": "dual_limb",
    "site": "inspiratory_limb",
    "distance_from_wye_cm": 40.0,
    "airway": "endotracheal",
    "tube_id_mm": 8.0,
    "mode": "vcv",
    "bias_flow_lpm": 2.0,
    "tidal_volume_ml": 480.0,
    "respiratory_rate_bpm": 16.0,
    "inspiratory_time_s": 1.0,
}
Rows = list[dict[str, Any]]


def moment(day: float) -> pd.Timestamp:
    return START + pd.Timedelta(days=float(day))


def made(seed: int) -> tuple[str, dict[str, pd.DataFrame], dict[str, Any]]:
    """The cause, the tables of a log, and what is true of it."""
    rng = np.random.default_rng(seed)
    cause = CAUSES[seed % len(CAUSES)]
    truth: dict[str, Any] = {"drift_day": None}
    tables: dict[str, Rows] = {
        name: []
        for name in (
            "treatment",
            "filter_use",
            "filter_reading",
            "sensor_check",
            "service_event",
            "clock_offset",
        )
    }
    for number in range(VENTILATORS):
        ventilator(f"V{number}", cause if number == 0 else "", rng, tables, truth)
    tables["incident"] = [
        {
            "incident_id": "INC",
            "ventilator_token": FAULTY,
            "happened_at": moment(FAULT_DAY),
            "sensor": "expiratory_flow",
            "harm": "none",
        }
    ]
    return cause, {name: pd.DataFrame(rows) for name, rows in tables.items()}, truth


def ventilator(
    token: str,
    cause: str,
    rng: np.random.Generator,
    tables: dict[str, Rows],
    truth: dict[str, Any],
) -> None:
    humid = rng.random() < 0.6 or cause == "condensate"
    treatments(token, cause, humid, rng, tables["treatment"])
    filters(token, cause, rng, tables)
    checks(token, cause, rng, tables["sensor_check"], truth)
    events(token, cause, rng, tables["service_event"])
    tables["clock_offset"].append(
        {
            "ventilator_token": token,
            "measured_at": moment(10),
            "offset_s": float(rng.normal(0, 60)),
        }
    )


def treatments(
    token: str, cause: str, humid: bool, rng: np.random.Generator, out: Rows
) -> None:
    per_day = rng.uniform(1.5, 4)
    days = np.sort(rng.uniform(1, DAYS, int(per_day * DAYS)))
    external = rng.random(len(days)) < 0.08
    if cause == "external_gas":
        days = np.append(days, FAULT_DAY - 0.005)
        external = np.append(external, True)
    elif cause:
        near = np.abs(days - FAULT_DAY) < 0.06
        days, external = days[~near], external[~near]
    unfiltered = np.full(len(days), 0.15)
    if cause == "aerosol_film":
        unfiltered[days > FAULT_DAY - 40] = 0.8
    draw = rng.random(len(days))
    for n, day in enumerate(days):
        state = "absent" if draw[n] < unfiltered[n] else "present"
        out.append(
            {
                **SETUP,
                "treatment_id": f"T-{token}-{n:04d}",
                "ventilator_token": token,
                "patient_token": f"P-{token}-{int(day // 9)}",
                "started_at": moment(day),
                "ended_at": None if rng.random() < 0.2 else moment(day + 0.012),
                "generator": rng.choice(["jet", "vibrating_mesh"]),
                "gas_source": "external" if external[n] else "ventilator",
                "humidification": "heated_humidifier" if humid else "hme",
                "heated_humidifier_on": True if humid else None,
                "hme_state": None if humid else "removed",
                "expiratory_filter": None if rng.random() < 0.1 else state,
            }
        )


def filters(
    token: str, cause: str, rng: np.random.Generator, tables: dict[str, Rows]
) -> None:
    day, number = 0.0, 0
    while day < DAYS:
        length = rng.uniform(1.5, 4)
        if cause == "filter_loading" and day < FAULT_DAY <= day + length + 0.6:
            length = max(length, FAULT_DAY - day + 0.4)
        name = f"F-{token}-{number:03d}"
        loads = cause == "filter_loading" and day < FAULT_DAY < day + length
        pace = 3.2 / max(FAULT_DAY - day, 0.5) if loads else rng.uniform(0, 0.15)
        tables["filter_use"].append(
            {
                "filter_id": name,
                "ventilator_token": token,
                "filter_kind": "electrostatic",
                "installed_at": moment(day),
                "removed_at": moment(day + length) if day + length < DAYS else None,
            }
        )
        for n, at in enumerate(np.arange(day + 0.1, min(day + length, DAYS), 0.33)):
            value = 2.2 + pace * (at - day) + rng.normal(0, 0.07)
            tables["filter_reading"].append(
                {
                    "reading_id": f"R-{name}-{n:02d}",
                    "filter_id": name,
                    "ventilator_token": token,
                    "read_at": moment(at),
                    "flow_lpm": 60.0,
                    "pressure_drop_cmh2o": round(max(value, 0.5), 1),
                    "reading_source": "manometer",
                }
            )
        day, number = day + length, number + 1


def checks(
    token: str,
    cause: str,
    rng: np.random.Generator,
    out: Rows,
    truth: dict[str, Any],
) -> None:
    level, begins = 1 + rng.normal(0, 0.03), FAULT_DAY - rng.uniform(12, 28)
    if cause == "aerosol_film":
        truth["drift_day"] = begins
    quiet = cause == "none" and rng.random() < 0.5  # no volumes written at all
    for n, day in enumerate(np.arange(1, DAYS) + rng.uniform(0, 0.3)):
        ratio = level + rng.normal(0, 0.012)
        if cause == "aerosol_film" and day < FAULT_DAY:
            ratio -= 0.15 * np.clip((day - begins) / (FAULT_DAY - begins), 0, 1)
        due = n % 7 == 0 and not (cause == "calibration_overdue" and day > 32)
        off = cause == "aerosol_film" and ratio < level - 0.1
        out.append(
            {
                "check_id": f"C-{token}-{n:03d}",
                "ventilator_token": token,
                "sensor": "expiratory_flow",
                "checked_at": moment(day),
                "outcome": ("failed" if off else "passed") if due else None,
                "inspired_volume_ml": None if quiet else 500.0,
                "exhaled_volume_ml": None if quiet else round(500 * ratio, 1),
            }
        )


def events(token: str, cause: str, rng: np.random.Generator, out: Rows) -> None:
    def add(kind: str, day: float, code: str | None = None, note: str | None = None):
        out.append(
            {
                "event_id": f"E-{token}-{len(out):04d}",
                "ventilator_token": token,
                "happened_at": moment(day),
                "kind": kind,
                "code": code,
                "note": note,
            }
        )

    for kind, every in (("drain", 12.0), ("circuit_change", 14.0), ("alarm", 6.0)):
        for day in np.arange(rng.uniform(0, every), DAYS, every):
            if cause and abs(day - FAULT_DAY) < 1.1:
                continue
            add(kind, day, "VTE_LOW" if kind == "alarm" else None)
    laid: dict[str, Callable[[], None]] = {
        "aerosol_film": lambda: add("fault", FAULT_DAY, "FLOW_RANGE"),
        "electronics": lambda: add("fault", FAULT_DAY, "E42", "board voltage low"),
        "condensate": lambda: add("drain", FAULT_DAY + 0.05, note="water in limb"),
        "circuit_change": lambda: add("circuit_change", FAULT_DAY - 0.3),
        "exhalation_valve": lambda: add("alarm", FAULT_DAY - 0.02, "PEEP_HIGH"),
    }
    if cause in laid:
        laid[cause]()
