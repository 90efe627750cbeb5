"""How sure one proportion, one rate or one difference is.

Everything takes arrays (of months, units, indicators) and gives arrays. Counts of
clustered treatments are divided by a design effect before the interval is drawn.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from engine.evidence.filter import INTERVAL_COVER_FRAC
from engine.evidence.series import WIDEST_INTERVAL_RATIO

Interval = tuple[np.ndarray, np.ndarray]


@dataclass(frozen=True, kw_only=True)
class Ratio:
    """One rate over another, with its interval and the p of no difference."""

    ratio: float
    low: float
    high: float
    p: float


def wilson(
    count: ArrayLike,
    n: ArrayLike,
    cover: float | None = None,
    design_effect: ArrayLike = 1.0,
) -> Interval:
    """Score interval of a proportion; NaN where n is 0.

    Source   Wilson 1927, as in Newcombe 1998, method 3
    Checked  tests/published/review_methods.csv
    """
    x, total = _effective(count, n, design_effect)
    z2 = _z(cover) ** 2
    with np.errstate(invalid="ignore", divide="ignore"):
        p = x / total
        middle = p + z2 / (2 * total)
        half = np.sqrt(z2) * np.sqrt(p * (1 - p) / total + z2 / (4 * total**2))
        low, high = (middle + sign * half for sign in (-1, 1))
        bottom = 1 + z2 / total
        # The ends are exact where nothing or everything was counted.
        low = np.where(x <= 0, 0.0, low / bottom)
        high = np.where(x >= total, 1.0, high / bottom)
    return _where_any(total, low, high)


def clopper_pearson(
    count: ArrayLike,
    n: ArrayLike,
    cover: float | None = None,
    design_effect: ArrayLike = 1.0,
) -> Interval:
    """Exact interval of a proportion: never covers less than it says.

    Source   Clopper and Pearson 1934, by beta quantiles
    Checked  tests/published/review_methods.csv
    """
    x, total = _effective(count, n, design_effect)
    tail = (1 - _cover(cover)) / 2
    with np.errstate(invalid="ignore"):
        low = special.betaincinv(np.maximum(x, 1e-300), total - x + 1, tail)
        high = special.betaincinv(x + 1, np.maximum(total - x, 1e-300), 1 - tail)
        low = np.where(x <= 0, 0.0, low)
        high = np.where(x >= total, 1.0, high)
    return _where_any(total, low, high)


def none_found_upper(n: ArrayLike, cover: float | None = None) -> np.ndarray:
    """The most a proportion can be where none of ``n`` was found, one-sided."""
    with np.errstate(divide="ignore", invalid="ignore"):
        return 1 - (1 - _cover(cover)) ** (1 / np.asarray(n, float))


def newcombe(
    count_1: ArrayLike,
    n_1: ArrayLike,
    count_2: ArrayLike,
    n_2: ArrayLike,
    cover: float | None = None,
    design_effect_1: ArrayLike = 1.0,
    design_effect_2: ArrayLike = 1.0,
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """First proportion minus the second, with its hybrid score interval.

    Source   Newcombe 1998, Stat Med 17:873, method 10
    Checked  tests/published/review_methods.csv
    """
    x1, x2, t1, t2 = (np.asarray(v, float) for v in (count_1, count_2, n_1, n_2))
    with np.errstate(invalid="ignore", divide="ignore"):
        p1, p2 = x1 / t1, x2 / t2
    l1, u1 = wilson(x1, t1, cover, design_effect_1)
    l2, u2 = wilson(x2, t2, cover, design_effect_2)
    difference = p1 - p2
    low = difference - np.sqrt((p1 - l1) ** 2 + (u2 - p2) ** 2)
    high = difference + np.sqrt((u1 - p1) ** 2 + (p2 - l2) ** 2)
    return difference, low, high


def poisson_exact(
    count: ArrayLike, exposure: ArrayLike = 1.0, cover: float | None = None
) -> Interval:
    """Exact interval of a count per exposure.

    Source   Garwood 1936, by chi-square quantiles
    Checked  tests/published/review_methods.csv
    """
    x, at_risk = np.asarray(count, float), np.asarray(exposure, float)
    tail = (1 - _cover(cover)) / 2
    with np.errstate(divide="ignore", invalid="ignore"):
        low = np.where(x > 0, special.gammaincinv(np.maximum(x, 1e-300), tail), 0.0)
        high = special.gammaincinv(x + 1, 1 - tail)
        low = np.where(np.isnan(x), np.nan, low)
        return low / at_risk, high / at_risk


def poisson_ratio(
    count_1: int,
    exposure_1: float,
    count_2: int,
    exposure_2: float,
    cover: float | None = None,
) -> Ratio:
    """The first rate over the second, given their sum: an exact binomial.

    Ends are 0 or infinite where one side has no events; no ratio where one side was
    never exposed.
    """
    from scipy.stats import binomtest

    total = count_1 + count_2
    if total == 0 or exposure_1 <= 0 or exposure_2 <= 0:
        return Ratio(ratio=math.nan, low=0.0, high=math.inf, p=1.0)
    share = exposure_1 / (exposure_1 + exposure_2)
    low, high = clopper_pearson(count_1, total, cover)
    with np.errstate(divide="ignore"):
        odds = [float(v / np.float64(1 - v)) for v in (low, high)]
    rates = exposure_2 / exposure_1
    alone = math.inf if count_2 == 0 else count_1 / count_2
    return Ratio(
        ratio=alone * rates,
        low=odds[0] * rates,
        high=odds[1] * rates,
        p=float(binomtest(count_1, total, share).pvalue),
    )


def design_effect(
    clusters: ArrayLike,
    n: ArrayLike,
    count: ArrayLike,
    squares_of_n: ArrayLike,
    squares_of_count_over_n: ArrayLike,
) -> np.ndarray:
    """How much less a treatment tells because patients come back: at least 1.

    From sums over patients of n, x, n^2 and x^2/n, so that no row of any patient is
    needed: intraclass correlation by one-way analysis of variance, then
    1 + (m - 1) rho with m the size of the cluster a treatment lies in on average.
    1 where every patient has one treatment or all answers agree. All treatments of a
    single patient tell as much as one.
    """
    k, total, x = (np.asarray(v, float) for v in (clusters, n, count))
    n2 = np.asarray(squares_of_n, float)
    x2 = np.asarray(squares_of_count_over_n, float)
    with np.errstate(divide="ignore", invalid="ignore"):
        between = (x2 - x**2 / total) / (k - 1)
        within = (x - x2) / (total - k)
        m0 = (total - n2 / total) / (k - 1)
        rho = (between - within) / (between + (m0 - 1) * within)
        effect = 1 + (n2 / total - 1) * np.clip(rho, 0.0, 1.0)
    effect = np.where(np.isfinite(effect), np.maximum(effect, 1.0), 1.0)
    return np.where((k == 1) & (total > 1), total, effect)


def corrected_share(flagged: int, n: int, sensitivity: float, specificity: float):
    """The share that is truly so where the flag is imperfect; None where it cannot be.

    Source   Rogan and Gladen 1978
    Checked  tests/published/review_methods.csv. A result outside 0 to 1 is refused,
             never cut to fit.
    """
    apart = sensitivity + specificity - 1
    if n == 0 or apart <= 0:
        return None
    share = (flagged / n + specificity - 1) / apart
    return share if 0 <= share <= 1 else None


def may_be_shown(count: int, exposure_count: int, fewest: int) -> bool:
    """Whether a rate is steady enough to print: enough counted on both sides, and an
    interval not too wide beside the rate.

    Source   presentation standards for rates, NCHS (the rule read)
    """
    if count < fewest or exposure_count < fewest:
        return False
    low, high = poisson_exact(count)
    return float((high - low) / count) <= float(WIDEST_INTERVAL_RATIO)


def _effective(
    count: ArrayLike, n: ArrayLike, effect: ArrayLike
) -> tuple[np.ndarray, np.ndarray]:
    d = np.asarray(effect, float)
    return np.asarray(count, float) / d, np.asarray(n, float) / d


def _where_any(n: np.ndarray, low: np.ndarray, high: np.ndarray) -> Interval:
    return np.where(n > 0, low, np.nan), np.where(n > 0, high, np.nan)


def _cover(cover: float | None) -> float:
    return float(INTERVAL_COVER_FRAC) if cover is None else cover


def _z(cover: float | None) -> float:
    return float(special.ndtri((1 + _cover(cover)) / 2))
