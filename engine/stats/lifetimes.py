"""How long filters last: Kaplan-Meier, where an early change hides the full life."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import pandas as pd

from engine.evidence.filter import INTERVAL_COVER_FRAC


@dataclass(frozen=True, kw_only=True)
class Lives:
    """A survival curve.

    ``curve`` has hours, at_risk, ended, surviving_frac, se, low and high, one row an
    hour at which a life ended. ``median_h`` is None while more than half outlast what
    was seen.
    """

    lives_count: int
    ended_count: int
    median_h: float | None
    median_low_h: float | None
    median_high_h: float | None
    curve: pd.DataFrame
    refusal: str = ""


@dataclass(frozen=True, kw_only=True)
class LogRank:
    """Whether the groups' lives differ; ``df`` counts the groups that could tell."""

    statistic: float
    df: int
    p: float
    refusal: str = ""


def kaplan_meier(
    hours: np.ndarray,
    ended: np.ndarray,
    cover: float | None = None,
    entry_hours: np.ndarray | None = None,
) -> Lives:
    """The share of filters still below their limit, by hours in use.

    ``ended``        true where the life ended (the limit was reached), false where
                     the filter was changed, lost or is still in use before that
    ``entry_hours``  when watching began, where later than the start of the life
    Interval         log-log, so that it stays between 0 and 1; Greenwood's variance
    Source           Kaplan and Meier 1958 (from memory), through statsmodels
    Checked          tests/published/lifetimes.csv
    """
    from statsmodels.duration.survfunc import SurvfuncRight

    t, e = np.asarray(hours, float), np.asarray(ended, bool)
    good = np.isfinite(t) & (t > 0)
    t, e = t[good], e[good]
    entry = None if entry_hours is None else np.asarray(entry_hours, float)[good]
    if not e.any():
        why = "no life ended while watched" if len(t) else "no lives to follow"
        return _no_lives(len(t), why)
    done = SurvfuncRight(t, e.astype(int), entry=entry)
    curve = pd.DataFrame(
        {
            "hours": done.surv_times,
            "at_risk": done.n_risk.astype(int),
            "ended": done.n_events.astype(int),
            "surviving_frac": done.surv_prob,
            "se": np.nan_to_num(done.surv_prob_se),
        }
    )
    low, high = _log_log_ends(curve, cover)
    curve = curve.assign(low=low, high=high)
    return Lives(
        lives_count=len(t),
        ended_count=int(e.sum()),
        median_h=_crossing(curve["hours"], curve["surviving_frac"]),
        median_low_h=_crossing(curve["hours"], curve["low"]),
        median_high_h=_crossing(curve["hours"], curve["high"]),
        curve=curve,
    )


def log_rank(hours: np.ndarray, ended: np.ndarray, group: np.ndarray) -> LogRank:
    """Whether lives differ between groups.

    A group of which nobody was left when the first life ended says nothing and is
    left out. Refused where fewer than two groups are left or all ended at one time.
    Source   Mantel 1966 (from memory), through statsmodels
    """
    from statsmodels.duration.survfunc import survdiff

    t, e, g = np.asarray(hours, float), np.asarray(ended, bool), np.asarray(group)
    good = np.isfinite(t) & (t > 0)
    t, e, g = t[good], e[good], g[good]
    if len(np.unique(g)) < 2:
        return _no_rank("only one group")
    if not e.any():
        return _no_rank("no life ended while watched")
    first = t[e].min()
    told = np.isin(g, [name for name in np.unique(g) if t[g == name].max() >= first])
    t, e, g = t[told], e[told], g[told]
    df = len(np.unique(g)) - 1
    if df < 1:
        return _no_rank("only one group was watched when lives ended")
    try:
        statistic, p = survdiff(t, e.astype(int), g)
    except np.linalg.LinAlgError:
        return _no_rank("all lives that were watched ended at one time")
    return LogRank(statistic=float(statistic), df=df, p=float(p))


def _no_rank(why: str) -> LogRank:
    return LogRank(statistic=math.nan, df=0, p=math.nan, refusal=why)


def _log_log_ends(
    curve: pd.DataFrame, cover: float | None
) -> tuple[np.ndarray, np.ndarray]:
    from scipy.special import ndtri

    share = float(INTERVAL_COVER_FRAC) if cover is None else cover
    z = float(ndtri((1 + share) / 2))
    s = curve["surviving_frac"].to_numpy()
    se = curve["se"].to_numpy()
    inside = (s > 0) & (s < 1)
    log_s = np.log(np.where(inside, s, 0.5))
    width = np.exp(z * se / (np.where(inside, s, 0.5) * np.abs(log_s)))
    low = np.where(inside, np.exp(log_s * width), s)
    high = np.where(inside, np.exp(log_s / width), np.where(s > 0, s, np.nan))
    # Where the last one watched has ended, the bound before it still stands.
    return low, pd.Series(high).ffill().fillna(1.0).to_numpy()


def _crossing(hours: pd.Series, share: pd.Series) -> float | None:
    below = share.to_numpy() <= 0.5 + 1e-12
    return float(hours.to_numpy()[below.argmax()]) if below.any() else None


def _no_lives(count: int, why: str) -> Lives:
    columns = ["hours", "at_risk", "ended", "surviving_frac", "se", "low", "high"]
    return Lives(
        lives_count=count,
        ended_count=0,
        median_h=None,
        median_low_h=None,
        median_high_h=None,
        curve=pd.DataFrame({name: pd.Series(dtype=float) for name in columns}),
        refusal=why,
    )
