"""Charts over time: is this month unusual, and is it creeping?

Limits come from a baseline that is frozen once and dated; they are never worked out
again from the months they judge. For small months the limits are exact, because the
usual three-sigma lines then cry out several times too often.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike
from scipy import stats

from engine.evidence.review import RUN_POINTS_COUNT
from engine.evidence.series import (
    LEFT_TAIL_FRAC,
    RANGE_TO_SD_RATIO,
    RUN_CROSSINGS_FRAC,
    SIGMAS_RATIO,
    TIME_POWER_RATIO,
)


@dataclass(frozen=True, kw_only=True)
class Limits:
    """Centre line and limits, one of each a point; NaN where none can be drawn."""

    centre: np.ndarray
    low: np.ndarray
    high: np.ndarray
    outside: np.ndarray  # true where the point lies beyond a limit


@dataclass(frozen=True, kw_only=True)
class RunRules:
    """Whether a series shows a shift: a long run or too few crossings.

    ``signal`` is None where there are too few points to say. ``false_alarm_frac`` is
    how often a series with no change at all would signal.
    """

    useful_count: int
    longest_run: int
    run_limit: int
    crossings: int
    crossings_limit: int
    signal: bool | None
    false_alarm_frac: float


def run_rules(
    values: ArrayLike, centre: float | None = None, fixed_before: bool = True
) -> RunRules:
    """The two rules, about the median of the series or a centre line given.

    ``fixed_before``  false where the centre comes from these very points: their false
                      alarms are then nearer those about their own median
    Points on the line and missing points are passed over.
    Source   Anhoej and Olesen 2014, PLoS ONE 9:e113825
    Checked  tests/published/review_methods.csv
    """
    y = np.asarray(values, float)
    y = y[np.isfinite(y)]
    centre = None if centre is None or math.isnan(centre) else centre
    line = (float(np.median(y)) if len(y) else math.nan) if centre is None else centre
    side = np.sign(y - line)
    side = side[side != 0]
    n = len(side)
    run_limit, crossings_limit = run_limits(n)
    turns = np.flatnonzero(np.diff(side) != 0)
    ends = np.concatenate([[-1], turns, [n - 1]])
    longest = int(np.max(np.diff(ends))) if n else 0
    own = centre is None or not fixed_before
    speaks = n >= int(RUN_POINTS_COUNT)
    signal = longest > run_limit or len(turns) < crossings_limit
    return RunRules(
        useful_count=n,
        longest_run=longest,
        run_limit=run_limit,
        crossings=len(turns),
        crossings_limit=crossings_limit,
        signal=bool(signal) if speaks else None,
        false_alarm_frac=run_false_alarm(n, own) if speaks else math.nan,
    )


@lru_cache(maxsize=1024)
def run_limits(n: int) -> tuple[int, int]:
    """The longest run and the fewest crossings that are still unremarkable."""
    if n < 2:
        return 0, 0
    fewest = stats.binom.ppf(float(RUN_CROSSINGS_FRAC), n - 1, 0.5)
    return round(math.log2(n) + 3), int(fewest)


@lru_cache(maxsize=1024)
def run_false_alarm(n: int, own_median: bool) -> float:
    """How often the two rules signal on ``n`` useful points without any change.

    Exact: the chance of every arrangement of points above and below is followed point
    by point, by the side and length of the present run, the crossings so far and how
    many lie above. ``own_median`` true where half lie above by construction.
    """
    run_limit, fewest = run_limits(n)
    quiet = _quiet_chance(n, run_limit, fewest)
    if not own_median:
        return 1 - float(quiet.sum())
    return 1 - float(quiet[n // 2] / stats.binom.pmf(n // 2, n, 0.5))


def _quiet_chance(n: int, run_limit: int, fewest: int) -> np.ndarray:
    """Chance of no signal, by how many points lie above the line (n + 1 values)."""
    # [side: below, above][length of the run][crossings, at most fewest][points above]
    chance = np.zeros((2, run_limit + 1, fewest + 1, n + 1))
    chance[0, 1, 0, 0] = chance[1, 1, 0, 1] = 0.5
    for _ in range(n - 1):
        after = np.zeros_like(chance)
        after[0, 2:, :, :] = chance[0, 1:-1, :, :] / 2
        after[1, 2:, :, 1:] = chance[1, 1:-1, :, :-1] / 2
        turned = chance.sum(axis=1) / 2
        crossed = np.zeros_like(turned)
        crossed[:, 1:, :] = turned[:, :-1, :]
        crossed[:, -1, :] += turned[:, -1, :]
        after[0, 1, :, :] += crossed[1]
        after[1, 1, :, 1:] += crossed[0][:, :-1]
        chance = after
    return chance[:, :, fewest, :].sum(axis=(0, 1))


def exact_p_limits(
    count: ArrayLike, n: ArrayLike, centre: float, tail: float | None = None
) -> Limits:
    """Limits that a month of ``n`` passes with the stated chance at most, exactly.

    ``centre``  the frozen baseline proportion
    """
    x, total = np.asarray(count, float), np.floor(np.asarray(n, float) + 1e-9)
    alpha = float(LEFT_TAIL_FRAC) if tail is None else tail
    # The largest count still inside; the next one has a tail of at most alpha.
    most = stats.binom.isf(alpha, total, centre)
    fewest = stats.binom.ppf(alpha, total, centre)
    fewest = np.where(
        stats.binom.cdf(fewest, total, centre) <= alpha, fewest + 1, fewest
    )
    return _limits(x, total, centre, fewest, most)


def exact_u_limits(
    count: ArrayLike, exposure: ArrayLike, centre: float, tail: float | None = None
) -> Limits:
    """The same for a count per exposure: exact Poisson limits."""
    x, at_risk = np.asarray(count, float), np.asarray(exposure, float)
    alpha = float(LEFT_TAIL_FRAC) if tail is None else tail
    most = stats.poisson.isf(alpha, centre * at_risk)
    fewest = stats.poisson.ppf(alpha, centre * at_risk)
    low_tail = stats.poisson.cdf(fewest, centre * at_risk)
    fewest = np.where(low_tail <= alpha, fewest + 1, fewest)
    return _limits(x, at_risk, centre, fewest, most)


def _limits(
    x: np.ndarray, n: np.ndarray, centre: float, fewest: np.ndarray, most: np.ndarray
) -> Limits:
    with np.errstate(divide="ignore", invalid="ignore"):
        low, high = (np.where(n > 0, edge / n, np.nan) for edge in (fewest, most))
    return Limits(
        centre=np.full(n.shape, centre),
        low=low,
        high=high,
        outside=((x < fewest) | (x > most)) & (n > 0),
    )


def p_limits(count: ArrayLike, n: ArrayLike, centre: float | None = None) -> Limits:
    """Three-sigma limits of proportions; the textbook chart, for large months.

    Source   NIST/SEMATECH e-Handbook 6.3.3.2
    """
    x, total = np.asarray(count, float), np.asarray(n, float)
    p = float(x.sum() / total.sum()) if centre is None else centre
    half = float(SIGMAS_RATIO) * np.sqrt(p * (1 - p) / total)
    low, high = np.maximum(p - half, 0), np.minimum(p + half, 1)
    rate = x / total
    return Limits(
        centre=np.full(total.shape, p),
        low=low,
        high=high,
        outside=(rate < low) | (rate > high),
    )


def u_limits(
    count: ArrayLike, exposure: ArrayLike, centre: float | None = None
) -> Limits:
    """Three-sigma limits of counts per exposure; exposure 1 gives a c chart."""
    x, at_risk = np.asarray(count, float), np.asarray(exposure, float)
    u = float(x.sum() / at_risk.sum()) if centre is None else centre
    half = float(SIGMAS_RATIO) * np.sqrt(u / at_risk)
    low, high, rate = np.maximum(u - half, 0), u + half, x / at_risk
    return Limits(
        centre=np.full(at_risk.shape, u),
        low=low,
        high=high,
        outside=(rate < low) | (rate > high),
    )


@dataclass(frozen=True, kw_only=True)
class Widened:
    """Limits widened by what varies between months beyond chance."""

    limits: Limits
    sigma_z: float
    over_dispersion_p: float


def laney_p_limits(count: ArrayLike, n: ArrayLike) -> Widened:
    """P' limits: the spread of the standardised points sets the width.

    For months so large that a plain p chart flags most of them. ``sigma_z`` belongs
    on the chart: limits so widened also hide real change from month to month.
    Source   Laney 2002, Quality Engineering 14:531 (from memory)
    Checked  tests/published/review_methods.csv
    """
    x, total = np.asarray(count, float), np.asarray(n, float)
    p = float(x.sum() / total.sum())
    sigma = np.sqrt(p * (1 - p) / total)
    rate = x / total
    z = (rate - p) / sigma
    sigma_z = float(np.mean(np.abs(np.diff(z)))) / float(RANGE_TO_SD_RATIO)
    half = float(SIGMAS_RATIO) * sigma * sigma_z
    limits = Limits(
        centre=np.full(total.shape, p),
        low=np.maximum(p - half, 0),
        high=np.minimum(p + half, 1),
        outside=np.abs(rate - p) > half,
    )
    spread = float(stats.chi2.sf(float(np.sum(z**2)), len(x) - 1))
    return Widened(limits=limits, sigma_z=sigma_z, over_dispersion_p=spread)


@dataclass(frozen=True, kw_only=True)
class Individuals:
    """An individuals chart with its mean moving range."""

    limits: Limits
    moving_range: float
    moving_range_limit: float


def xmr_limits(values: ArrayLike, screened: bool = False) -> Individuals:
    """Limits of single values from their moving ranges.

    ``screened``  moving ranges beyond their own limit are left out once (Nelson 1982)
    Source        NIST/SEMATECH e-Handbook 6.3.2.2
    """
    x = np.asarray(values, float)
    ranges = np.abs(np.diff(x))
    mean_range = float(np.mean(ranges))
    # The upper limit of a moving range: 1 + 3 d3 / d2 for pairs.
    range_limit = _RANGE_LIMIT * mean_range
    if screened:
        mean_range = float(np.mean(ranges[ranges <= range_limit]))
    half = float(SIGMAS_RATIO) * mean_range / float(RANGE_TO_SD_RATIO)
    middle = float(np.mean(x))
    limits = Limits(
        centre=np.full(x.shape, middle),
        low=np.full(x.shape, middle - half),
        high=np.full(x.shape, middle + half),
        outside=np.abs(x - middle) > half,
    )
    return Individuals(
        limits=limits, moving_range=mean_range, moving_range_limit=range_limit
    )


# Three sigmas of a range of two, by the normal: d2 = 2/sqrt(pi), d3^2 = 2 - d2^2.
_D2 = 2 / math.sqrt(math.pi)
_RANGE_LIMIT = 1 + 3 * math.sqrt(2 - _D2**2) / _D2


@dataclass(frozen=True, kw_only=True)
class Gaps:
    """Limits for the distance between rare events: up is better."""

    mean: float
    low: float
    high: float


def g_limits(gaps: ArrayLike, exact: bool = True, tail: float | None = None) -> Gaps:
    """Treatments between rare events.

    ``exact``  geometric quantiles; otherwise the textbook's three sigmas, which signal
               upward some ten times too often and never downward
    """
    mean = float(np.mean(np.asarray(gaps, float)))
    if exact and not mean > 1:  # not rare: events come as often as treatments
        return Gaps(mean=mean, low=math.nan, high=math.nan)
    if not exact:
        half = float(SIGMAS_RATIO) * math.sqrt(mean * (mean + 1))
        return Gaps(mean=mean, low=0.0, high=mean + half)
    alpha = float(LEFT_TAIL_FRAC) if tail is None else tail
    return Gaps(
        mean=mean,
        low=float(stats.geom.ppf(alpha, 1 / mean)),
        high=float(stats.geom.isf(alpha, 1 / mean)),
    )


def t_limits(hours: ArrayLike) -> Gaps:
    """Hours between rare events, made nearly normal by the power 1/3.6.

    Gaps of zero have no place on this chart: use ``g_limits``.
    Source   Nelson 1994, J Quality Technology 26:166
    """
    y = np.asarray(hours, float) ** (1 / float(TIME_POWER_RATIO))
    power = float(TIME_POWER_RATIO)
    limits = xmr_limits(y).limits
    low = max(float(limits.low[0]), 0.0)
    return Gaps(
        mean=float(np.mean(y)) ** power,
        low=low**power,
        high=float(limits.high[0]) ** power,
    )
