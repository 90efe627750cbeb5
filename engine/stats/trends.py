"""Is it rising, and how fast: Mann-Kendall and Theil-Sen on real times.

Readings come at uneven times, so a slope is always per unit of time, never per
reading. A missing reading is left out and counted; a reading beyond the instrument's
range is given as infinity: it ranks above all others and takes no part in a slope.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from itertools import product

import numpy as np
from scipy.special import ndtr, ndtri

from engine.evidence.filter import (
    EXACT_TREND_COUNT,
    INTERVAL_COVER_FRAC,
    PAIRWISE_READINGS_COUNT,
)

INTERPOLATED, WHOLE = "interpolated", "whole"


@dataclass(frozen=True, kw_only=True)
class Trend:
    """Mann-Kendall: S counts pairs that rise less pairs that fall.

    ``p`` is the two-sided value to use: exact where the series is short, the normal
    approximation otherwise; both are kept where both were worked out. ``tau_a``
    divides S by all pairs, ``tau_b`` only by pairs without ties.
    """

    readings_count: int
    missing_count: int
    s: int
    var_s: float
    tau_a: float
    tau_b: float
    z: float
    p: float
    p_rising: float
    p_falling: float
    p_normal: float
    p_exact: float | None
    smallest_p: float
    refusal: str = ""


@dataclass(frozen=True, kw_only=True)
class Slope:
    """Theil-Sen: the median of all pairwise slopes, and its interval.

    ``intercept`` is that of the line through the medians of both axes;
    ``intercept_joint`` the median of what is left after the slope. An end is infinite
    where the readings are too few to bound it.
    """

    readings_count: int
    slope: float
    low: float
    high: float
    intercept: float
    intercept_joint: float
    middle_x: float
    middle_y: float
    refusal: str = ""


def mann_kendall(
    values: np.ndarray,
    times: np.ndarray | None = None,
    exact_up_to: int | None = None,
) -> Trend:
    """Whether the readings rise or fall over time.

    Shapes   values of n, times of n or none (then the order given); NaN left out,
             infinity ranks above every number.
    Exact    for ``exact_up_to`` readings or fewer, ties among values and times
             included; beyond that normal, tie-corrected, with continuity correction.
    Source   Mann 1945; Kendall 1975 (exact null, ties on both axes); GILBERT_1987.
    Checked  tests/published/trend_*.csv and the reference libraries
    """
    x, y, missing = _usable(values, times)
    n = len(y)
    if n < 2:
        return _no_trend(n, missing, "one reading" if n else "no readings")
    s = int(kendall_steps(y, x).sum())
    groups_y, groups_x = _groups(y), _groups(x)
    var = _variance(n, groups_y, groups_x)
    pairs = n * (n - 1) / 2
    free_y = pairs - sum(t * (t - 1) / 2 for t in groups_y)
    free_x = pairs - sum(t * (t - 1) / 2 for t in groups_x)
    if free_y == 0 or free_x == 0:
        what = "all readings are equal" if free_y == 0 else "all times are equal"
        return _no_trend(n, missing, what, p=1.0)
    z = (s - np.sign(s)) / math.sqrt(var)
    p_normal = float(2 * ndtr(-abs(z)))
    limit = int(EXACT_TREND_COUNT) if exact_up_to is None else exact_up_to
    exact = n <= limit
    rising, falling, two, least = _exact_p(s, n, groups_y, groups_x, exact)
    return Trend(
        readings_count=n,
        missing_count=missing,
        s=s,
        var_s=var,
        tau_a=s / pairs,
        tau_b=s / math.sqrt(free_y * free_x),
        z=float(z),
        p=two if exact else p_normal,
        p_rising=rising if exact else _normal_tail(s, var),
        p_falling=falling if exact else _normal_tail(-s, var),
        p_normal=p_normal,
        p_exact=two if exact else None,
        smallest_p=least,
    )


def theil_sen(
    times: np.ndarray,
    values: np.ndarray,
    cover: float | None = None,
    ranks: str = INTERPOLATED,
) -> Slope:
    """How fast the readings rise, per unit of time.

    Shapes   times and values of n; NaN and infinity left out.
    Ranks    of the interval's ends among the sorted slopes: ``interpolated`` between
             neighbours, or ``whole`` as Sen's worked example has them.
    Refuses  fewer than two different times; more readings than can be paired.
    Source   SEN_1968; GILBERT_1987 for the interval; the variance allows for ties.
    Checked  tests/published/trend_*.csv
    """
    if ranks not in {INTERPOLATED, WHOLE}:
        raise ValueError(f"ranks must be {INTERPOLATED} or {WHOLE}; got {ranks}")
    x, y, _ = _usable(values, times)
    x, y = x[np.isfinite(y)], y[np.isfinite(y)]
    n = len(y)
    if n < 2 or x[0] == x[-1]:
        return _no_slope(n, "fewer than two readings at different times")
    if n > int(PAIRWISE_READINGS_COUNT):
        return _no_slope(n, f"more than {int(PAIRWISE_READINGS_COUNT):,} readings")
    slopes = pairwise_slopes(x, y)
    slope = float(np.median(slopes))
    var = _variance(n, _groups(y), _groups(x))
    cover = float(INTERVAL_COVER_FRAC) if cover is None else cover
    low, high = _ends(slopes, float(ndtri((1 + cover) / 2)) * math.sqrt(var), ranks)
    middle_x, middle_y = float(np.median(x)), float(np.median(y))
    return Slope(
        readings_count=n,
        slope=slope,
        low=low,
        high=high,
        intercept=middle_y - slope * middle_x,
        intercept_joint=float(np.median(y - slope * x)),
        middle_x=middle_x,
        middle_y=middle_y,
    )


def pairwise_slopes(times: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Slopes of all pairs of readings at different times, sorted."""
    x, y = np.asarray(times, float), np.asarray(values, float)
    first, second = np.triu_indices(len(x), 1)
    run = x[second] - x[first]
    apart = run != 0
    rise = (y[second] - y[first])[apart]
    return np.sort(rise / run[apart])


