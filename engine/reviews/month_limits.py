"""Where the limits of a line stand, whether it creeps, what changed in a month."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import pandas as pd

from engine.evidence.review import BASELINE_POINTS_COUNT, FEW_PATIENTS_COUNT
from engine.policy import Policy
from engine.reviews.figures import month_words
from engine.reviews.indicators import Indicator
from engine.stats.charts import Limits, exact_p_limits, exact_u_limits
from engine.stats.cusum import ShareCusum, share_cusum

PER_THOUSAND = 1000.0


@dataclass(frozen=True, kw_only=True)
class Baseline:
    """The months whose pooled figure the limits stand on; ``signed`` if decided."""

    since: str
    until: str
    months_count: int
    signed: bool

    @property
    def firm(self) -> bool:
        return self.months_count >= int(BASELINE_POINTS_COUNT)

    @property
    def words(self) -> str:
        """What the limits stand on."""
        span = f"{month_words(self.since)} to {month_words(self.until)}"
        how = "frozen by decision" if self.signed else "all months before this one"
        needed = int(BASELINE_POINTS_COUNT)
        firm = "" if self.firm else f"; provisional until there are {needed}"
        return f"Limits stand on {span} ({self.months_count} months, {how}){firm}."


def baseline_of(
    months: pd.DataFrame, signed: tuple[str, str] | None
) -> Baseline | None:
    """The months the limits stand on: those signed for, else all months before."""
    with_figure = months[months["value"].notna()]
    if signed is not None:
        inside = with_figure["local_month"].between(*signed)
        since, until = signed
    else:
        inside = with_figure["local_month"] < months["local_month"].iloc[-1]
        if not inside.any():
            return None
        since = with_figure.loc[inside, "local_month"].iloc[0]
        until = with_figure.loc[inside, "local_month"].iloc[-1]
    count = int(inside.sum())
    if count < 2:
        return None
    return Baseline(
        since=since, until=until, months_count=count, signed=signed is not None
    )


def centre_of(months: pd.DataFrame, baseline: Baseline) -> float:
    inside = months[months["local_month"].between(baseline.since, baseline.until)]
    if "total" in inside or inside["count"].isna().any():
        return float(inside["value"].median())
    known = inside["known"].sum()
    return float(inside["count"].sum() / known) if known else math.nan


def limits_of(
    indicator: Indicator, months: pd.DataFrame, baseline: Baseline | None
) -> Limits | None:
    if baseline is None or indicator.kind == "amount":
        return None
    centre = centre_of(months, baseline)
    if not centre > 0 or (indicator.kind != "rate" and not centre < 1):
        return None  # none seen is no reason to call the first one out of order
    if indicator.kind == "rate":
        done = exact_u_limits(months["count"], months["known"], centre)
        return Limits(
            centre=PER_THOUSAND * done.centre,
            low=PER_THOUSAND * done.low,
            high=PER_THOUSAND * done.high,
            outside=done.outside,
        )
    effective = months["known"] / months["design_effect"]
    # The observed share at the effective size: what the limits are compared with.
    seen = np.where(months["known"] > 0, months["value"] * np.floor(effective), 0.0)
    done = exact_p_limits(seen, effective, centre)
    few = (months["patients"] < int(FEW_PATIENTS_COUNT)).to_numpy()
    if indicator.kind == "counted":
        few = np.zeros(len(months), bool)
    return Limits(
        centre=done.centre,
        low=np.where(few, np.nan, done.low),
        high=np.where(few, np.nan, done.high),
        outside=done.outside & ~few,
    )


def change_of(
    months: pd.DataFrame, policy: Policy, indicator: Indicator
) -> tuple[float | None, float, float]:
    """This month less the one before, by adding the two intervals in squares."""
    if len(months) < 2:
        return None, math.nan, math.nan
    before, now = months.iloc[-2], months.iloc[-1]
    fewest = policy.cells.percent_needs_count if indicator.is_share else 1
    if min(before["known"], now["known"]) < fewest:
        return None, math.nan, math.nan
    few = min(before["patients"], now["patients"]) < policy.cells.patients_count
    if indicator.kind == "treatments" and few:
        return None, math.nan, math.nan
    change = now["value"] - before["value"]
    if not math.isfinite(change):
        return None, math.nan, math.nan
    down = math.hypot(now["value"] - now["low"], before["high"] - before["value"])
    up = math.hypot(now["high"] - now["value"], before["value"] - before["low"])
    return float(change), float(change - down), float(change + up)


def outside_side(months: pd.DataFrame) -> int:
    """1 where the last month lies over its limit, -1 below, 0 inside."""
    now = months.iloc[-1]
    if not now["outside"]:
        return 0
    return 1 if now["value"] > now["centre"] else -1


def cusum_of(
    indicator: Indicator, months: pd.DataFrame, baseline: Baseline | None
) -> ShareCusum | None:
    """The one cumulative sum of an indicator, towards its unwanted side."""
    if baseline is None or indicator.kind != "treatments":
        return None
    if indicator.wanted == "none":
        return None
    centre = centre_of(months, baseline)
    if not 0 < centre < 1:
        return None
    effective = np.floor((months["known"] / months["design_effect"]).to_numpy())
    seen = np.where(months["known"] > 0, months["value"] * effective, 0.0)
    return _kept_cusum(
        tuple(np.round(seen, 6)),
        tuple(effective),
        round(centre, 9),
        indicator.wanted == "down",
    )


@lru_cache(maxsize=512)
def _kept_cusum(
    seen: tuple[float, ...], n: tuple[float, ...], centre: float, upward: bool
) -> ShareCusum:
    return share_cusum(seen, n, centre, upward)
