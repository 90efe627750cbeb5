"""Did setups before faults differ: matched comparisons, exact where small.

A ventilator is compared with itself: the setup in a window before each fault against
the same ventilator's setup in earlier windows of equal length. Few faults give no
p-value that could ever be small; then the table is stated in words and nothing more.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.stats import beta, binom, chi2

from engine.evidence.filter import (
    EXACT_ARRANGEMENTS_COUNT,
    SIGN_ARRANGEMENTS_COUNT,
)
from engine.stats.odds import Ratio, cover_of, normal_quantile

NO_DISCORDANT = "no pair differs, so the pairs say nothing about the exposure"
RUNS_AWAY = "the estimate has no end: one side of the comparison is empty"
TOO_FEW_FAULTS = "too few faults whose windows differ for any test to be able to speak"


@dataclass(frozen=True, kw_only=True)
class Fitted:
    """Conditional logistic regression: one coefficient an exposure, on log odds."""

    names: tuple[str, ...]
    beta: tuple[float, ...]
    se: tuple[float, ...]
    ratio: tuple[float, ...]
    low: tuple[float, ...]
    high: tuple[float, ...]
    p: tuple[float, ...]
    sets_used: int
    sets_dropped: int
    refusal: str = ""


@dataclass(frozen=True, kw_only=True)
class Windows:
    """How common a setup was in comparable windows, beside the one that matters."""

    present_count: int
    known_count: int
    unknown_count: int
    in_hazard_window: bool | None
    sentence: str


def matched_pairs(b: int, c: int, cover: float | None = None) -> Ratio:
    """Odds ratio of 1:1 matched windows, from the pairs that differ.

    ``b``    pairs exposed before the fault only; ``c`` in the control window only
    Exact    conditional binomial; the interval is that of b / (b + c), as odds
    Source   MACLURE_1991 for the design; BRESLOW_1980 section 5.2
    Checked  tests/published/matched.csv
    """
    m = b + c
    if m == 0:
        nan = math.nan
        return Ratio(ratio=nan, low=0.0, high=math.inf, p=1.0, refusal=NO_DISCORDANT)
    tail = (1 - cover_of(cover)) / 2
    low = float(beta.ppf(tail, b, c + 1)) if b else 0.0
    high = float(beta.ppf(1 - tail, b + 1, c)) if c else 1.0
    return Ratio(
        ratio=b / c if c else math.inf,
        low=low / (1 - low),
        high=high / (1 - high) if high < 1 else math.inf,
        p=min(1.0, 2 * float(binom.cdf(min(b, c), m, 0.5))),
        p_one_sided=float(binom.sf(b - 1, m, 0.5)),
        p_less=float(binom.cdf(b, m, 0.5)),
        smallest_p=smallest_matched_p(m),
        statistic=(b - c) ** 2 / m,
        statistic_corrected=max(abs(b - c) - 1, 0) ** 2 / m,
        sets_used=m,
    )


def mcnemar(table: Sequence[Sequence[int]], exact: bool = False) -> Ratio:
    """McNemar's test of a paired two-by-two table.

    ``table``  rows by the first occasion, columns by the second. ``p`` is exact
               (binomial) if asked, otherwise from the corrected statistic.
    """
    (_, b), (c, _) = table
    pairs = matched_pairs(int(b), int(c))
    if exact or pairs.refusal:
        return pairs
    p = float(chi2.sf(pairs.statistic_corrected, 1))
    return Ratio(**{**pairs.__dict__, "p": p})


def smallest_matched_p(discordant_count: int) -> float:
    """The smallest two-sided exact p that many differing pairs can give."""
    return min(1.0, 2 * 0.5**discordant_count)


def conditional_logistic(
    stratum: np.ndarray,
    case: np.ndarray,
    exposures: np.ndarray,
    names: Sequence[str] = (),
    cover: float | None = None,
) -> Fitted:
    """Conditional logistic regression for one case window with several controls.

    Shapes   stratum and case of n; exposures n by k. Sets without both a case and a
             control, or whose exposures are all alike, say nothing: they are dropped
             and counted.
    """
    import warnings

    from statsmodels.discrete.conditional_models import ConditionalLogit

    x = np.asarray(exposures, float)
    x = x[:, None] if x.ndim == 1 else x
    y, sets = np.asarray(case, int), np.asarray(stratum)
    good = np.isfinite(x).all(axis=1)
    kept = good & np.isin(sets, _informative_sets(sets[good], y[good], x[good]))
    used, offered = len(np.unique(sets[kept])), len(np.unique(sets))
    labels = tuple(names) or tuple(f"exposure {i + 1}" for i in range(x.shape[1]))
    if used == 0:
        return _unfitted(labels, offered, NO_DISCORDANT)
    model = ConditionalLogit(y[kept], x[kept], groups=sets[kept])
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # a likelihood without a maximum is named below
        try:
            done = model.fit(method="newton", disp=False)
        except np.linalg.LinAlgError:
            return _unfitted(labels, offered, RUNS_AWAY)
    settled = np.isfinite(done.bse).all() and np.isfinite(done.params).all()
    if not settled or np.abs(done.params).max() * x[kept].std(axis=0).max() > _FAR:
        return _unfitted(labels, offered, RUNS_AWAY)
    interval = done.conf_int(alpha=1 - cover_of(cover))
    return Fitted(
        names=labels,
        beta=tuple(map(float, done.params)),
        se=tuple(map(float, done.bse)),
        ratio=tuple(map(float, np.exp(done.params))),
        low=tuple(map(float, np.exp(interval[:, 0]))),
        high=tuple(map(float, np.exp(interval[:, 1]))),
        p=tuple(map(float, done.pvalues)),
        sets_used=used,
        sets_dropped=offered - used,
    )


def sign_flip_p(
    differences: np.ndarray, seed: int = 0, arrangements: int | None = None
) -> tuple[float, int, bool]:
    """Two-sided p of paired differences under random signs.

    All arrangements where they are few, otherwise drawn with the seed. Returns the
    p, how many arrangements were tried, and whether they were all.
    """
    values = np.asarray(differences, float)
    values = values[np.isfinite(values)]
    n = len(values)
    if n == 0:
        return math.nan, 0, True
    seen = abs(values.sum()) * (1 - 1e-12)
    if 2**n <= int(EXACT_ARRANGEMENTS_COUNT):
        sums = np.zeros(1)
        for value in values:
            sums = np.concatenate([sums + value, sums - value])
        return float((np.abs(sums) >= seen).mean()), 2**n, True
    count = int(SIGN_ARRANGEMENTS_COUNT) if arrangements is None else arrangements
    signs = np.random.default_rng(seed).choice([-1.0, 1.0], size=(count, n))
    beaten = int((np.abs(signs @ values) >= seen).sum())
    return (beaten + 1) / (count + 1), count, False


def self_controlled(
    unit: np.ndarray,
    events: np.ndarray,
    time_at_risk: np.ndarray,
    exposures: np.ndarray,
    names: Sequence[str] = (),
    cover: float | None = None,
) -> Fitted:
    """Rates of faults in exposed against other time, each unit its own control.

    Conditional Poisson likelihood: given how many events a unit had, where in its
    time they fell. Units without events or with exposures all alike say nothing; they
    are dropped and counted.

    Shapes   one row a stretch of time: its unit, its events, its length, and its
             exposures (n by k; ages or calendar time may be among them)
    Source   FARRINGTON_1995. Assumes an event does not change later exposure; leave
             out the time after it where it does.
    Checked  tests/engine/stats/test_matched.py, against a reference library
    """
    x = np.asarray(exposures, float)
    x = x[:, None] if x.ndim == 1 else x
    y, time = np.asarray(events, float), np.asarray(time_at_risk, float)
    labels, code = np.unique(np.asarray(unit), return_inverse=True)
    good = (time > 0) & np.isfinite(x).all(axis=1)
    x, y, time, code = x[good], y[good], time[good], code[good]
    kept = np.isin(code, _telling_units(code, y, x))
    x, y, time, code = x[kept], y[kept], time[kept], code[kept]
    named = tuple(names) or tuple(f"exposure {i + 1}" for i in range(x.shape[1]))
    used = len(np.unique(code))
    if used == 0:
        return _unfitted(named, len(labels), NO_DISCORDANT)
    estimate, information = _conditional_poisson(x, y, time, code)
    if estimate is None:
        return _unfitted(named, len(labels), RUNS_AWAY)
    se = np.sqrt(np.diag(np.linalg.inv(information)))
    half = normal_quantile(cover_of(cover)) * se
    return Fitted(
        names=named,
        beta=tuple(map(float, estimate)),
        se=tuple(map(float, se)),
        ratio=tuple(map(float, np.exp(estimate))),
        low=tuple(map(float, np.exp(estimate - half))),
        high=tuple(map(float, np.exp(estimate + half))),
        p=tuple(map(float, chi2.sf((estimate / se) ** 2, 1))),
        sets_used=used,
        sets_dropped=len(labels) - used,
    )


def comparable_windows(
    exposed: np.ndarray, in_hazard_window: bool | None, what: str
) -> Windows:
    """How many comparable windows held the setup; all there is to say of one fault.

    Shapes   ``exposed`` one value a window: 1 yes, 0 no, -1 not known
    """
    codes = np.asarray(exposed)
    present, known = int((codes == 1).sum()), int((codes >= 0).sum())
    unknown = len(codes) - known
    before = {
        True: f"{what} stood in the window before the fault",
        False: f"{what} did not stand in the window before the fault",
        None: f"whether {what} stood in the window before the fault is not recorded",
    }[in_hazard_window]
    if known == 0:
        among = "there is no comparable window of this ventilator to hold it against"
    else:
        windows = "window" if known == 1 else "windows"
        among = f"it was present in {present} of {known} comparable {windows}"
    verb = "does" if unknown == 1 else "do"
    rest = f"; {unknown} more {verb} not say" if unknown else ""
    return Windows(
        present_count=present,
        known_count=known,
        unknown_count=unknown,
        in_hazard_window=in_hazard_window,
        sentence=f"{before[0].upper()}{before[1:]}; {among}{rest}.",
    )


_STEPS = 50  # of Newton's method; it settles in a handful or not at all
_FAR = 8.0  # log odds a standard deviation beyond which there is no maximum to print


def _informative_sets(sets: np.ndarray, y: np.ndarray, x: np.ndarray) -> np.ndarray:
    labels, code = np.unique(sets, return_inverse=True)
    n = np.bincount(code)
    cases = np.bincount(code, y)
    differs = np.zeros(len(labels), bool)
    for column in x.T:
        mean = np.bincount(code, column) / n
        differs |= np.bincount(code, (column - mean[code]) ** 2) > 1e-12
    return labels[(cases > 0) & (cases < n) & differs]


def _telling_units(code: np.ndarray, y: np.ndarray, x: np.ndarray) -> np.ndarray:
    n = np.maximum(np.bincount(code), 1)
    differs = np.zeros(len(n), bool)
    for column in x.T:
        mean = np.bincount(code, column) / n
        differs |= np.bincount(code, (column - mean[code]) ** 2) > 1e-12
    return np.flatnonzero(differs & (np.bincount(code, y) > 0))


def _conditional_poisson(
    x: np.ndarray, y: np.ndarray, time: np.ndarray, code: np.ndarray
) -> tuple[np.ndarray | None, np.ndarray]:
    """Newton's method; no estimate where it does not settle."""
    estimate = np.zeros(x.shape[1])
    total = np.bincount(code, y)[code]
    for _ in range(_STEPS):
        weight = time * np.exp(x @ estimate)
        share = weight / np.bincount(code, weight)[code]
        means = np.column_stack(
            [np.bincount(code, share * column)[code] for column in x.T]
        )
        score = (y - total * share) @ x
        away = x - means
        information = (away * (total * share)[:, None]).T @ away
        try:
            step = np.linalg.solve(information, score)
        except np.linalg.LinAlgError:
            return None, information
        estimate = estimate + step
        if not np.isfinite(estimate).all() or np.abs(estimate).max() > _FAR * 2:
            return None, information
        if np.abs(step).max() < 1e-10:
            return estimate, information
    return None, information


def _unfitted(names: tuple[str, ...], sets: int, why: str) -> Fitted:
    empty = (math.nan,) * len(names)
    return Fitted(
        names=names,
        beta=empty,
        se=empty,
        ratio=empty,
        low=empty,
        high=empty,
        p=empty,
        sets_used=0,
        sets_dropped=sets,
        refusal=why,
    )
