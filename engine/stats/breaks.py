"""Did something change that nobody wrote down: steps in a series.

A loading filter rises, so a plain shift of level is the wrong question for it: a
straight rise alone would answer yes. ``line_and_step`` asks whether a rise with one
downward step fits better than the rise alone; the rise may bend, because filters that
clog speed up, and a bend taken for a straight line reads as a step. ``pettitt`` and
``one_break`` are for series that keep a level, such as monthly medians.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache
from itertools import permutations

import numpy as np
from scipy.optimize import brentq
from scipy.special import log_ndtr, ndtr

from engine.evidence.filter import (
    BREAK_SEGMENT_FRAC,
    CHANGE_READINGS_COUNT,
    EXACT_ARRANGEMENTS_COUNT,
    FIRST_LOOK_ARRANGEMENTS_COUNT,
    FIRST_LOOK_P_FRAC,
    INTERVAL_COVER_FRAC,
    RESIDUAL_ARRANGEMENTS_COUNT,
    SECOND_LOOK_P_FRAC,
    SEGMENT_READINGS_COUNT,
)


@dataclass(frozen=True, kw_only=True)
class Step:
    """The best downward step on a common slope, and how rare it is without one.

    ``at`` counts the readings before the step; the change lies between
    ``after_x`` and ``before_x``. ``drop`` is negative. ``fits_better`` is the share of
    the line's misfit the step takes away.
    """

    readings_count: int
    at: int | None
    after_x: float
    before_x: float
    slope: float
    drop: float
    fits_better: float
    p: float
    arrangements_count: int = 0
    exact: bool = False
    seed: int | None = None
    refusal: str = ""


@dataclass(frozen=True, kw_only=True)
class LevelShift:
    """Pettitt's test: where a level is most likely to have shifted."""

    k: int
    at: int
    p: float
    refusal: str = ""


@dataclass(frozen=True, kw_only=True)
class Break:
    """One shift of level by least squares; ``low`` and ``high`` bound its place.

    Places count the values before the shift.
    """

    at: int
    low: float
    high: float
    mean_before: float
    mean_after: float
    refusal: str = ""


def line_and_step(
    times: np.ndarray,
    values: np.ndarray,
    seed: int = 0,
    fewest: int | None = None,
    arrangements: int | None = None,
    may_bend: bool = True,
) -> Step:
    """Whether the readings dropped at some moment while rising on one course.

    Scans   every place with enough readings on both sides where the reading really
            falls. The rise is a line, or with ``may_bend`` a line and its square.
    p       share of rearrangements of what the rise leaves over that do as well: all
            of them where they are few, otherwise drawn with the seed returned. A first
            look at a few draws settles it where p is far from anything to act on.
    slope   and ``drop`` are those of a straight line with the step.
    Refuses fewer than ``fewest`` readings.
    Source  residual permutation; FREEDMAN_1983
    Checked tests/engine/stats/test_breaks.py; false alarms in detection.csv
    """
    x, y = _sorted(times, values)
    n = len(y)
    if n < (int(CHANGE_READINGS_COUNT) if fewest is None else fewest):
        return _no_step(n, "too few readings to look for a change")
    if x[0] == x[-1]:
        return _no_step(n, "all readings were taken at one time")
    rise = _rise(x, may_bend)
    places, steps = _candidates(x, rise)
    left = _off(y[None, :], rise)[0]
    best = _allowed(*_step_shares(left[None, :], steps, rise), y[None, :], places)
    observed = float(best[0].max())
    if observed <= 0 or float((left**2).sum()) <= _ROUNDING * float((y**2).sum()):
        return _straight(n, x, y)
    at = int(places[int(best[0].argmax())])

    def share_as_good(order: np.ndarray, exact: bool) -> float:
        mixed = left[order]
        readings = (y - left)[None, :] + mixed
        chance = _allowed(*_step_shares(mixed, steps, rise), readings, places)
        beaten = int((chance.max(axis=1) >= observed * (1 - _ROUNDING)).sum())
        return beaten / len(order) if exact else (beaten + 1) / (len(order) + 1)

    for order, exact, settled_above in _looks(n, seed, arrangements):
        p = share_as_good(order, exact)
        if p > settled_above:
            break
    slope, drop = _with_step(x, y, at)
    return Step(
        readings_count=n,
        at=at,
        after_x=float(x[at - 1]),
        before_x=float(x[at]),
        slope=slope,
        drop=drop,
        fits_better=observed,
        p=p,
        arrangements_count=len(order),
        exact=exact,
        seed=None if exact else seed,
    )


