"""The band around an estimate: what the fit, the assumptions and the filter leave open.

The spread of bench results about the estimate is taken on the logit scale, where it is
about the same for small and large doses. What follows from one another (the lung from
the delivery, sensors and room from what arrives at the filter) gets its band from the
band of the cause and the range of the step between.
"""

from __future__ import annotations

import numpy as np
from scipy.special import ndtri

from engine.evidence import calibration, circuit, filter_capture, lung
from engine.physics.estimate import Estimate
from engine.physics.filter import penetration_frac
from engine.physics.setup import FILTER, Setup, assumption_spread_logit
from engine.physics.sizes import LPM_PER_ML_PER_S, filter_ml_per_s

Band = tuple[np.ndarray, np.ndarray]

Z = float(ndtri(0.5 + float(circuit.BAND_COVER_FRAC) / 2))
_LUNG = ("tracheobronchial", "alveolar")
_FILTER_SIDE = ("filter", "sensor_side", "room")


def spread_logit(setup: Setup) -> np.ndarray:
    """Standard deviation of single results about the estimate, logit scale."""
    base = np.where(
        setup.is_single_limb,
        float(circuit.LEAK_SPREAD_LOGIT),
        float(calibration.DELIVERED_SPREAD_LOGIT),
    )
    return np.hypot(base, assumption_spread_logit(setup.assumed))


def logit_band(frac: np.ndarray, spread: np.ndarray | float) -> Band:
    """Low and high of a fraction; 0 and 1 have no band.

    The band of the logit, written for odds: both ends of it are the odds times or over
    the same factor.
    """
    return _odds_band(frac, np.exp(Z * np.asarray(spread)))


def _odds_band(frac: np.ndarray, factor: np.ndarray) -> Band:
    other = 1 - frac
    raised = frac * factor
    return frac / (frac + other * factor), raised / (raised + other)


def bands_of(setup: Setup, found: Estimate) -> dict[str, Band]:
    """Low and high of every place and of delivered, swept and reached_sensor."""
    factor = np.exp(Z * spread_logit(setup))
    places = found.places
    bands = {
        name: _odds_band(frac, factor)
        for name, frac in places.items()
        if name not in (*_LUNG, *_FILTER_SIDE)
    }
    bands["generator_residual"] = logit_band(
        places["generator_residual"], float(circuit.RESIDUAL_SPREAD_LOGIT)
    )
    bands["delivered"] = _odds_band(found.delivered, factor)
    bands["swept_past_wye"] = _odds_band(found.swept, factor)
    for name in _LUNG:
        bands[name] = _lung_band(places[name], found.delivered, bands["delivered"])
    bands |= _filter_side(setup, found.load, _odds_band(found.load, factor))
    return bands


def _lung_band(part: np.ndarray, delivered: np.ndarray, band: Band) -> Band:
    """The share of the delivery, give or take what the choice of lung model moves."""
    share = part / np.maximum(delivered, 1e-300)
    slack = float(lung.MODEL_TB_FRAC)
    low = band[0] * np.maximum(share - slack, 0.0)
    return low, band[1] * np.minimum(share + slack, 1.0)


def _filter_side(setup: Setup, load: np.ndarray, band: Band) -> dict[str, Band]:
    flow_lpm = filter_ml_per_s(setup) * LPM_PER_ML_PER_S
    _, low, high = penetration_frac(setup.filter_kind, flow_lpm)
    low = np.where(setup.filter_present | setup.lacks(FILTER), low, 1.0)
    high = np.where(setup.filter_present, high, 1.0)
    share = filter_capture.SENSOR_HELD_FRAC
    has_sensor = ~setup.is_single_limb
    least = np.where(has_sensor, share.low or 0.0, 0.0)
    most = np.where(has_sensor, share.high or 1.0, 0.0)
    passed = band[0] * low, band[1] * high
    return {
        "filter": (band[0] * (1 - high), band[1] * (1 - low)),
        "reached_sensor": passed,
        "sensor_side": (passed[0] * least, passed[1] * most),
        "room": (passed[0] * (1 - most), passed[1] * (1 - least)),
    }


def joined(first: Band, second: Band, where: np.ndarray) -> Band:
    """The band that holds both, where the second was tried."""
    return (
        np.where(where, np.minimum(first[0], second[0]), first[0]),
        np.where(where, np.maximum(first[1], second[1]), first[1]),
    )
