"""One line of the month for each indicator: figure, interval, series, change."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import pandas as pd

from engine.evidence.filter import INTERVAL_COVER_FRAC
from engine.policy import Policy
from engine.reviews.indicators import Indicator
from engine.reviews.month_limits import (
    Baseline,
    baseline_of,
    centre_of,
    change_of,
    cusum_of,
    limits_of,
    outside_side,
)
from engine.reviews.month_line_words import (
    changed,
    creeping,
    notes_of,
    says,
    shown,
    too_few,
)
from engine.stats.charts import (
    RunRules,
    run_rules,
)
from engine.stats.cusum import ShareCusum
from engine.stats.rates import clopper_pearson, design_effect, wilson


@dataclass(frozen=True, kw_only=True)
class Line:
    """What the month says of one indicator.

    ``months``    one row a month: local_month, value, low, high, count, known,
                  unknown, patients, design_effect, limit_low, limit_high, outside
    ``value``     None where too few are known to print one
    ``changed``   what changed since the month before, in words
    ``look``      it is past its start or outside its limits
    """

    indicator: Indicator
    value: float | None
    low: float
    high: float
    count: float
    known: int
    unknown: int
    patients: int
    design_effect: float
    months: pd.DataFrame
    run: RunRules
    cusum: ShareCusum | None
    baseline: Baseline | None
    change: float | None
    change_low: float
    change_high: float
    change_shown: bool
    says: str
    changed: str
    notes: tuple[str, ...]
    look: bool

    @property
    def unknown_frac(self) -> float:
        total = self.known + self.unknown
        return self.unknown / total if total else math.nan

    @property
    def figure(self) -> str:
        """The figure itself with its unit, or that there is none."""
        if self.value is None:
            return f"{self.count:g} of {self.known:,}" if self.known else "none known"
        return shown(self.indicator, self.value)


def share_series(
    indicator: Indicator, counts: pd.DataFrame, months: list[str]
) -> pd.DataFrame:
    """Proportion with its interval by month; months without any stay empty."""
    table = counts.set_index("local_month").reindex(months)
    totals = ["count", "known", "unknown", "patients", "clusters", "n2", "x2"]
    table[totals] = table[totals].fillna(0.0)
    effect = design_effect(
        table["clusters"], table["known"], table["count"], table["n2"], table["x2"]
    )
    method = clopper_pearson if indicator.kind == "counted" else wilson
    low, high = method(table["count"], table["known"], None, effect)
    value = np.where(
        table["known"] > 0, table["count"] / table["known"].replace(0, np.nan), np.nan
    )
    return table.assign(
        value=value, low=low, high=high, design_effect=effect
    ).reset_index(names="local_month")


def mean_series(
    sums: pd.DataFrame, months: list[str], per: float = 1.0
) -> pd.DataFrame:
    """Total over how many, its interval from how patients differ.

    The linearised variance of a ratio, patients as clusters; a month of one patient
    has no interval.
    """
    table = sums.set_index("local_month").reindex(months)
    totals = ["total", "known", "unknown", "patients", "clusters", "y2", "yk", "k2"]
    table[totals] = table[totals].fillna(0.0)
    known = table["known"].replace(0, np.nan)
    mean = table["total"] / known
    k = table["clusters"]
    spread = table["y2"] - 2 * mean * table["yk"] + mean**2 * table["k2"]
    variance = np.maximum(spread, 0) * k / (k - 1).where(k > 1) / known**2
    half = _z() * np.sqrt(variance)
    return table.assign(
        value=per * mean,
        low=per * np.maximum(mean - half, 0),
        high=per * (mean + half),
        count=table["total"],
        design_effect=1.0,
    ).reset_index(names="local_month")


def line(
    indicator: Indicator,
    months: pd.DataFrame,
    month: str,
    policy: Policy,
    baseline: tuple[str, str] | None = None,
    notes: tuple[str, ...] = (),
) -> Line:
    """The line of one month from the series of an indicator."""
    months = months[months["local_month"] <= month].reset_index(drop=True)
    now = months.iloc[-1]
    few = too_few(indicator, now, policy)
    frozen = baseline_of(months, baseline)
    limits = limits_of(indicator, months, frozen)
    months = months.assign(
        centre=limits.centre if limits else np.nan,
        limit_low=limits.low if limits else np.nan,
        limit_high=limits.high if limits else np.nan,
        outside=limits.outside if limits else False,
    )
    run = run_rules(
        months["value"],
        None if frozen is None else centre_of(months, frozen),
        fixed_before=frozen is not None and frozen.signed,
    )
    value = None if few else _or_none(now["value"])
    change, low, high = change_of(months, policy, indicator)
    change_shown = change is not None and (low > 0 or high < 0)
    side = outside_side(months)
    cusum = cusum_of(indicator, months, frozen)
    notes = (*few, *notes_of(now, policy), *notes)
    return Line(
        indicator=indicator,
        value=value,
        low=float(now["low"]),
        high=float(now["high"]),
        count=float(now["count"]),
        known=int(now["known"]),
        unknown=int(now["unknown"]),
        patients=int(now["patients"]),
        design_effect=float(now["design_effect"]),
        months=months,
        run=run,
        cusum=cusum,
        baseline=frozen,
        change=change,
        change_low=low,
        change_high=high,
        change_shown=change_shown,
        says=says(indicator, now, value),
        changed=changed(indicator, months, change, low, high, run)
        + creeping(indicator, side, cusum),
        notes=notes,
        look=_look(indicator, now, value, side),
    )


def _look(indicator: Indicator, now: pd.Series, value: float | None, side: int) -> bool:
    """Past its start with the whole interval, or outside its limits where unwanted."""
    if side and side != indicator.wanted_side:
        return True
    if value is None or indicator.start is None:
        return False
    start = float(indicator.start)
    if indicator.looks_below:
        return bool(now["high"] < start)
    return bool(now["low"] > start)


def _or_none(value: float) -> float | None:
    return float(value) if math.isfinite(value) else None


def _z() -> float:
    from scipy.special import ndtri

    return float(ndtri((1 + float(INTERVAL_COVER_FRAC)) / 2))