def pettitt(values: np.ndarray) -> LevelShift:
    """Whether the level of a series shifted once; for series without a trend only.

    Source   PETTITT_1979
    Checked  tests/published/change_point.csv
    """
    y = np.asarray(values, float)
    y = y[~np.isnan(y)]
    n = len(y)
    if n < 2:
        return LevelShift(k=0, at=0, p=math.nan, refusal="fewer than two values")
    signs = np.sign(y[:, None] - y[None, :])
    # sum over the first t against the rest, for every t
    sums = np.cumsum(signs.sum(axis=1))[:-1]
    at = int(np.abs(sums).argmax())
    k = round(float(abs(sums[at])))
    p = min(1.0, 2 * math.exp(-6 * k**2 / (n**3 + n**2)))
    return LevelShift(k=k, at=at + 1, p=p)


def one_break(
    values: np.ndarray, cover: float | None = None, smallest_frac: float | None = None
) -> Break:
    """Where one shift of level fits best, and how surely it is there.

    Source   least squares; interval from BAI_1997 with a spread of its own on each
             side, ends rounded outwards
    Checked  tests/published/change_point.csv
    """
    y = np.asarray(values, float)
    y = y[~np.isnan(y)]
    n = len(y)
    share = float(BREAK_SEGMENT_FRAC) if smallest_frac is None else smallest_frac
    side = max(int(share * n), 2)
    if n < 2 * side:
        nan = math.nan
        why = "too few values for two segments"
        return Break(
            at=0, low=nan, high=nan, mean_before=nan, mean_after=nan, refusal=why
        )
    places = np.arange(side, n - side + 1)
    sums = np.cumsum(y)
    gain = (sums[places - 1] - places * y.mean()) ** 2 * (1 / places + 1 / (n - places))
    at = int(places[gain.argmax()])
    first, second = y[:at], y[at:]
    shift = float(second.mean() - first.mean())
    low, high = at, at
    if shift != 0 and first.var() > 0 and second.var() > 0:
        cover = float(INTERVAL_COVER_FRAC) if cover is None else cover
        ends = _break_ends(float(first.var()), float(second.var()), cover)
        scale = float(first.var()) / shift**2
        low = max(at - math.ceil(ends[1] * scale), 0)
        high = min(at - math.floor(ends[0] * scale), n)
    return Break(
        at=at,
        low=float(low),
        high=float(high),
        mean_before=float(first.mean()),
        mean_after=float(second.mean()),
    )


_ROUNDING = 1e-9  # sums of squares below this share are the computer's, not the data's


