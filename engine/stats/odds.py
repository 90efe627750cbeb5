"""Odds ratios of two-by-two tables, one or several strata, exact given the margins."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from scipy.optimize import brentq
from scipy.stats import chi2, hypergeom

from engine.evidence.filter import INTERVAL_COVER_FRAC

NO_INFORMATION = "the tables hold no information on the ratio"


@dataclass(frozen=True, kw_only=True)
class Ratio:
    """An odds ratio (or rate ratio) with its interval and how it was got.

    ``low`` is 0 and ``high`` infinite where the data do not bound it. ``smallest_p``
    is the smallest two-sided p these counts could have given at all.
    """

    ratio: float
    low: float
    high: float
    p: float
    p_one_sided: float = math.nan  # of a ratio as high as this or higher
    p_less: float = math.nan  # of a ratio as low as this or lower
    smallest_p: float = 0.0
    statistic: float = math.nan
    statistic_corrected: float = math.nan
    sets_used: int = 0
    sets_dropped: int = 0
    refusal: str = ""


def odds_ratio(
    table: Sequence[Sequence[int]],
    cover: float | None = None,
    kind: str = "conditional",
) -> Ratio:
    """Odds ratio of one two-by-two table, rows exposed or not, columns case or not.

    ``conditional``  maximum likelihood given the margins, exact interval, Fisher's p
    ``sample``       ad / bc
    """
    done = exact_common_odds_ratio([table], cover)
    if kind == "sample" and not done.refusal:
        (a, b), (c, d) = table
        ratio = a * d / (b * c) if b * c else math.inf
        return Ratio(**{**done.__dict__, "ratio": ratio})
    return done


def exact_common_odds_ratio(
    tables: Sequence[Sequence[Sequence[int]]], cover: float | None = None
) -> Ratio:
    """One odds ratio for several strata, exact given all margins.

    The first cells' sum is followed through the product of the strata's
    hypergeometric laws. Strata with an empty margin say nothing and are counted.
    Source   BRESLOW_1980 section 4.4; AGRESTI_1990; root-finding to 1e-12
    Checked  tests/published/matched.csv
    """
    kept = [np.asarray(t, int) for t in tables if _informative(np.asarray(t, int))]
    dropped = len(tables) - len(kept)
    if not kept:
        nan = math.nan
        return Ratio(
            ratio=nan,
            low=0.0,
            high=math.inf,
            p=1.0,
            sets_dropped=dropped,
            refusal=NO_INFORMATION,
        )
    first, log_weights = _sum_law(kept)
    seen = sum(int(t[0, 0]) for t in kept)
    support = first + np.arange(len(log_weights))
    chances = _tilted(log_weights, support, 0.0)
    tail = (1 - cover_of(cover)) / 2
    return Ratio(
        ratio=_conditional_ratio(log_weights, support, seen),
        low=_exact_end(log_weights, support, seen, tail, upper=False),
        high=_exact_end(log_weights, support, seen, tail, upper=True),
        p=_two_sided(chances, support, seen),
        p_one_sided=float(chances[support >= seen].sum()),
        p_less=float(chances[support <= seen].sum()),
        smallest_p=float(chances.min()),
        sets_used=len(kept),
        sets_dropped=dropped,
    )


def mantel_haenszel(
    tables: Sequence[Sequence[Sequence[int]]], cover: float | None = None
) -> Ratio:
    """The Mantel-Haenszel common odds ratio, its test and its interval.

    ``statistic_corrected`` and ``p`` carry the continuity correction; the interval
    is that of Robins, Breslow and Greenland (from memory).
    """
    stack = np.asarray([t for t in tables if np.asarray(t).sum() > 0], float).reshape(
        -1, 2, 2
    )
    a, b, c, d = stack[:, 0, 0], stack[:, 0, 1], stack[:, 1, 0], stack[:, 1, 1]
    n = a + b + c + d
    informative = np.array([_informative(t) for t in stack.astype(int)])
    agree, differ = a * d / n, b * c / n
    row, column = (a + b), (a + c)
    expected = row * column / n
    with np.errstate(invalid="ignore", divide="ignore"):
        var = np.nan_to_num(
            row * (c + d) * column * (b + d) / (n**2 * (n - 1)), nan=0.0, posinf=0.0
        )
    if not informative.any() or var.sum() == 0:
        return exact_common_odds_ratio(tables, cover)
    away = abs(float((a - expected).sum()))
    statistic = away**2 / var.sum()
    corrected = max(away - 0.5, 0.0) ** 2 / var.sum()
    ratio = agree.sum() / differ.sum() if differ.sum() else math.inf
    low, high = _robins_ends(agree, differ, (a + d) / n, (b + c) / n, ratio, cover)
    return Ratio(
        ratio=float(ratio),
        low=low,
        high=high,
        p=float(chi2.sf(corrected, 1)),
        statistic=float(statistic),
        statistic_corrected=float(corrected),
        sets_used=int(informative.sum()),
        sets_dropped=len(tables) - int(informative.sum()),
    )


def woolf_homogeneity_p(tables: Sequence[Sequence[Sequence[int]]]) -> float:
    """Chance of strata as different as these if they share one odds ratio.

    Half is added to every cell; strata without a single pair say nothing and are left
    out. Do not pool strata that differ.
    """
    filled = [t for t in tables if np.asarray(t).sum() > 0]
    stack = np.asarray(filled, float).reshape(-1, 2, 2) + 0.5
    logs = np.log(stack[:, 0, 0] * stack[:, 1, 1] / (stack[:, 0, 1] * stack[:, 1, 0]))
    weights = 1 / (1 / stack).sum(axis=(1, 2))
    mean = (weights * logs).sum() / weights.sum()
    statistic = float((weights * (logs - mean) ** 2).sum())
    return float(chi2.sf(statistic, len(stack) - 1)) if len(stack) > 1 else math.nan


def cover_of(cover: float | None) -> float:
    """The cover asked for, or the one used everywhere."""
    return float(INTERVAL_COVER_FRAC) if cover is None else cover


def normal_quantile(cover: float) -> float:
    """How many standard deviations on each side hold this share."""
    return math.sqrt(float(chi2.ppf(cover, 1)))


def _informative(table: np.ndarray) -> bool:
    return bool((table.sum(axis=0) > 0).all() and (table.sum(axis=1) > 0).all())


def _sum_law(tables: list[np.ndarray]) -> tuple[int, np.ndarray]:
    """Lowest value of the first cells' sum and the log weights from there up."""
    first, logs = 0, np.zeros(1)
    for table in tables:
        n, row, column = int(table.sum()), int(table[0].sum()), int(table[:, 0].sum())
        low, high = max(0, row + column - n), min(row, column)
        first += low
        own = hypergeom.logpmf(np.arange(low, high + 1), n, row, column)
        logs = _added(logs, own)
    return first, logs


