"""Sensor checks, service events, clocks and the two faults of the story."""

from __future__ import annotations

from typing import TypeAlias

import numpy as np
import pandas as pd

from engine.simulate.draws import hours, stream
from engine.simulate.places import Places

SET_VOLUME_ML = 600.0
BETWEEN_VENTILATORS, WITHIN_VENTILATOR = 0.02, 0.006
CHECK_EVERY_H = 240.0
# The fouled sensor, in days before the end of the log.
WATCHED_DAYS, DRIFT_DAYS, FAILED_DAYS = 47.0, 35.0, 11.4
DRIFT_LASTS_DAYS, DRIFT_CHANGE = 21.0, -0.15
ELECTRONICS_DAYS = 22.3
Check: TypeAlias = tuple[float, str | None, float]  # hours, outcome, ratio
SLOW_CLOCK_S, SUMMER_CLOCK_S = -1440.0, 3600.0


def checks(places: Places, seed: int) -> pd.DataFrame:
    """Checks of the expiratory flow sensor, with the volumes then seen."""
    rng = stream(seed, "checks")
    rows = []
    span_h = places.span_h
    for token in places.ventilator:
        at_h = np.cumsum(rng.uniform(0.5, 1.5, int(span_h / 120) + 4) * CHECK_EVERY_H)
        at_h = np.concatenate([[rng.uniform(0, 60)], at_h])
        at_h = at_h[at_h < span_h - 12]
        level = 1.0 + rng.normal(0, BETWEEN_VENTILATORS)
        found: list[Check] = [(h, "passed", level) for h in at_h]
        if token == places.fouled:
            found = _fouled(found, level, span_h)
        if token == places.electronics:
            found = _electronics(found, level, span_h)
        rows += [(token, h, outcome, ratio) for h, outcome, ratio in found]
    table = pd.DataFrame(rows, columns=["ventilator_token", "h", "outcome", "ratio"])
    n = len(table)
    exhaled = SET_VOLUME_ML * (table["ratio"] + rng.normal(0, WITHIN_VENTILATOR, n))
    table["inspired_volume_ml"] = SET_VOLUME_ML
    table["exhaled_volume_ml"] = exhaled.round()
    table["sensor"] = "expiratory_flow"
    table["checked_at"] = places.begin.to_datetime64() + hours(table["h"])
    table = table.sort_values(["checked_at", "ventilator_token"], ignore_index=True)
    table.insert(0, "check_id", [f"C{k:05d}" for k in range(1, n + 1)])
    return table.drop(columns=["h", "ratio"])


def _fouled(usual: list[Check], level: float, span_h: float) -> list[Check]:
    watched, failed = span_h - WATCHED_DAYS * 24, span_h - FAILED_DAYS * 24
    drift = span_h - DRIFT_DAYS * 24
    found = [one for one in usual if one[0] < watched]
    found.append((watched, "passed", level))
    for h in np.arange(watched + 24, failed, 24.0):
        share = np.clip((h - drift) / (DRIFT_LASTS_DAYS * 24), 0, 1)
        found.append((h, None, level * (1 + DRIFT_CHANGE * share)))
    found.append((failed, "failed", level * (1 + DRIFT_CHANGE)))
    found.append((failed + 30, "replaced", level))
    found.append((failed + 31, "passed", level))
    return found


def _electronics(usual: list[Check], level: float, span_h: float) -> list[Check]:
    fault = span_h - ELECTRONICS_DAYS * 24
    found = [one for one in usual if abs(one[0] - fault) > 80]
    found.append((fault - 40, "passed", level))
    found.append((fault + 8, "passed", level))
    return found


def events(places: Places, uses: pd.DataFrame, seed: int) -> pd.DataFrame:
    """Alarms, faults, repairs, changes and drains."""
    rng = stream(seed, "events")
    span_h = places.span_h
    rows: list[tuple[str, float, str, str | None, str | None]] = []
    for token in places.ventilator:
        for kind, every_h in (
            ("circuit_change", 168.0),
            ("self_test", 100.0),
            ("drain", 60.0),
            ("cleaning", 400.0),
        ):
            at_h = np.cumsum(rng.exponential(every_h, int(span_h / every_h * 2) + 4))
            rows += [(token, h, kind, None, None) for h in at_h[at_h < span_h]]
    removed = uses[uses["removed_at"].notna()]
    logged = rng.random(len(removed)) < 0.8
    rows += [
        (token, h, "filter_change", name, None)
        for token, h, name in zip(
            removed["ventilator_token"][logged],
            removed["to_h"][logged],
            removed["filter_id"][logged],
            strict=True,
        )
    ]
    failed, broke = span_h - FAILED_DAYS * 24, span_h - ELECTRONICS_DAYS * 24
    rows += [
        (places.fouled, failed - 5, "alarm", "VTE-LOW", "exhaled volume low"),
        (places.fouled, failed - 3, "alarm", "VTE-LOW", "exhaled volume low"),
        (places.fouled, failed - 1, "alarm", "VT-MISMATCH", "inspired above exhaled"),
        (places.fouled, failed + 0.2, "fault", "FLOW-E", "expiratory flow implausible"),
        (
            places.fouled,
            failed + 30,
            "repair",
            "FLOW-E",
            "residue seen on the expiratory flow sensor; sensor replaced",
        ),
        (places.electronics, broke - 0.1, "alarm", "SENSOR-COM", "no sensor signal"),
        (
            places.electronics,
            broke,
            "fault",
            "SENSOR-COM",
            "sensor board not answering",
        ),
        (
            places.electronics,
            broke + 7,
            "repair",
            "SENSOR-COM",
            "sensor board replaced; flow sensor clean and within limits on the bench",
        ),
    ]
    table = pd.DataFrame(
        rows, columns=["ventilator_token", "h", "kind", "code", "note"]
    )
    table["happened_at"] = places.begin.to_datetime64() + hours(table["h"])
    table = table.sort_values(["happened_at", "ventilator_token"], ignore_index=True)
    table.insert(0, "event_id", [f"E{k:06d}" for k in range(1, len(table) + 1)])
    return table.drop(columns="h")


def incidents(places: Places) -> pd.DataFrame:
    """The two sensor faults that reached the incident book."""
    at = places.end - pd.to_timedelta([FAILED_DAYS, ELECTRONICS_DAYS], unit="D")
    return pd.DataFrame(
        {
            "incident_id": ["I-2", "I-1"],
            "ventilator_token": [places.fouled, places.electronics],
            "happened_at": (at + pd.Timedelta(minutes=12)).astype("datetime64[us]"),
            "sensor": "expiratory_flow",
            "harm": ["mild", "none"],
            "note": [
                "ventilator changed after repeated volume alarms",
                "ventilator changed after loss of the flow signal",
            ],
        }
    )


def clocks(places: Places, seed: int) -> pd.DataFrame:
    """Offsets of the ventilator clocks, measured once a month."""
    rng = stream(seed, "clocks")
    at = pd.date_range(places.begin + pd.Timedelta(days=2), places.end, freq="30D")
    rows = []
    for token in places.ventilator:
        own = rng.normal(0, 60)
        for moment in at:
            offset = own + rng.normal(0, 8)
            if token == places.slow_clock:
                offset = SLOW_CLOCK_S + rng.normal(0, 8)
            if token == places.summer_clock and moment >= at[-1]:
                offset = SUMMER_CLOCK_S + rng.normal(0, 8)
            rows.append((token, moment, round(offset)))
    return pd.DataFrame(rows, columns=["ventilator_token", "measured_at", "offset_s"])
