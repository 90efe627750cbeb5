"""Which charts to check, how many, and what the checked ones say of all."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import special, stats

from engine.evidence.filter import INTERVAL_COVER_FRAC


@dataclass(frozen=True, kw_only=True)
class Estimate:
    """A mean over strata with its standard error and interval."""

    mean: float
    se: float
    low: float
    high: float


def stratified_mean(
    size: ArrayLike, sampled: ArrayLike, mean: ArrayLike, variance: ArrayLike
) -> Estimate:
    """Mean of the whole from a simple random sample in each stratum.

    ``size``      charts there are in each stratum; a fully checked one adds no doubt
    ``variance``  of the sampled values in each, with n - 1
    Source        Cochran's textbook formula; checked in
                  tests/published/review_methods.csv
    """
    whole, n = np.asarray(size, float), np.asarray(sampled, float)
    share = whole / whole.sum()
    middle = float(np.sum(share * np.asarray(mean, float)))
    left = 1 - n / whole
    spread = share**2 * left * np.asarray(variance, float) / n
    se = math.sqrt(float(np.sum(spread)))
    half = float(special.ndtri((1 + float(INTERVAL_COVER_FRAC)) / 2)) * se
    return Estimate(mean=middle, se=se, low=middle - half, high=middle + half)


def stratified_share(size: ArrayLike, sampled: ArrayLike, count: ArrayLike) -> Estimate:
    """The share of all charts from counts in each stratum's sample.

    Strata of one chart have no spread of their own and take that of a half; strata
    whose charts are all alike take that of half a chart more on either side, since no
    spread seen is not the same as none.
    """
    n, x = np.asarray(sampled, float), np.asarray(count, float)
    p = x / n
    alike = (x == 0) | (x == n)
    about = np.where(alike, (x + 0.5) / (n + 1), p)
    variance = np.where(n > 1, n * about * (1 - about) / np.maximum(n - 1, 1), 0.25)
    done = stratified_mean(size, n, p, variance)
    low, high = max(done.low, 0.0), min(done.high, 1.0)
    return Estimate(mean=done.mean, se=done.se, low=low, high=high)


def allotted(size: ArrayLike, total: int, fewest: int = 1) -> np.ndarray:
    """Charts to draw from each stratum: in proportion, but never fewer than wanted
    (or than there are)."""
    whole = np.asarray(size, int)
    least = np.minimum(whole, fewest)
    rest = max(total - int(least.sum()), 0)
    room = whole - least
    if not room.sum():
        return least
    exact = rest * room / room.sum()
    given = np.minimum(np.floor(exact).astype(int), room)
    order = np.argsort(-(exact - given), kind="stable")
    for stratum in order[: max(min(rest, int(room.sum())) - int(given.sum()), 0)]:
        given[stratum] += given[stratum] < room[stratum]
    return least + given


def drawn(ids: ArrayLike, n: int, seed: int) -> np.ndarray:
    """A simple random sample of ids, the same for the same seed and the same ids.

    The ids are put in order first, so that how they arrive does not matter.
    """
    whole = np.sort(np.asarray(ids, dtype=str))
    return np.sort(np.random.default_rng(seed).permutation(whole)[:n])


def charts_to_find_one(total: int | None, wrong: int, sure: float = 0.95) -> int | None:
    """Fewest charts that hold at least one of ``wrong`` among ``total``, so sure.

    Exact hypergeometric; with ``total`` None the lot is endless and ``wrong`` is its
    share in percent. None where there is no such chart to find.
    """
    if wrong <= 0:
        return None
    if total is None:
        return math.ceil(math.log(1 - sure) / math.log(1 - wrong / 100))
    n = np.arange(1, total + 1)
    missed = stats.hypergeom.pmf(0, total, wrong, n)
    return int(n[np.argmax(missed <= 1 - sure + 1e-12)])


def plan_accepts(n: int, most: int, share: ArrayLike) -> np.ndarray:
    """How often a plan that takes n charts and allows ``most`` accepts a lot."""
    return stats.binom.cdf(most, n, np.asarray(share, float))


@dataclass(frozen=True, kw_only=True)
class Predictive:
    """What a flag is worth, and what is missed without one.

    ``sensitivity`` is None unless unflagged charts were sampled: without them it is
    not known.
    """

    confirmed_frac: float
    cleared_frac: float | None
    sensitivity: float | None
    missed: Estimate | None


def predictive(
    flagged: int,
    flagged_checked: int,
    confirmed: int,
    unflagged: int = 0,
    unflagged_checked: int = 0,
    found_unflagged: int = 0,
) -> Predictive:
    """From a random sample of flagged and, where there is one, of unflagged charts."""
    share = confirmed / flagged_checked if flagged_checked else math.nan
    if not unflagged_checked:
        return Predictive(
            confirmed_frac=share, cleared_frac=None, sensitivity=None, missed=None
        )
    missed = stratified_share([unflagged], [unflagged_checked], [found_unflagged])
    true_flagged, true_unflagged = share * flagged, missed.mean * unflagged
    total = true_flagged + true_unflagged
    return Predictive(
        confirmed_frac=share,
        cleared_frac=1 - missed.mean,
        sensitivity=true_flagged / total if total > 0 else None,
        missed=missed,
    )
