"""One filter's life from its readings: segments, trend, state, time to the limit.

Breaks come first and the trend second: a step makes any trend test speak. The state
looks at the last segment only, because that is the filter now in the circuit.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from engine.evidence.filter import CHANGE_READINGS_COUNT
from engine.stats.breaks import Step, line_and_step
from engine.stats.footing import at_reference_flow, with_doubts_in_place
from engine.stats.forecast import ALREADY_THERE, TOO_FEW, Forecast, pivot_forecast
from engine.stats.trends import Slope, mann_kendall, theil_sen

STATES: tuple[str, ...] = (
    "steady",
    "rising",
    "near_limit",
    "over_limit",
    "too_few_readings",
)
STEADY, RISING, NEAR_LIMIT, OVER_LIMIT, TOO_FEW_READINGS = STATES


@dataclass(frozen=True, kw_only=True)
class Segment:
    """A stretch of readings between two changes, logged or suspected."""

    from_h: float
    to_h: float
    readings_count: int
    slope_per_h: float
    slope_low: float
    slope_high: float
    p: float
    rising_since_h: float | None
    last_cmh2o_per_lps: float
    begins_with: str  # "installation", "logged change" or "suspected change"


@dataclass(frozen=True, kw_only=True)
class FilterLife:
    """What the readings of one filter say; slopes in cmH2O/(L/s) per hour.

    ``time_to_limit_h`` and its ends count from the last reading used; they are None
    with ``forecast_refusal`` naming the reason. ``suspected_change_h`` is when the
    first reading after the clearest suspected unlogged change was taken.
    """

    state: str
    readings_count: int
    left_out_count: int
    over_range_count: int
    last_h: float | None
    last_cmh2o_per_lps: float | None
    slope_per_h: float | None
    slope_low: float | None
    slope_high: float | None
    p: float | None
    rising_since_h: float | None
    time_to_limit_h: float | None
    time_to_limit_low_h: float | None
    time_to_limit_high_h: float | None
    forecast_refusal: str
    suspected_change_h: float | None
    change_p: float | None
    change_drop_cmh2o_per_lps: float | None
    suspected_changes_h: tuple[float, ...]
    segments: tuple[Segment, ...]
    seed: int
    note: str = ""


def life_of(
    hours: np.ndarray,
    resistance_cmh2o_per_lps: np.ndarray,
    limit: float,
    near_frac: float,
    min_readings: int,
    rising_p: float,
    change_p: float,
    seed: int = 0,
    logged_changes_h: Sequence[float] = (),
) -> FilterLife:
    """The life of one filter.

    Shapes    hours in use (or cumulative captured aerosol) and resistance of n, any
              order. NaN is left out and counted; infinity means over range: it counts
              as over the limit, ranks on top, and takes no part in a slope. Readings
              before hour zero are left out and counted.
    State     by the last reading where it is over or near the limit; otherwise by the
              trend of the last segment, once it holds ``min_readings``.
    Source    the order of steps is OURS; the tests are those of trends.py, breaks.py
              and forecast.py
    Checked   tests/engine/stats/test_filter_life.py; detection.csv
    """
    x, y, left_out = _usable(hours, resistance_cmh2o_per_lps)
    if len(y) == 0:
        return _nothing(left_out, seed)
    logged = sorted(h for h in logged_changes_h if h > x[0])
    ends, steps, first_p = _split(x, y, logged, change_p, seed)
    slopes = [_slope(x[a:b], y[a:b], min_readings) for a, b, _ in ends]
    segments = tuple(
        _segment(x[a:b], y[a:b], slope, rising_p, min_readings, begins)
        for (a, b, begins), slope in zip(ends, slopes, strict=True)
    )
    start = ends[-1][0]
    last = segments[-1]
    state = _state(last, limit, near_frac, min_readings)
    ahead = _forecast(x[start:], y[start:], slopes[-1], limit, min_readings)
    strongest = min(steps, key=lambda step: step.p) if steps else None
    return FilterLife(
        state=state,
        readings_count=len(y),
        left_out_count=left_out,
        over_range_count=int(np.isinf(y).sum()),
        last_h=float(x[-1]),
        last_cmh2o_per_lps=float(y[-1]),
        slope_per_h=_known(last.slope_per_h),
        slope_low=_known(last.slope_low),
        slope_high=_known(last.slope_high),
        p=_known(last.p),
        rising_since_h=last.rising_since_h,
        time_to_limit_h=_from_last(ahead.at, x[-1]),
        time_to_limit_low_h=_from_last(ahead.low, x[-1]),
        time_to_limit_high_h=_from_last(ahead.high, x[-1]),
        forecast_refusal=ahead.refusal,
        suspected_change_h=strongest.before_x if strongest else None,
        change_p=strongest.p if strongest else first_p,
        change_drop_cmh2o_per_lps=strongest.drop if strongest else None,
        suspected_changes_h=tuple(sorted(step.before_x for step in steps)),
        segments=segments,
        seed=seed,
        note=note_of(len(y), bool(np.all(y == y[0]))),
    )


def _usable(
    hours: np.ndarray, resistance: np.ndarray
) -> tuple[np.ndarray, np.ndarray, int]:
    x, y = np.asarray(hours, float), np.asarray(resistance, float)
    good = np.isfinite(x) & ~np.isnan(y) & (x >= 0)
    order = np.argsort(x[good], kind="stable")
    return x[good][order], y[good][order], int((~good).sum())


def _split(
    x: np.ndarray, y: np.ndarray, logged: list[float], change_p: float, seed: int
) -> tuple[list[tuple[int, int, str]], list[Step], float | None]:
    """Segment ends, the suspected changes, and the p of the first look.

    Each stretch between logged changes is searched; a stretch that breaks is
    searched again on both sides.
    """
    cuts = [0, *np.searchsorted(x, logged).tolist(), len(x)]
    waiting = [
        (a, b, "logged change" if a else "installation")
        for a, b in pairwise(cuts)
        if b > a
    ]
    done: list[tuple[int, int, str]] = []
    steps: list[Step] = []
    first_p: list[float] = []
    while waiting:
        a, b, begins = waiting.pop(0)
        step = line_and_step(x[a:b], y[a:b], seed)
        if not math.isnan(step.p):
            first_p.append(step.p)
        if step.at is None or not step.p <= change_p:
            done.append((a, b, begins))
            continue
        middle = a + int(np.searchsorted(x[a:b], step.before_x))
        steps.append(step)
        waiting = [(a, middle, begins), (middle, b, "suspected change"), *waiting]
    return done, steps, min(first_p) if first_p else None


def _slope(x: np.ndarray, y: np.ndarray, min_readings: int) -> Slope | None:
    return theil_sen(x, y) if len(y) >= min_readings else None


def _segment(
    x: np.ndarray,
    y: np.ndarray,
    slope: Slope | None,
    rising_p: float,
    min_readings: int,
    begins: str,
) -> Segment:
    slope_per_h = low = high = p = math.nan
    since = None
    if slope is not None:
        slope_per_h, low, high = slope.slope, slope.low, slope.high
        trend = mann_kendall(y, x)
        p = trend.p
        if trend.s > 0 and p <= rising_p:
            since = _rising_since(x, y, min_readings, rising_p)
    return Segment(
        from_h=float(x[0]),
        to_h=float(x[-1]),
        readings_count=len(y),
        slope_per_h=slope_per_h,
        slope_low=low,
        slope_high=high,
        p=p,
        rising_since_h=since,
        last_cmh2o_per_lps=float(y[-1]),
        begins_with=begins,
    )


def _rising_since(
    x: np.ndarray, y: np.ndarray, min_readings: int, rising_p: float
) -> float:
    """The reading from which, with what was known then, it has been rising on.

    Walks back from the last reading while the readings up to there still rise. A flag
    that later readings did not bear out is so withdrawn.
    """
    since = float(x[-1])
    for n in range(len(y) - 1, min_readings - 1, -1):
        trend = mann_kendall(y[:n], x[:n])
        if not (trend.s > 0 and trend.p <= rising_p):
            break
        since = float(x[n - 1])
    return since


def _state(last: Segment, limit: float, near_frac: float, min_readings: int) -> str:
    if last.last_cmh2o_per_lps > limit:
        return OVER_LIMIT
    if last.last_cmh2o_per_lps >= near_frac * limit:
        return NEAR_LIMIT
    if last.readings_count < min_readings:
        return TOO_FEW_READINGS
    return STEADY if last.rising_since_h is None else RISING


def _forecast(
    x: np.ndarray,
    y: np.ndarray,
    slope: Slope | None,
    limit: float,
    min_readings: int,
) -> Forecast:
    nan = math.nan
    if y[-1] > limit:
        return Forecast(at=nan, low=nan, high=nan, refusal=ALREADY_THERE)
    return pivot_forecast(x, y, limit, fewest=min_readings, line=slope)


def _from_last(at: float, last: float) -> float | None:
    return None if math.isnan(at) else max(float(at - last), 0.0)


def _known(value: float) -> float | None:
    return None if math.isnan(value) else value


def note_of(readings_count: int, all_the_same: bool) -> str:
    """What is to be said of so many usable readings, or an empty word."""
    if readings_count == 0:
        return "no readings that can be used"
    if readings_count == 1:
        return "one reading: nothing can be said of a trend"
    if all_the_same:
        return "every reading is the same"
    if readings_count < int(CHANGE_READINGS_COUNT):
        return "too few readings to look for an unlogged change"
    return ""


def _nothing(left_out: int, seed: int) -> FilterLife:
    return FilterLife(
        state=TOO_FEW_READINGS,
        readings_count=0,
        left_out_count=left_out,
        over_range_count=0,
        last_h=None,
        last_cmh2o_per_lps=None,
        slope_per_h=None,
        slope_low=None,
        slope_high=None,
        p=None,
        rising_since_h=None,
        time_to_limit_h=None,
        time_to_limit_low_h=None,
        time_to_limit_high_h=None,
        forecast_refusal=TOO_FEW,
        suspected_change_h=None,
        change_p=None,
        change_drop_cmh2o_per_lps=None,
        suspected_changes_h=(),
        segments=(),
        seed=seed,
        note=note_of(0, False),
    )


__all__ = [
    "STATES",
    "FilterLife",
    "Segment",
    "at_reference_flow",
    "life_of",
    "with_doubts_in_place",
]
