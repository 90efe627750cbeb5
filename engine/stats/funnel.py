"""Units side by side, never ranked: what lies outside the expected range, and how far
a small unit's figure should be drawn towards the others."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import optimize, special, stats

from engine.evidence.filter import INTERVAL_COVER_FRAC
from engine.evidence.series import WINSORISED_FRAC


@dataclass(frozen=True, kw_only=True)
class Dispersion:
    """Whether units differ by more than chance around the target.

    ``phi`` multiplies the variance, ``tau2`` adds to it; both are 1 and 0 where
    ``excess`` is false.
    """

    phi: float
    tau2: float
    excess: bool
    p: float


@dataclass(frozen=True, kw_only=True)
class Shrunken:
    """Rates drawn towards the whole by how little each unit tells alone.

    ``alpha`` and ``beta`` are those of the units' spread; infinite where all units
    share one rate. The intervals are not widened for having been fitted.
    """

    rate: np.ndarray
    low: np.ndarray
    high: np.ndarray
    alpha: float
    beta: float
    log_likelihood: float

    @property
    def all_alike(self) -> bool:
        return not math.isfinite(self.alpha)


def funnel_limits(
    target: float, n: ArrayLike, cover: float = 0.95
) -> tuple[np.ndarray, np.ndarray]:
    """Lower and upper line of a funnel for units of size n, from binomial quantiles.

    The quantiles are joined between counts, so that the lines are smooth. A size that
    is no whole number is taken down to one.
    Source   Spiegelhalter 2005, Stat Med 24:1185 (formula from memory)
    """
    size = np.floor(np.asarray(n, float))
    tail = (1 - cover) / 2
    low = _between(target, size, tail)
    high = _between(target, size, 1 - tail)
    return np.clip(low, 0, 1), np.clip(high, 0, 1)


def _between(target: float, n: np.ndarray, p: float) -> np.ndarray:
    r = stats.binom.ppf(p, n, target)
    above, below = stats.binom.cdf(r, n, target), stats.binom.cdf(r - 1, n, target)
    with np.errstate(divide="ignore", invalid="ignore"):
        return (r - (above - p) / (above - below)) / n


def dispersion(count: ArrayLike, n: ArrayLike, target: float) -> Dispersion:
    """Over-dispersion of units around the target, the extreme tenths pulled in.

    Source   Spiegelhalter 2005 (from memory): winsorised phi; additive variance by
             DerSimonian and Laird
    """
    x, size = np.asarray(count, float), np.asarray(n, float)
    z = (x / size - target) / np.sqrt(target * (1 - target) / size)
    edge = float(WINSORISED_FRAC)
    inner = np.clip(z, *np.quantile(z, [edge, 1 - edge]))
    units = len(x)
    q = float(np.sum(inner**2))
    p = float(stats.chi2.sf(q, units))
    excess = p < 1 - float(INTERVAL_COVER_FRAC)
    weight = size / (target * (1 - target))
    spread = weight.sum() - (weight**2).sum() / weight.sum()
    tau2 = max((q - (units - 1)) / spread, 0.0) if spread > 0 else 0.0
    return Dispersion(
        phi=q / units if excess else 1.0,
        tau2=tau2 if excess else 0.0,
        excess=excess,
        p=p,
    )


def shrunken(count: ArrayLike, n: ArrayLike, cover: float | None = None) -> Shrunken:
    """Each unit's rate drawn towards the whole: beta-binomial, maximum likelihood.

    Source   Crowder 1978 (the likelihood); checked in
             tests/published/review_methods.csv
    """
    x, size = np.asarray(count, float), np.asarray(n, float)
    alpha, beta, likelihood = beta_binomial(x, size)
    share = float(INTERVAL_COVER_FRAC) if cover is None else cover
    tail = (1 - share) / 2
    if not math.isfinite(alpha):
        pooled = float(x.sum() / size.sum())
        low, high = (
            special.betaincinv(x.sum() + 0.5, size.sum() - x.sum() + 0.5, t)
            for t in (tail, 1 - tail)
        )
        low, high = min(low, pooled), max(high, pooled)
        flat = np.full(len(x), pooled)
        return Shrunken(
            rate=flat,
            low=np.full(len(x), low),
            high=np.full(len(x), high),
            alpha=alpha,
            beta=beta,
            log_likelihood=likelihood,
        )
    return Shrunken(
        rate=(alpha + x) / (alpha + beta + size),
        low=special.betaincinv(alpha + x, beta + size - x, tail),
        high=special.betaincinv(alpha + x, beta + size - x, 1 - tail),
        alpha=alpha,
        beta=beta,
        log_likelihood=likelihood,
    )


def beta_binomial(count: np.ndarray, n: np.ndarray) -> tuple[float, float, float]:
    """alpha, beta and log-likelihood of the units' spread; infinite where none.

    The likelihood counts each way of choosing, so it can be held against print.
    """
    x, size = np.asarray(count, float), np.asarray(n, float)
    choose = float(
        np.sum(
            special.gammaln(size + 1)
            - special.gammaln(x + 1)
            - special.gammaln(size - x + 1)
        )
    )
    pooled = float(x.sum() / size.sum())
    alone = _binomial_likelihood(x, size, pooled) + choose
    if not 0 < pooled < 1 or len(x) < 2:
        return math.inf, math.inf, alone

    def against(parameters: np.ndarray) -> float:
        mu, rho = special.expit(parameters)
        a, b = mu * (1 - rho) / rho, (1 - mu) * (1 - rho) / rho
        found = special.betaln(a + x, b + size - x) - special.betaln(a, b)
        return -float(np.sum(found))

    start = np.array([special.logit(pooled), -2.0])
    found = optimize.minimize(
        against, start, method="Nelder-Mead", options={"xatol": 1e-10, "fatol": 1e-12}
    )
    mu, rho = special.expit(found.x)
    if -found.fun + choose <= alone + 1e-6:
        return math.inf, math.inf, alone
    precision = (1 - rho) / rho
    return float(mu * precision), float((1 - mu) * precision), -found.fun + choose


def beta_by_moments(rates: ArrayLike) -> tuple[float, float]:
    """alpha and beta from mean and spread of the units' raw rates."""
    p = np.asarray(rates, float)
    mean, variance = float(p.mean()), float(p.var(ddof=1))
    precision = mean * (1 - mean) / variance - 1
    return mean * precision, (1 - mean) * precision


def false_discoveries(p_values: ArrayLike, share: float = 0.05) -> np.ndarray:
    """Which of one declared family of tests stand, with at most that share false.

    Source   Benjamini and Hochberg 1995, through scipy; independent or positively
             dependent tests
    """
    return stats.false_discovery_control(np.asarray(p_values, float)) <= share


def _binomial_likelihood(x: np.ndarray, n: np.ndarray, p: float) -> float:
    return float(np.sum(special.xlogy(x, p) + special.xlogy(n - x, 1 - p)))
