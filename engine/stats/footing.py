"""Filter readings brought to one footing: the resistance at the reference flow.

The pressure across a filter bends with flow, dP = K1 V + K2 V^2, so a resistance is
a figure only together with its flow. With K2 known a reading can be carried to the
reference flow; without it only readings taken near that flow are compared. What
cannot be compared, or looks like another quantity, is doubted and counted, not used.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.stats import t as student

from engine.evidence.filter import (
    AIRWAY_LIKE_CMH2O_PER_LPS,
    INTERVAL_COVER_FRAC,
    JUMP_FRAC,
    OVER_RANGE_CMH2O,
)
from engine.units import S_PER_MIN

# Why a reading is not used, in the order the reasons are looked for; 0 is used.
DOUBTS: tuple[str, ...] = (
    "",
    "no pressure drop was written down",
    "no flow was written down",
    "the pressure drop reads zero",
    "the pressure drop is beyond what can be measured",
    "taken at another flow, and how this filter bends with flow is not known",
    "looks like the resistance of tube and airways, not of the filter",
    "taken before the filter was installed",
    "taken after the filter was removed",
)
(
    USED,
    NO_PRESSURE,
    NO_FLOW,
    ZERO,
    OVER_RANGE,
    OTHER_FLOW,
    TUBE_LIKE,
    BEFORE_INSTALLATION,
    AFTER_REMOVAL,
) = range(len(DOUBTS))

# How a used reading was brought to the reference flow.
FOOTINGS: tuple[str, ...] = (
    "not used",
    "carried to the reference flow by K2",
    "taken near the reference flow",
)


@dataclass(frozen=True, kw_only=True)
class Rohrer:
    """dP = K1 V + K2 V^2 in cmH2O and L/s; K2 may come out negative: see its ends."""

    k1_cmh2o_per_lps: float
    k2_cmh2o_per_lps2: float
    k2_low: float = math.nan
    k2_high: float = math.nan
    readings_count: int = 2
    refusal: str = ""


def at_reference_flow(
    flow_lpm: np.ndarray,
    pressure_drop_cmh2o: np.ndarray,
    reference_flow_lpm: float,
    same_flow_within_frac: float,
    k2_cmh2o_per_lps2: np.ndarray | float = math.nan,
) -> dict[str, np.ndarray]:
    """Resistance of each reading at the reference flow, or why it is not used.

    Shapes   columns of n (K2 may be one number); returns columns of n:
             ``resistance_cmh2o_per_lps`` NaN where not used, ``measured_cmh2o_per_lps``
             as read at its own flow, ``doubt`` a code into DOUBTS, ``footing`` a code
             into FOOTINGS.
    Source   Rohrer's equation; R(V) = K1 + K2 V, so only K2 times the flow difference
             is added.
    """
    flow = np.asarray(flow_lpm, float)
    drop = np.asarray(pressure_drop_cmh2o, float)
    k2 = np.broadcast_to(np.asarray(k2_cmh2o_per_lps2, float), flow.shape)
    near = np.abs(flow - reference_flow_lpm) <= (
        same_flow_within_frac * reference_flow_lpm * (1 + _ROUNDING)
    )
    doubt = np.select(
        [
            np.isnan(drop),
            np.isnan(flow) | ~(flow > 0),
            drop <= 0,
            drop >= float(OVER_RANGE_CMH2O),
            ~near & np.isnan(k2),
        ],
        [NO_PRESSURE, NO_FLOW, ZERO, OVER_RANGE, OTHER_FLOW],
        default=USED,
    ).astype(np.int8)
    with np.errstate(divide="ignore", invalid="ignore"):
        measured = np.where(flow > 0, drop / (flow / S_PER_MIN), np.nan)
    carried = measured + k2 * (reference_flow_lpm - flow) / S_PER_MIN
    used = doubt == USED
    resistance = np.where(np.isnan(k2), measured, carried)
    return {
        "resistance_cmh2o_per_lps": np.where(used, resistance, np.nan),
        "measured_cmh2o_per_lps": measured,
        "doubt": doubt,
        "footing": np.where(used, np.where(np.isnan(k2), 2, 1), 0).astype(np.int8),
    }


def with_doubts_in_place(
    filter_code: np.ndarray,
    hours_h: np.ndarray,
    readings: dict[str, np.ndarray],
    from_ventilator: np.ndarray,
    removed_h: np.ndarray | float = math.inf,
) -> dict[str, np.ndarray]:
    """The same readings, with those doubted that only their neighbours give away.

    Before the filter was installed or after it was removed; and airway-like values:
    a run of high readings that jumps up from nothing and either falls back at once or
    was read off the ventilator, whose displayed resistance is the patient's.

    Shapes   columns of n in any order; ``filter_code`` tells filters apart
             (negative where the filter is not known); ``readings`` as
             ``at_reference_flow`` returns it. Hours count from installation.
    """
    hours = np.asarray(hours_h, float)
    doubt = readings["doubt"].copy()
    removed = np.broadcast_to(np.asarray(removed_h, float), hours.shape)
    with np.errstate(invalid="ignore"):
        outside = np.where(hours < 0, BEFORE_INSTALLATION, AFTER_REMOVAL)
        out = (hours < 0) | (hours > removed)
    doubt = np.where((doubt == USED) & out, outside, doubt).astype(np.int8)
    alone = _airway_like(
        np.asarray(filter_code),
        hours,
        np.where(doubt == USED, readings["resistance_cmh2o_per_lps"], np.nan),
        np.asarray(from_ventilator, bool),
    )
    doubt = np.where(alone, TUBE_LIKE, doubt).astype(np.int8)
    used = doubt == USED
    return {
        **readings,
        "resistance_cmh2o_per_lps": np.where(
            used, readings["resistance_cmh2o_per_lps"], np.nan
        ),
        "doubt": doubt,
        "footing": np.where(used, readings["footing"], 0).astype(np.int8),
    }


def rohrer_from_pair(
    flow_a_lps: float, resistance_a: float, flow_b_lps: float, resistance_b: float
) -> Rohrer:
    """K1 and K2 through two resistances (dP / V) at two flows.

    Raises   ValueError if the flows are equal.
    """
    if flow_a_lps == flow_b_lps:
        raise ValueError(f"two different flows are needed; got {flow_a_lps} twice")
    k2 = (resistance_b - resistance_a) / (flow_b_lps - flow_a_lps)
    return Rohrer(k1_cmh2o_per_lps=resistance_a - k2 * flow_a_lps, k2_cmh2o_per_lps2=k2)


def rohrer_fit(
    flow_lps: np.ndarray, pressure_drop_cmh2o: np.ndarray, cover: float | None = None
) -> Rohrer:
    """K1 and K2 by least squares through all readings, with the interval of K2."""
    flow = np.asarray(flow_lps, float)
    drop = np.asarray(pressure_drop_cmh2o, float)
    good = (flow > 0) & np.isfinite(drop)
    flow, drop = flow[good], drop[good]
    n = len(flow)
    if n < 2 or flow.min() == flow.max():
        nan = math.nan
        return Rohrer(
            k1_cmh2o_per_lps=nan,
            k2_cmh2o_per_lps2=nan,
            readings_count=n,
            refusal="fewer than two different flows",
        )
    columns = np.column_stack([flow, flow**2])
    k1, k2 = np.linalg.lstsq(columns, drop, rcond=None)[0]
    low = high = math.nan
    if n > 2:
        cover = float(INTERVAL_COVER_FRAC) if cover is None else cover
        error = float(((drop - columns @ [k1, k2]) ** 2).sum()) / (n - 2)
        spread = math.sqrt(error * np.linalg.inv(columns.T @ columns)[1, 1])
        half = float(student.ppf((1 + cover) / 2, n - 2)) * spread
        low, high = float(k2) - half, float(k2) + half
    return Rohrer(
        k1_cmh2o_per_lps=float(k1),
        k2_cmh2o_per_lps2=float(k2),
        k2_low=low,
        k2_high=high,
        readings_count=n,
    )


def pressure_drop_of(k1: float, k2: float, flow_lps: np.ndarray) -> np.ndarray:
    """dP = K1 V + K2 V^2, cmH2O."""
    flow = np.asarray(flow_lps, float)
    return k1 * flow + k2 * flow**2


def flow_implied_lps(k1: float, k2: float, resistance: float) -> float:
    """The flow at which this pair gives this resistance (R = K1 + K2 V)."""
    return (resistance - k1) / k2 if k2 else math.nan


def k2_from_sittings(
    filter_code: np.ndarray,
    hours_h: np.ndarray,
    flow_lpm: np.ndarray,
    measured_cmh2o_per_lps: np.ndarray,
    class_code: np.ndarray,
    new_within_h: float,
) -> dict[str, np.ndarray]:
    """K2 of each filter from its readings when new; K2 of a class as their median.

    A sitting is a filter's readings within ``new_within_h`` of installation at two or
    more different flows. A filter without one takes the median of its class.

    Shapes   columns of n; returns columns of n: ``k2_cmh2o_per_lps2`` (NaN where
             neither is known) and ``k2_of`` (2 own, 1 class, 0 none).
    """
    code = np.asarray(filter_code)
    flow = np.asarray(flow_lpm, float) / S_PER_MIN
    seen = np.asarray(measured_cmh2o_per_lps, float)
    hours = np.asarray(hours_h, float)
    new = (hours >= 0) & (hours <= new_within_h) & np.isfinite(flow * seen)
    new &= code >= 0
    size = int(code.max(initial=-1)) + 1
    own = _slopes_by_group(code[new], flow[new], seen[new], size)
    kind = np.asarray(class_code)
    kinds = np.full(size, -1)
    kinds[code[code >= 0]] = kind[code >= 0]
    of_class = np.full(int(kind.max(initial=-1)) + 1, np.nan)
    for k in range(len(of_class)):
        members = own[(kinds == k) & np.isfinite(own)]
        of_class[k] = np.median(members) if len(members) else np.nan
    mine = np.where(code >= 0, own[np.maximum(code, 0)] if size else np.nan, np.nan)
    theirs = np.where(
        kind >= 0, of_class[np.maximum(kind, 0)] if len(of_class) else np.nan, np.nan
    )
    return {
        "k2_cmh2o_per_lps2": np.where(np.isfinite(mine), mine, theirs),
        "k2_of": np.where(
            np.isfinite(mine), 2, np.where(np.isfinite(theirs), 1, 0)
        ).astype(np.int8),
    }


_ROUNDING = 1e-9


def _slopes_by_group(
    code: np.ndarray, x: np.ndarray, y: np.ndarray, size: int
) -> np.ndarray:
    """Least-squares slope of y on x in each group; NaN where x does not vary."""
    n = np.bincount(code, minlength=size).astype(float)
    with np.errstate(invalid="ignore", divide="ignore"):
        mean_x = np.bincount(code, x, size) / n
        mean_y = np.bincount(code, y, size) / n
        away_x, away_y = x - mean_x[code], y - mean_y[code]
        sxx = np.bincount(code, away_x**2, size)
        sxy = np.bincount(code, away_x * away_y, size)
        return np.where(sxx > _ROUNDING, sxy / sxx, np.nan)


def _airway_like(
    code: np.ndarray, hours: np.ndarray, resistance: np.ndarray, shown: np.ndarray
) -> np.ndarray:
    """True for each run of high readings that its neighbours do not bear out."""
    out = np.zeros(len(resistance), dtype=bool)
    kept = np.flatnonzero(np.isfinite(resistance) & (code >= 0) & np.isfinite(hours))
    if len(kept) == 0:
        return out
    kept = kept[np.lexsort((hours[kept], code[kept]))]
    value, group = resistance[kept], code[kept]
    high = value >= float(AIRWAY_LIKE_CMH2O_PER_LPS)
    same = np.r_[False, group[1:] == group[:-1]]
    starts = high & ~(same & np.r_[False, high[:-1]])
    ends = high & ~np.r_[same[1:] & high[1:], False]
    if not starts.any():
        return out
    first, last = np.flatnonzero(starts), np.flatnonzero(ends)
    before = np.where(same[first], value[np.maximum(first - 1, 0)], 0.0)
    follows = np.r_[same[1:], False][last]
    after = np.where(follows, value[np.minimum(last + 1, len(value) - 1)], np.inf)
    share = float(JUMP_FRAC)
    jumps = before < share * value[first]
    returns = after < share * value[last]
    read_off = np.minimum.reduceat(
        np.r_[shown[kept], True].astype(int), np.column_stack([first, last + 1]).ravel()
    )[::2].astype(bool)
    doubted = jumps & (returns | read_off)
    run = np.cumsum(starts) - 1
    out[kept] = high & doubted[np.maximum(run, 0)]
    return out