def kendall_steps(values: np.ndarray, times: np.ndarray) -> np.ndarray:
    """What each reading adds to S, given those before it; S is their running sum.

    Shapes   values and times of n, sorted by time; pairs tied on either axis add 0.
    """
    ranks = np.unique(values, return_inverse=True)[1].astype(np.int64)
    moments = np.unique(times, return_inverse=True)[1].astype(np.int64)
    signs = np.sign(ranks[None, :] - ranks[:, None])
    signs *= np.sign(moments[None, :] - moments[:, None])
    return np.triu(signs, 1).sum(axis=0)


def s_distribution(
    n: int,
    groups_y: tuple[int, ...] | None = None,
    groups_x: tuple[int, ...] | None = None,
) -> tuple[np.ndarray, np.ndarray]:
    """Every value S can take when order is chance alone, and its probability.

    Shapes   groups are the sizes of the runs of equal values (``y``) and equal times
             (``x``), lowest first, adding to n; none means all differ.
    Source   Kendall, Rank Correlation Methods, 1975 (from memory): without tied times
             the count of inversions of a multiset; otherwise time by time.
    """
    whole_y = groups_y or (1,) * n
    whole_x = groups_x or (1,) * n
    if sum(whole_y) != n or sum(whole_x) != n:
        raise ValueError(f"groups must add to {n}; got {whole_y} and {whole_x}")
    if max(whole_x, default=1) == 1:
        weights = _inversions(tuple(sorted(whole_y)))
        top = n * (n - 1) // 2 - sum(t * (t - 1) // 2 for t in whole_y)
        scores = top - 2 * np.arange(len(weights))
        return scores[::-1], weights[::-1] / weights.sum()
    table = _grouped(whole_y, whole_x)
    scores = np.array(sorted(table))
    weights = np.array([table[score] for score in scores.tolist()])
    return scores, weights / weights.sum()


def _usable(
    values: np.ndarray, times: np.ndarray | None
) -> tuple[np.ndarray, np.ndarray, int]:
    y = np.asarray(values, float)
    x = np.arange(len(y), dtype=float) if times is None else np.asarray(times, float)
    if len(x) != len(y):
        raise ValueError(f"times must be as many as values; got {len(x)} and {len(y)}")
    known = ~np.isnan(y) & ~np.isnan(x)
    order = np.argsort(x[known], kind="stable")
    return x[known][order], y[known][order], int((~known).sum())


def _groups(values: np.ndarray) -> tuple[int, ...]:
    """Sizes of the runs of equal values, lowest value first."""
    return tuple(np.unique(values, return_counts=True)[1].tolist())