def _added(first: np.ndarray, second: np.ndarray) -> np.ndarray:
    """Log weights of a sum of two; kept as logs, for the far tails decide the ends."""
    if len(first) == 1:
        return first[0] + second
    if len(second) == 1:
        return first + second[0]
    sums = np.full(len(first) + len(second) - 1, -np.inf)
    for i, weight in enumerate(first):
        reached = slice(i, i + len(second))
        sums[reached] = np.logaddexp(sums[reached], weight + second)
    return sums


def _tilted(
    log_weights: np.ndarray, support: np.ndarray, log_ratio: float
) -> np.ndarray:
    logs = log_weights + log_ratio * support
    chances = np.exp(logs - logs.max())
    return chances / chances.sum()


def _conditional_ratio(weights: np.ndarray, support: np.ndarray, seen: int) -> float:
    if seen == support[0]:
        return 0.0
    if seen == support[-1]:
        return math.inf
    return math.exp(
        _root(lambda k: float(_tilted(weights, support, k) @ support) - seen)
    )


def _exact_end(
    weights: np.ndarray, support: np.ndarray, seen: int, tail: float, upper: bool
) -> float:
    if upper and seen == support[-1]:
        return math.inf
    if not upper and seen == support[0]:
        return 0.0
    inside = support <= seen if upper else support >= seen
    sign = -1.0 if upper else 1.0
    return math.exp(
        _root(
            lambda k: sign * (float(_tilted(weights, support, k)[inside].sum()) - tail)
        )
    )


def _root(rising: Callable[[float], float]) -> float:
    low, high = -1.0, 1.0
    while rising(low) > 0:
        low *= 2
    while rising(high) < 0:
        high *= 2
    return float(brentq(rising, low, high, xtol=1e-12, rtol=1e-12))


def _two_sided(chances: np.ndarray, support: np.ndarray, seen: int) -> float:
    own = chances[support == seen][0]
    return min(1.0, float(chances[chances <= own * (1 + 1e-7)].sum()))


def _robins_ends(
    agree: np.ndarray,
    differ: np.ndarray,
    p: np.ndarray,
    q: np.ndarray,
    ratio: float,
    cover: float | None,
) -> tuple[float, float]:
    r, s = float(agree.sum()), float(differ.sum())
    if r == 0 or s == 0:
        return (0.0, math.inf)
    var = (
        float((p * agree).sum()) / (2 * r**2)
        + float((p * differ + q * agree).sum()) / (2 * r * s)
        + float((q * differ).sum()) / (2 * s**2)
    )
    half = normal_quantile(cover_of(cover)) * math.sqrt(var)
    return float(ratio * math.exp(-half)), float(ratio * math.exp(half))
