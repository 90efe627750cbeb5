"""When will it reach the limit: a time with its interval, or a named refusal.

Two forms. The pivot takes the robust slope through the medians and is the one shown;
the Fieller form takes least squares and is the reference it is held against.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.stats import t as student

from engine.evidence.filter import (
    FORECAST_HORIZON_FRAC,
    INTERVAL_COVER_FRAC,
    TREND_READINGS_COUNT,
)
from engine.stats.trends import Slope, theil_sen

TOO_FEW = "too few readings for a forecast"
SLOPE_MAY_BE_ZERO = "the slope's lower bound is not above zero"
ALREADY_THERE = "the limit is already reached"
BEYOND_HORIZON = "further ahead than the readings reach back"
NO_SPREAD = "all readings were taken at one time"


@dataclass(frozen=True, kw_only=True)
class Forecast:
    """When the limit is reached, on the time axis of the readings.

    A refused forecast has no date; ``low`` may still be given, as the earliest the
    limit could be reached. ``high`` is infinite where it lies beyond the horizon.
    """

    at: float
    low: float
    high: float
    refusal: str = ""
    g: float = math.nan


def pivot_forecast(
    times: np.ndarray,
    values: np.ndarray,
    limit: float,
    cover: float | None = None,
    fewest: int | None = None,
    horizon_spans: float | None = None,
    line: Slope | None = None,
) -> Forecast:
    """When a rising series reaches the limit, by the Theil-Sen pivot.

    The line passes through the medians of both axes; the ends of the interval come
    from the ends of the slope's interval. No date further ahead than
    ``horizon_spans`` times what has been observed; infinity lifts that. ``line`` is
    the slope of these readings where it is known already.
    Source   closed form from SEN_1968; coverage measured, see engine/evidence
    """
    x, y = _finite(times, values)
    enough = int(TREND_READINGS_COUNT) if fewest is None else fewest
    if len(y) < enough:
        return _refused(TOO_FEW)
    line = line or theil_sen(x, y, cover)
    if line.refusal:
        return _refused(NO_SPREAD if x[0] == x[-1] else line.refusal)
    if not line.low > 0:
        return _refused(SLOPE_MAY_BE_ZERO)
    last = float(x.max())
    if line.intercept + line.slope * last >= limit:
        return _refused(ALREADY_THERE)
    spans = float(FORECAST_HORIZON_FRAC) if horizon_spans is None else horizon_spans
    horizon = last + spans * float(x.max() - x.min())
    above = limit - line.middle_y
    at, low, high = (
        line.middle_x + above / slope for slope in (line.slope, line.high, line.low)
    )
    if at > horizon:
        earliest = low if low <= horizon else math.nan
        return Forecast(
            at=math.nan, low=earliest, high=math.nan, refusal=BEYOND_HORIZON
        )
    return Forecast(at=at, low=low, high=high if high <= horizon else math.inf)


def fieller_forecast(
    times: np.ndarray,
    values: np.ndarray,
    limit: float | Sequence[float],
    cover: float | None = None,
    single: bool = False,
) -> Forecast:
    """When a straight line fitted by least squares reaches the limit.

    ``single``  False asks when the mean crosses; True when one new reading would,
                which is less certain. Several limits are readings of one unknown
                time; their own spread then counts too.
    Refuses     where the slope may be zero (g at least 1): the set of times that
                cannot be ruled out is then not an interval.
    Source      FIELLER_1954; GREENWELL_2014
    Checked     tests/published/time_to_limit.csv
    """
    x, y = _finite(times, values)
    levels = np.atleast_1d(np.asarray(limit, float))
    n, m = len(y), len(levels)
    df = n - 2 + (m - 1)
    if n < 3:
        return _refused(TOO_FEW)
    sxx = float(((x - x.mean()) ** 2).sum())
    if sxx == 0:
        return _refused(NO_SPREAD)
    slope = float(((x - x.mean()) * (y - y.mean())).sum() / sxx)
    left = y - y.mean() - slope * (x - x.mean())
    error = float((left**2).sum() + ((levels - levels.mean()) ** 2).sum()) / df
    cover = float(INTERVAL_COVER_FRAC) if cover is None else cover
    quantile = float(student.ppf((1 + cover) / 2, df))
    bent = quantile**2 * error / sxx
    g = bent / slope**2 if slope else math.inf
    if g >= 1:
        return Forecast(
            at=math.nan, low=math.nan, high=math.nan, refusal=SLOPE_MAY_BE_ZERO, g=g
        )
    above = float(levels.mean() - y.mean())
    noise = 1 / n + (1 / m if single else 0.0)
    spread = quantile * math.sqrt(error * (above**2 / sxx + (slope**2 - bent) * noise))
    ends = [
        float(x.mean() + (slope * above + sign * spread) / (slope**2 - bent))
        for sign in (-1, 1)
    ]
    return Forecast(
        at=float(x.mean() + above / slope), low=min(ends), high=max(ends), g=g
    )


def _finite(times: np.ndarray, values: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    x, y = np.asarray(times, float), np.asarray(values, float)
    good = np.isfinite(x) & np.isfinite(y)
    return x[good], y[good]


def _refused(why: str) -> Forecast:
    return Forecast(at=math.nan, low=math.nan, high=math.nan, refusal=why)