def _sorted(times: np.ndarray, values: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    x, y = np.asarray(times, float), np.asarray(values, float)
    good = np.isfinite(x) & np.isfinite(y)
    order = np.argsort(x[good], kind="stable")
    return x[good][order], y[good][order]


def _rise(x: np.ndarray, may_bend: bool) -> np.ndarray:
    """Orthonormal columns the course without a change is made of."""
    run = (x - x.mean()) / (x[-1] - x[0])
    powers = [np.ones(len(x)), run, run**2] if may_bend else [np.ones(len(x)), run]
    return np.linalg.qr(np.column_stack(powers))[0]


def _off(rows: np.ndarray, rise: np.ndarray) -> np.ndarray:
    """What the rise leaves over of each row."""
    return rows - (rows @ rise) @ rise.T


def _candidates(x: np.ndarray, rise: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Places a step may stand at, and what of each step the rise cannot make up."""
    side = int(SEGMENT_READINGS_COUNT)
    places = np.array(
        [k for k in range(side, len(x) - side + 1) if x[k] > x[k - 1]], dtype=int
    )
    steps = _off((np.arange(len(x)) >= places[:, None]).astype(float), rise)
    told = (steps**2).sum(axis=1) > _ROUNDING
    return places[told], steps[told]


def _step_shares(
    residuals: np.ndarray, steps: np.ndarray, rise: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Share of each row's misfit each step takes away, and the step's size."""
    misfit = (_off(residuals, rise) ** 2).sum(axis=1)
    along = residuals @ steps.T
    lengths = (steps**2).sum(axis=1)
    with np.errstate(invalid="ignore", divide="ignore"):
        shares = along**2 / (lengths * misfit[:, None])
    return np.nan_to_num(shares), along / lengths


def _allowed(
    shares: np.ndarray, drops: np.ndarray, readings: np.ndarray, places: np.ndarray
) -> np.ndarray:
    """Shares of the steps that go down where the reading itself goes down."""
    if len(places) == 0:
        return np.zeros((len(readings), 1))
    falls = readings[:, places] < readings[:, places - 1]
    return np.where(falls & (drops < 0), shares, 0.0)


def _looks(
    n: int, seed: int, arrangements: int | None
) -> Iterator[tuple[np.ndarray, bool, float]]:
    """Ever more arrangements, and the p above which each look is enough."""
    few, many = int(FIRST_LOOK_ARRANGEMENTS_COUNT), int(RESIDUAL_ARRANGEMENTS_COUNT)
    yield _drawn(n, seed, few), False, float(FIRST_LOOK_P_FRAC)
    order, exact = _orders(n, seed, arrangements)
    if exact and len(order) > many:
        yield _drawn(n, seed, many), False, float(SECOND_LOOK_P_FRAC)
    yield order, exact, 0.0


@lru_cache(maxsize=64)
def _orders(n: int, seed: int, arrangements: int | None) -> tuple[np.ndarray, bool]:
    if math.factorial(n) <= int(EXACT_ARRANGEMENTS_COUNT):
        return np.array(list(permutations(range(n)))), True
    count = int(RESIDUAL_ARRANGEMENTS_COUNT) if arrangements is None else arrangements
    return _drawn(n, seed, count), False


@lru_cache(maxsize=64)
def _drawn(n: int, seed: int, count: int) -> np.ndarray:
    drawn = np.random.default_rng(seed)
    return drawn.permuted(np.tile(np.arange(n), (count, 1)), axis=1)


def _with_step(x: np.ndarray, y: np.ndarray, at: int) -> tuple[float, float]:
    columns = np.column_stack([np.ones(len(x)), x, np.arange(len(x)) >= at])
    _, slope, drop = np.linalg.lstsq(columns, y, rcond=None)[0]
    return float(slope), float(drop)


def _no_step(n: int, why: str) -> Step:
    nan = math.nan
    return Step(
        readings_count=n,
        at=None,
        after_x=nan,
        before_x=nan,
        slope=nan,
        drop=nan,
        fits_better=nan,
        p=nan,
        refusal=why,
    )


def _straight(n: int, x: np.ndarray, y: np.ndarray) -> Step:
    nan = math.nan
    run = x - x.mean()
    slope = float(run @ y / (run @ run))
    return Step(
        readings_count=n,
        at=None,
        after_x=nan,
        before_x=nan,
        slope=slope,
        drop=0.0,
        fits_better=0.0,
        p=1.0,
    )


def _break_ends(
    var_before: float, var_after: float, cover: float
) -> tuple[float, float]:
    tail = (1 - cover) / 2
    ratio = var_after / var_before
    top = 1.0
    while _break_chance(top, ratio) < 1 - tail:
        top *= 2
    bottom = -1.0
    while _break_chance(bottom, ratio) > tail:
        bottom *= 2
    high = brentq(lambda x: _break_chance(x, ratio) - (1 - tail), bottom, top)
    low = brentq(lambda x: _break_chance(x, ratio) - tail, bottom, top)
    return float(low), float(high)


def _break_chance(x: float, ratio: float) -> float:
    """Chance that the best place lies below x, in scaled units.

    ``ratio`` is the spread after over the spread before.
    Source   BAI_1997, appendix; at ratio 1 it is the form of Yao 1987
    """
    return _after(x, ratio) if x >= 0 else _before(-x, ratio)


def _after(x: float, phi: float) -> float:
    frac = 1 / phi
    root = math.sqrt(x)
    first = math.sqrt(frac) * math.exp(-frac * x / 8) * root / math.sqrt(2 * math.pi)
    second = ((2 * phi + 1) / (phi * (phi + 1))) * math.exp(
        (phi + 1) * x / 2 + log_ndtr(-(phi + 0.5) / math.sqrt(phi) * root)
    )
    third = ((2 * phi + 1) ** 2 / ((phi + 1) * phi) - 2 + frac * x / 2) * ndtr(
        -math.sqrt(frac) * root / 2
    )
    return 1 + first + second - third


def _before(x: float, phi: float) -> float:
    frac = 1 / phi
    root = math.sqrt(x)
    first = root * math.exp(-x / 8) / math.sqrt(2 * math.pi)
    second = (phi * (phi + 2) / (phi + 1)) * math.exp(
        frac * (1 + frac) * x / 2 + log_ndtr(-(0.5 + frac) * root)
    )
    third = (x / 2 - 2 + (phi + 2) ** 2 / (phi + 1)) * ndtr(-root / 2)
    return -first - second + third
