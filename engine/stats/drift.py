"""Does a ventilator's exhaled / inspired volume ratio drift, and since when.

Each ventilator is held against its own level after its last calibration: ventilators
differ among themselves by more than a drift that matters. A calibration or a new
sensor starts a new era; checks taken with external gas running are left out.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.signal import lfilter
from scipy.stats import f as fisher

from engine.evidence.filter import INTERVAL_COVER_FRAC
from engine.evidence.sensor import (
    BASELINE_CHECKS_COUNT,
    BETWEEN_VENTILATORS_FRAC,
    DRIFT_CHECKS_COUNT,
    FLOW_READING_SPREAD_FRAC,
    OWN_SPREAD_CHECKS_COUNT,
    SMALLEST_SPREAD_FRAC,
)

TOO_FEW_CHECKS = "too few checks with both volumes to tell"


@dataclass(frozen=True, kw_only=True)
class Drift:
    """What the ratio did; hours count as given, arrays follow the checks as given.

    ``drifting``  True, False, or None where the checks are too few to tell
    ``started_h`` when it began, with the ends of its interval; ``detected_h`` when
                  the average left its limits
    ``ended_h``   the calibration that ended it, or the check by which the average
                  was back inside; None while it goes on
    ``sudden``    True where a step fits better than a slope
    """

    drifting: bool | None
    started_h: float | None
    started_low_h: float | None
    started_high_h: float | None
    detected_h: float | None
    ended_h: float | None
    falling: bool | None
    sudden: bool | None
    change_per_h: float | None
    last_change_frac: float | None
    level: float | None
    spread: float
    ewma: np.ndarray
    low_limit: np.ndarray
    high_limit: np.ndarray
    used_count: int
    left_out_count: int
    refusal: str = ""


@dataclass(frozen=True)
class _Era:
    places: np.ndarray  # of its checks in the input
    end_h: float | None


def drift_of(
    hours: np.ndarray,
    ratio: np.ndarray,
    weight: float,
    limit_sd: float,
    *,
    calibrated: np.ndarray | None = None,
    left_out: np.ndarray | None = None,
    spread: float | None = None,
) -> Drift:
    """Whether the ratio drifts, judged by its exponentially weighted average.

    Shapes   hours and ratio of n checks of one ventilator, any order; ``calibrated``
             true where that check put the sensor right (a new era begins after it,
             and its own ratio is not used); ``left_out`` true where external gas ran.
    Weight   of the newest check in the average; limits at ``limit_sd`` of its spread.
             A check further off than ``limit_sd`` of its own spread counts as so far
             off only: one wild reading must not carry the average out.
    Spread   of one check about its level; none takes this ventilator's own, or the
             stated accuracy while it has few checks.
    Source   EWMA chart with time-varying limits, Roberts 1959 and the limits of Lucas
             and Saccucci 1990 (from memory); the start is the knee of a broken line.
    Checked  tests/engine/stats/test_drift.py; detection.csv
    """
    t, r = np.asarray(hours, float), np.asarray(ratio, float)
    n = len(t)
    reset = _flags(calibrated, n)
    usable = np.isfinite(t) & np.isfinite(r) & ~_flags(left_out, n) & ~reset
    sd = own_spread(t, r, usable, reset) if spread is None else float(spread)
    smooth, low, high = (np.full(n, math.nan) for _ in range(3))
    found: Drift | None = None
    spoke = False
    for era in _eras(t, usable, reset):
        if len(era.places) < int(DRIFT_CHECKS_COUNT):
            continue
        spoke = True
        level, level_var = _level(r[era.places], sd)
        average, half = _limits(r[era.places], level, level_var, sd, weight, limit_sd)
        smooth[era.places] = ewma(r[era.places], weight, level)
        low[era.places], high[era.places] = level - half, level + half
        signal = _signal(average, half, r[era.places], level, sd, limit_sd)
        if signal is not None:
            out = np.flatnonzero(np.abs(average - level) > half)
            found = _described(t, r, era, level, sd, signal, int(out.max(initial=0)))
    counts = {
        "spread": sd,
        "ewma": smooth,
        "low_limit": low,
        "high_limit": high,
        "used_count": int(usable.sum()),
        "left_out_count": int(n - usable.sum()),
    }
    if found is None:
        return _quiet(spoke, counts)
    return Drift(**{**found.__dict__, **counts})


def ewma(values: np.ndarray, weight: float, start: float) -> np.ndarray:
    """The exponentially weighted moving average, begun at ``start``.

    Raises   ValueError if the weight is not above 0 and at most 1.
    """
    if not 0 < weight <= 1:
        raise ValueError(f"weight must be above 0 and at most 1; got {weight}")
    keep = 1 - weight
    values = np.asarray(values, float)
    return lfilter([weight], [1.0, -keep], values, zi=[keep * start])[0]


def ewma_half_width(
    count: int, weight: float, sd: float, limit_sd: float
) -> np.ndarray:
    """Half the width between the limits at the 1st, 2nd, ... value."""
    i = np.arange(1, count + 1)
    share = weight / (2 - weight) * (1 - (1 - weight) ** (2 * i))
    return limit_sd * sd * np.sqrt(share)


def own_spread(
    hours: np.ndarray,
    ratio: np.ndarray,
    usable: np.ndarray | None = None,
    calibrated: np.ndarray | None = None,
) -> float:
    """Spread of one check, from the steps between neighbouring checks.

    Steps hardly feel a slow drift. Steps far beyond the median one are left out, so
    that a jump does not count either; with few checks the stated accuracy of flow
    stands in.
    """
    t, r = np.asarray(hours, float), np.asarray(ratio, float)
    good = np.isfinite(t) & np.isfinite(r)
    good = good if usable is None else good & usable
    steps = []
    for era in _eras(t, good, _flags(calibrated, len(t))):
        steps.append(np.abs(np.diff(r[era.places])))
    pooled = np.concatenate(steps) if steps else np.empty(0)
    if len(pooled) + 1 < int(OWN_SPREAD_CHECKS_COUNT):
        return float(FLOW_READING_SPREAD_FRAC)
    usual = float(np.median(pooled)) / _MEDIAN_STEP * math.sqrt(2)
    kept = pooled[pooled <= _FAR_STEP * usual]
    sd = math.sqrt(float((kept**2).mean()) / 2) / _CUT_AT_FAR if len(kept) else 0.0
    return max(sd, float(SMALLEST_SPREAD_FRAC))


def broken_line(hours: np.ndarray, values: np.ndarray) -> tuple[float, float, float]:
    """The knee of a level followed by a slope: when, and its slope and misfit."""
    t, y = np.asarray(hours, float), np.asarray(values, float)
    knees, misfits, slopes = _knees(t, y)
    best = int(misfits.argmin())
    return float(knees[best]), float(slopes[best]), float(misfits[best])


# Median of the absolute difference of two normal values, in standard deviations.
_MEDIAN_STEP = 0.6744897501960817 * math.sqrt(2)
# Steps beyond this many of their own spreads are jumps; cutting there takes this share
# off the spread of normal values.
_FAR_STEP, _CUT_AT_FAR = 3.0, 0.9866
_KNEES_PER_STEP = 8


def _flags(values: np.ndarray | None, n: int) -> np.ndarray:
    return np.zeros(n, bool) if values is None else np.asarray(values, bool)


def _eras(t: np.ndarray, usable: np.ndarray, reset: np.ndarray) -> list[_Era]:
    cuts = np.sort(t[reset & np.isfinite(t)])
    places = np.flatnonzero(usable)
    places = places[np.argsort(t[places], kind="stable")]
    era = np.searchsorted(cuts, t[places], side="left")
    return [
        _Era(places[era == k], float(cuts[k]) if k < len(cuts) else None)
        for k in range(len(cuts) + 1)
        if (era == k).any()
    ]


def _level(r: np.ndarray, sd: float) -> tuple[float, float]:
    """The ventilator's own level and its variance.

    The first checks of an era, with the spread between ventilators about 1 as what is
    known before the first of them.
    """
    first = r[: max(1, min(int(BASELINE_CHECKS_COUNT), len(r) // 3))]
    known = 1 / float(BETWEEN_VENTILATORS_FRAC) ** 2
    seen = len(first) / sd**2
    return float((known * 1.0 + seen * np.median(first)) / (known + seen)), 1 / (
        known + seen
    )


def _limits(
    r: np.ndarray,
    level: float,
    level_var: float,
    sd: float,
    weight: float,
    limit_sd: float,
) -> tuple[np.ndarray, np.ndarray]:
    far = limit_sd * sd  # no single check counts for more than this
    average = ewma(level + np.clip(r - level, -far, far), weight, level)
    half = ewma_half_width(len(r), weight, sd, limit_sd)
    pulled = 1 - (1 - weight) ** np.arange(1, len(r) + 1)
    return average, np.sqrt(half**2 + limit_sd**2 * level_var * pulled**2)


def _signal(
    average: np.ndarray,
    half: np.ndarray,
    r: np.ndarray,
    level: float,
    sd: float,
    limit_sd: float,
) -> int | None:
    """The check at which the latest drift is called.

    Either the average has been outside its limits twice running, with both checks
    themselves off on that side; or two checks running lie off by more than the limit,
    which is how a drift shows where checks are rare.
    """
    side = np.sign(average - level) * (np.abs(average - level) > half)
    own = np.sign(r - level) * (np.abs(r - level) > sd)
    far = own * (np.abs(r - level) > limit_sd * sd)
    twice_out = (side[1:] != 0) & (side[1:] == side[:-1])
    pair = (own[1:] == own[:-1]) & (own[1:] == side[1:]) & twice_out
    off = pair | ((far[1:] != 0) & (far[1:] == far[:-1]))
    called = np.flatnonzero(off) + 1
    if len(called) == 0:
        return None
    # The latest excursion counts: go back while the average stays out on its side.
    last = int(called[-1])
    away = np.sign(r[last] - level)
    back = np.flatnonzero(np.sign(average[:last] - level) != away)
    since = int(back[-1]) + 1 if len(back) else 0
    return int(called[called >= since][0])


def _described(
    t: np.ndarray,
    r: np.ndarray,
    era: _Era,
    level: float,
    sd: float,
    signal: int,
    last_out: int,
) -> Drift:
    x, y = t[era.places], r[era.places]
    back = float(x[last_out + 1]) if signal <= last_out < len(x) - 1 else None
    ended = back if era.end_h is None or back is not None else era.end_h
    if back is not None:
        x, y = x[: last_out + 1], y[: last_out + 1]
    knees, misfits, slopes = _knees(x, y)
    falling = bool(y[signal] < level)
    with_sign = (slopes < 0) if falling else (slopes > 0)
    misfits = np.where(with_sign & (knees <= x[signal]), misfits, np.inf)
    best = int(misfits.argmin())
    steps = _steps(x, y)
    first = int(steps.argmin())
    sudden = bool(steps[first] < misfits[best])
    if sudden:  # somewhere between the check before and the check at the step
        fair = np.flatnonzero(_as_fair(steps, first, len(x)))
        low, high = float(x[fair.min()]), float(x[fair.max() + 1])
    else:
        fair_knees = knees[_as_fair(misfits, best, len(x))]
        low, high = float(fair_knees.min()), float(fair_knees.max())
    nan = np.empty(0)
    return Drift(
        drifting=True,
        started_h=float(x[first + 1] if sudden else knees[best]),
        started_low_h=low,
        started_high_h=high,
        detected_h=float(x[signal]),
        ended_h=ended,
        falling=falling,
        sudden=sudden,
        change_per_h=None if sudden else float(slopes[best]),
        last_change_frac=float(y[-1] / level - 1),
        level=level,
        spread=sd,
        ewma=nan,
        low_limit=nan,
        high_limit=nan,
        used_count=0,
        left_out_count=0,
    )


def _knees(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Every knee tried, and the misfit and slope of the broken line with it."""
    fine = np.linspace(0, 1, _KNEES_PER_STEP, endpoint=False)
    knees = np.unique((x[:-1, None] + np.diff(x)[:, None] * fine[None, :]).ravel())
    after = np.maximum(x[None, :] - knees[:, None], 0.0)
    away = after - after.mean(axis=1, keepdims=True)
    size = (away**2).sum(axis=1)
    with np.errstate(invalid="ignore", divide="ignore"):
        slopes = np.where(size > 0, away @ (y - y.mean()) / size, 0.0)
    misfits = ((y - y.mean()) ** 2).sum() - slopes**2 * size
    return knees, misfits, slopes


def _steps(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    """The misfit of one shift of level before each check but the first."""
    n = len(y)
    k = np.arange(1, n)
    sums = np.cumsum(y)[:-1]
    gain = (sums - k * y.mean()) ** 2 * (1 / k + 1 / (n - k))
    return ((y - y.mean()) ** 2).sum() - gain


def _as_fair(misfits: np.ndarray, best: int, n: int) -> np.ndarray:
    """Starts whose misfit the best one does not clearly beat."""
    df = max(n - 3, 1)
    allowed = float(fisher.ppf(float(INTERVAL_COVER_FRAC), 1, df)) / df
    return misfits <= misfits[best] * (1 + allowed)


def _quiet(spoke: bool, counts: dict) -> Drift:
    return Drift(
        drifting=False if spoke else None,
        started_h=None,
        started_low_h=None,
        started_high_h=None,
        detected_h=None,
        ended_h=None,
        falling=None,
        sudden=None,
        change_per_h=None,
        last_change_frac=None,
        level=None,
        refusal="" if spoke else TOO_FEW_CHECKS,
        **counts,
    )
