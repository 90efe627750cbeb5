"""Where the nominal dose of each treatment went, and what other sites would give."""

from __future__ import annotations

import numpy as np

from engine.batch import Batch, size
from engine.columns import CHOICE_SITES, FRACTIONS, code_of
from engine.evidence import calibration, circuit, filter_capture
from engine.physics.setup import (
    ASSUMPTIONS,
    FILTER,
    REFUSALS,
    Setup,
    assumption_spread_logit,
    by_generator,
    setup_of,
)

__all__ = ["ASSUMPTIONS", "REFUSALS", "alternatives", "balance"]

Z_80 = 1.2816


def balance(rows: Batch) -> dict[str, np.ndarray]:
    """First form: plug flow at the Y, one droplet size."""
    setup = setup_of(rows)
    point = _point(setup)
    out: dict[str, np.ndarray] = {}
    spread = np.hypot(
        float(calibration.BETWEEN_STUDY_LOGIT), assumption_spread_logit(setup.assumed)
    )
    for name, value in point.items():
        low, high = _band(value, spread)
        if name in {"filter", "sensor_side", "room"}:
            low = np.where(setup.lacks(FILTER), 0.0, low)
            load = point["filter"] + point["sensor_side"] + point["room"]
            high = np.where(setup.lacks(FILTER), _band(load, spread)[1], high)
        out[f"{name}_frac"] = value
        out[f"{name}_low_frac"] = low
        out[f"{name}_high_frac"] = high
    for name in list(out):
        out[name] = np.where(setup.refusal > 0, np.nan, out[name])
    out["refusal"] = setup.refusal
    out["assumed"] = setup.assumed
    return out


def alternatives(rows: Batch) -> dict[str, np.ndarray]:
    """First form: the delivered dose at every site the generator may use."""
    setup = setup_of(rows)
    here = balance(rows)["delivered_frac"]
    n = size(rows)
    out: dict[str, np.ndarray] = {}
    best = np.full(n, -1, np.int8)
    best_frac = np.full(n, np.nan)
    for site in CHOICE_SITES:
        there = setup.but(site=np.full(n, code_of("site", site), np.int8))
        value = np.where(setup.refusal > 0, np.nan, _point(there)["delivered"])
        low, high = _band(value, float(calibration.BETWEEN_STUDY_LOGIT))
        out[f"delivered_at_{site}_frac"] = value
        out[f"delivered_at_{site}_low_frac"] = low
        out[f"delivered_at_{site}_high_frac"] = high
        better = np.isfinite(value) & ~(best_frac >= value)
        best = np.where(better, code_of("site", site), best).astype(np.int8)
        best_frac = np.where(better, value, best_frac)
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = np.where(here > 0, best_frac / here, np.nan)
    shown = np.where(np.isnan(ratio), -1, ratio > 1.4).astype(np.int8)
    out["best_site"] = best
    out["best_delivered_frac"] = best_frac
    out["best_ratio"] = ratio
    out["difference_shown"] = shown
    out["forgone_frac"] = np.where(shown == 1, best_frac - here, 0.0) + 0.0 * here
    return out


def _band(value: np.ndarray, spread: np.ndarray | float) -> tuple:
    value = np.clip(value, 0.0, 1.0)
    with np.errstate(divide="ignore"):
        odds = value / (1 - value)
    factor = np.exp(Z_80 * np.asarray(spread))
    low, high = odds / factor, odds * factor
    with np.errstate(invalid="ignore"):
        return (
            np.where(value < 1, low / (1 + low), 1.0),
            np.where(value < 1, high / (1 + high), 1.0),
        )


def _emitted(setup: Setup) -> np.ndarray:
    values = {
        "jet": calibration.JET_EMITTED_FRAC,
        "breath_enhanced_jet": calibration.BREATH_ENHANCED_EMITTED_FRAC,
        "vibrating_mesh": calibration.MESH_EMITTED_FRAC,
        "ultrasonic": calibration.ULTRASONIC_EMITTED_FRAC,
        "pmdi_spacer": calibration.INHALER_EMITTED_FRAC,
    }
    return by_generator(setup.generator, values)


def _limb_ml(setup: Setup) -> np.ndarray:
    per_cm = np.pi / 4 * (float(circuit.LIMB_MM) / 10) ** 2
    cm = {
        "ventilator_outlet": 200.0,
        "humidifier_inlet": 160.0,
        "humidifier_outlet": 150.0,
        "wye": 0.0,
        "airway_side": 0.0,
        "expiratory_limb": 0.0,
    }
    at = setup.distance_cm
    for site, length in cm.items():
        at = np.where(setup.site == code_of("site", site), length, at)
    return per_cm * at + float(circuit.WYE_FITTING_ML)


def _inhaled(setup: Setup) -> np.ndarray:
    bias = np.maximum(setup.bias_ml_per_s + setup.gas_ml_per_s, 1e-6)
    cycle_ml = setup.tidal_ml + bias * setup.expiratory_s
    x = np.mod(_limb_ml(setup), cycle_ml)
    window = setup.tidal_ml - setup.dead_ml
    total_s = setup.inspiratory_s + setup.expiratory_s
    share = np.where(setup.is_synchronised, 1.0, setup.inspiratory_s / total_s)
    first = np.clip(window - x, 0, None) / setup.tidal_ml
    again = np.clip(
        np.minimum(setup.tidal_ml, cycle_ml - x + window) - (cycle_ml - x), 0, None
    )
    swept = np.minimum(cycle_ml, cycle_ml - x + window) - np.maximum(
        setup.tidal_ml, cycle_ml - x
    )
    parked = np.clip(swept, 0, None) / (cycle_ml - setup.tidal_ml)
    inhaled = share * (first + again / setup.tidal_ml) + (1 - share) * parked
    return np.where(setup.site == code_of("site", "expiratory_limb"), 0.0, inhaled)


def _point(setup: Setup) -> dict[str, np.ndarray]:
    with np.errstate(divide="ignore", invalid="ignore"):
        emitted = _emitted(setup)
        kept = np.where(setup.is_humid, float(calibration.HUMID_SURVIVAL_FRAC), 1.0)
        at_wye = emitted * kept * float(calibration.WYE_SURVIVAL_FRAC)
        upstream = setup.site != code_of("site", "airway_side")
        caught = np.where(
            setup.hme_in_line & upstream, float(filter_capture.HMEF_CAPTURE_FRAC), 0.0
        )
        inhaled = at_wye * _inhaled(setup)
        hme = inhaled * caught
        tube = 0.25 * (inhaled - hme)
        delivered = inhaled - hme - tube
        lost = at_wye - inhaled
        load = lost + 0.5 * delivered
        held = np.where(
            setup.filter_present,
            1 - float(filter_capture.ANY_FILTER_PENETRATION_FRAC),
            0.0,
        )
        walls = 0.05
        past = load * (1 - walls) * (1 - held)
        sensor = past * float(filter_capture.SENSOR_HELD_FRAC)
        fractions = {
            "generator_residual": 1 - emitted,
            "limb": emitted - at_wye,
            "hme": hme,
            "unused_past_wye": lost * walls,
            "tube": tube,
            "tracheobronchial": 0.25 * delivered,
            "alveolar": 0.25 * delivered,
            "expiratory_limb": 0.5 * delivered * walls,
            "filter": load * (1 - walls) * held,
            "sensor_side": sensor,
            "room": past - sensor,
        }
    assert set(fractions) == set(FRACTIONS)
    return {**fractions, "delivered": delivered, "reached_sensor": past}
