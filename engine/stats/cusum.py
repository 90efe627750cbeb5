"""Is it creeping? Charts that remember: EWMA and cumulative sums.

One such chart an indicator, with what it is tuned to and how seldom it cries without
cause decided beforehand and printed beside it.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from engine.evidence.review import CUSUM_FALSE_ALARM_POINTS, SHIFT_OF_CONCERN_RATIO


@dataclass(frozen=True, kw_only=True)
class Ewma:
    """A weighted running mean with its limits at each point."""

    mean: np.ndarray
    low: np.ndarray
    high: np.ndarray
    outside: np.ndarray


@dataclass(frozen=True, kw_only=True)
class Cusum:
    """Two one-sided sums; ``first_signal`` is the place of the first, None without."""

    up: np.ndarray
    down: np.ndarray
    limit: float
    first_signal: int | None


@dataclass(frozen=True, kw_only=True)
class ShareCusum:
    """A cumulative sum for shares, tuned to one change of the odds.

    ``sums``      one a point; a point without any known adds nothing
    ``limit``     set so that without a change it signals once in ``false_alarm_points``
    ``signal``    whether the last point lies over the limit
    """

    sums: np.ndarray
    limit: float
    p0: float
    p1: float
    false_alarm_points: float
    signal: bool


def ewma(
    values: ArrayLike,
    weight: float,
    target: float,
    sigma: float,
    limit_sd: float = 3.0,
    asymptotic: bool = False,
) -> Ewma:
    """Exponentially weighted moving average, begun at the target.

    ``asymptotic``  limits as after many points; otherwise narrower at the first points
    Source          NIST/SEMATECH e-Handbook 6.3.2.4
    """
    x = np.asarray(values, float)
    mean = np.empty(len(x))
    held = target
    for i, value in enumerate(x):
        held = weight * value + (1 - weight) * held
        mean[i] = held
    spread = np.full(len(x), weight / (2 - weight))
    if not asymptotic:
        spread *= 1 - (1 - weight) ** (2 * np.arange(1, len(x) + 1))
    half = limit_sd * sigma * np.sqrt(spread)
    return Ewma(
        mean=mean,
        low=target - half,
        high=target + half,
        outside=np.abs(mean - target) > half,
    )


def tabular_cusum(values: ArrayLike, target: float, k: float, h: float) -> Cusum:
    """Two one-sided cumulative sums of single values.

    ``k``   slack, in the unit of the values; ``h`` the limit
    Source  NIST/SEMATECH e-Handbook 6.3.2.3
    """
    x = np.asarray(values, float)
    up, down = np.zeros(len(x)), np.zeros(len(x))
    high = low = 0.0
    for i, value in enumerate(x):
        high = max(0.0, high + value - target - k)
        low = max(0.0, low + target - value - k)
        up[i], down[i] = high, low
    over = np.flatnonzero((up > h) | (down > h))
    first = int(over[0]) if len(over) else None
    return Cusum(up=up, down=down, limit=h, first_signal=first)


def cusum_run_length(
    k: float, h: float, shift: float = 0.0, states: int = 200
) -> float:
    """Points until a two-sided sum of normal values signals, on average.

    ``k``, ``h``, ``shift``  in standard deviations
    Method   Markov chain of Brook and Evans 1972; two sides by Lucas and Crosier 1982
    """
    up = _one_sided_run_length(k, h, shift, states)
    down = _one_sided_run_length(k, h, -shift, states)
    return 1 / (1 / up + 1 / down)


def _one_sided_run_length(k: float, h: float, shift: float, states: int) -> float:
    width = 2 * h / (2 * states - 1)
    place = np.arange(states) * width
    edges = place[None, :] - place[:, None] + k - shift
    high = special.ndtr(edges + width / 2)
    low = special.ndtr(edges - width / 2)
    low[:, 0] = 0.0
    return float(np.linalg.solve(np.eye(states) - (high - low), np.ones(states))[0])


def event_weights(p0: float, odds_ratio: float) -> tuple[float, float]:
    """What one treatment adds to the sum: where it counts, and where it does not.

    Log-likelihood ratios, so that the mean of their exponentials is 1 without a change.
    Source   Steiner, Cook, Farewell and Treasure 2000 (from memory)
    """
    bottom = 1 - p0 + odds_ratio * p0
    return math.log(odds_ratio / bottom), -math.log(bottom)


def share_cusum(
    count: ArrayLike,
    n: ArrayLike,
    p0: float,
    upward: bool,
    odds_ratio: float | None = None,
    false_alarm_points: float | None = None,
    seed: int = 1,
) -> ShareCusum:
    """The cumulative sum of a share over months of varying size.

    ``p0``      the frozen baseline share
    ``upward``  whether a rise is of concern, else a fall
    The limit is found by simulation with the department's own n, from a fixed seed.
    Raises      ValueError if p0 is 0 or 1: such a baseline cannot be exceeded.
    """
    if not 0 < p0 < 1:
        raise ValueError(f"p0 must lie between 0 and 1; got {p0}")
    ratio = float(SHIFT_OF_CONCERN_RATIO) if odds_ratio is None else odds_ratio
    ratio = ratio if upward else 1 / ratio
    wanted = (
        float(CUSUM_FALSE_ALARM_POINTS)
        if false_alarm_points is None
        else false_alarm_points
    )
    hit, miss = event_weights(p0, ratio)
    x, size = np.asarray(count, float), np.asarray(n, float)
    sums = np.empty(len(x))
    held = 0.0
    for i in range(len(x)):
        held = max(0.0, held + x[i] * hit + (size[i] - x[i]) * miss)
        sums[i] = held
    limit = _share_limit(size[size > 0], p0, (hit, miss), wanted, seed)
    return ShareCusum(
        sums=sums,
        limit=limit,
        p0=p0,
        p1=ratio * p0 / (1 - p0 + ratio * p0),
        false_alarm_points=wanted,
        signal=bool(len(sums) and sums[-1] > limit),
    )


RUNS = 400  # simulated series behind each limit


def _share_limit(
    n: np.ndarray, p0: float, weights: tuple[float, float], wanted: float, seed: int
) -> float:
    """The limit that is passed once in ``wanted`` points without a change.

    The highest sum so far rises point by point in each simulated series; the limit is
    where the mean number of points to pass it is as wanted.
    """
    if not len(n):
        return math.inf
    draw = np.random.default_rng(seed)
    steps = int(6 * wanted)
    size = np.floor(draw.choice(n, (steps, RUNS))).astype(int)
    x = draw.binomial(size, p0)
    rises = x * weights[0] + (size - x) * weights[1]
    highest = np.empty((steps, RUNS))
    sums = np.zeros(RUNS)
    for t in range(steps):
        sums = np.maximum(0.0, sums + rises[t])
        highest[t] = sums
    np.maximum.accumulate(highest, axis=0, out=highest)
    low, high = 0.0, float(highest[-1].max()) + 1.0
    for _ in range(24):
        middle = (low + high) / 2
        length = float(np.mean(np.argmax(highest > middle, axis=0) + 1))
        never = highest[-1] <= middle
        length += float(np.mean(never)) * (steps - 1)
        low, high = (middle, high) if length < wanted else (low, middle)
    return high