def _variance(n: int, groups_y: tuple[int, ...], groups_x: tuple[int, ...]) -> float:
    """Variance of S with ties on both axes; Kendall 1975, from memory."""

    def pairs(groups: tuple[int, ...]) -> int:
        return sum(t * (t - 1) for t in groups)

    def triples(groups: tuple[int, ...]) -> int:
        return sum(t * (t - 1) * (t - 2) for t in groups)

    def loss(groups: tuple[int, ...]) -> int:
        return sum(t * (t - 1) * (2 * t + 5) for t in groups)

    var = (n * (n - 1) * (2 * n + 5) - loss(groups_y) - loss(groups_x)) / 18
    var += pairs(groups_y) * pairs(groups_x) / (2 * n * (n - 1))
    if n > 2:
        both = triples(groups_y) * triples(groups_x)
        var += both / (9 * n * (n - 1) * (n - 2))
    return var


_chances = lru_cache(maxsize=1024)(s_distribution)


def _exact_p(
    s: int, n: int, groups_y: tuple[int, ...], groups_x: tuple[int, ...], exact: bool
) -> tuple[float, float, float, float]:
    if not exact:
        return math.nan, math.nan, math.nan, 0.0
    scores, chances = _chances(n, groups_y, groups_x)
    rising = float(chances[scores >= s].sum())
    falling = float(chances[scores <= s].sum())
    two = float(chances[np.abs(scores) >= abs(s)].sum())
    least = float(chances[np.abs(scores) == np.abs(scores).max()].sum())
    return min(rising, 1.0), min(falling, 1.0), min(two, 1.0), least


def _normal_tail(s: int, var: float) -> float:
    return float(ndtr((1 - s) / math.sqrt(var)))


def _inversions(groups: tuple[int, ...]) -> np.ndarray:
    """How many arrangements of a multiset have each number of inversions."""
    counts = np.array([1.0])
    placed = 0
    for size in groups:
        for k in range(1, size + 1):
            placed += 1
            counts = np.convolve(counts, np.ones(placed))  # times (1 - q^placed)
            counts = _divided(counts, k)  # over (1 - q^k), both over (1 - q)
    return counts


def _divided(counts: np.ndarray, k: int) -> np.ndarray:
    quotient = np.zeros(len(counts) - k + 1)
    rest = counts.copy()
    for i in range(len(quotient)):
        quotient[i] = rest[i]
        rest[i : i + k] -= quotient[i]
    return quotient


@lru_cache(maxsize=4096)
def _grouped(left: tuple[int, ...], times: tuple[int, ...]) -> dict[int, float]:
    """S over arrangements in which several readings share one time.

    The readings of the first time are chosen from what is left of each value; each
    choice is weighted by the ways to make it.
    """
    if len(times) <= 1:
        return {0: 1.0}
    table: dict[int, float] = {}
    for taken in product(*(range(count + 1) for count in left)):
        if sum(taken) != times[0]:
            continue
        rest = tuple(c - t for c, t in zip(left, taken, strict=True))
        ways = math.prod(math.comb(c, t) for c, t in zip(left, taken, strict=True))
        gain = sum(
            t * (sum(rest[i + 1 :]) - sum(rest[:i])) for i, t in enumerate(taken)
        )
        for score, weight in _grouped(rest, times[1:]).items():
            table[score + gain] = table.get(score + gain, 0.0) + ways * weight
    return table


def _ends(slopes: np.ndarray, spread: float, ranks: str) -> tuple[float, float]:
    """Ends of the interval: the slopes ``spread`` ranks apart about the middle."""
    n = len(slopes)
    if ranks == WHOLE:
        below, above = round((n - spread) / 2) - 1, round((n + spread) / 2)
        return float(slopes[max(below, 0)]), float(slopes[min(above, n - 1)])
    low_rank, high_rank = (n - spread) / 2, (n + spread) / 2 + 1
    if low_rank < 1:
        return -math.inf, math.inf
    places = np.arange(1, n + 1)
    low, high = np.interp([low_rank, high_rank], places, slopes)
    return float(low), float(high)


def _no_trend(n: int, missing: int, why: str, p: float = math.nan) -> Trend:
    return Trend(
        readings_count=n,
        missing_count=missing,
        s=0,
        var_s=0.0,
        tau_a=0.0 if p == 1.0 else math.nan,
        tau_b=math.nan,
        z=0.0 if p == 1.0 else math.nan,
        p=p,
        p_rising=p,
        p_falling=p,
        p_normal=p,
        p_exact=p if p == 1.0 else None,
        smallest_p=1.0,
        refusal=why,
    )


def _no_slope(n: int, why: str) -> Slope:
    nan = math.nan
    return Slope(
        readings_count=n,
        slope=nan,
        low=nan,
        high=nan,
        intercept=nan,
        intercept_joint=nan,
        middle_x=nan,
        middle_y=nan,
        refusal=why,
    )
