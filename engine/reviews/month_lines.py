"""One line of the month for each indicator: figure, interval, series, change."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import pandas as pd

from engine.evidence.filter import INTERVAL_COVER_FRAC
from engine.evidence.review import (
    BASELINE_POINTS_COUNT,
    FEW_PATIENTS_COUNT,
)
from engine.policy import Policy
from engine.reviews.figures import (
    month_words,
    percent,
    percent_range,
    points,
    signed,
    significant,
)
from engine.reviews.indicators import Indicator
from engine.reviews.wording import counted
from engine.stats.charts import (
    Limits,
    RunRules,
    exact_p_limits,
    exact_u_limits,
    run_rules,
)
from engine.stats.rates import clopper_pearson, design_effect, none_found_upper, wilson

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


def shown(indicator: Indicator, value: float) -> str:
    """A value of this indicator with its unit."""
    if indicator.unit == "%":
        return percent(value)
    return f"{significant(value)} {indicator.unit}"


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
    few = _too_few(indicator, now, policy)
    frozen = _baseline(months, baseline)
    limits = _limits(indicator, months, frozen)
    months = months.assign(
        centre=limits.centre if limits else np.nan,
        limit_low=limits.low if limits else np.nan,
        limit_high=limits.high if limits else np.nan,
        outside=limits.outside if limits else False,
    )
    run = run_rules(
        months["value"], None if frozen is None else _centre(months, frozen)
    )
    value = None if few else _or_none(now["value"])
    change, low, high = _change(months, policy, indicator)
    change_shown = change is not None and (low > 0 or high < 0)
    notes = (*few, *_notes(now, policy), *notes)
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
        baseline=frozen,
        change=change,
        change_low=low,
        change_high=high,
        change_shown=change_shown,
        says=_says(indicator, now, value),
        changed=_changed(indicator, months, change, low, high, run),
        notes=notes,
        look=_look(indicator, now, value, bool(months["outside"].iloc[-1])),
    )


def _too_few(indicator: Indicator, now: pd.Series, policy: Policy) -> tuple[str, ...]:
    """Why no figure is printed, where too few are known."""
    known, patients = int(now["known"]), int(now["patients"])
    if indicator.kind == "rate":
        return ()
    if known == 0:
        return ("Nothing is known of it this month.",)
    fewest = policy.cells.percent_needs_count
    if indicator.is_share and known < fewest:
        return (
            f"{known} known; a percentage needs {fewest}, so the counts stand alone.",
        )
    if indicator.kind == "treatments" and patients < policy.cells.patients_count:
        return (
            f"{counted(patients, 'patient')} only; a percentage of so few would be"
            " theirs.",
        )
    return ()


def _notes(now: pd.Series, policy: Policy) -> tuple[str, ...]:
    notes = []
    total = now["known"] + now["unknown"]
    if total and now["unknown"] / total > policy.records.unknown_share_caution_frac:
        notes.append(
            f"{percent(now['unknown'] / total)} unknown: record quality limits this"
            " figure."
        )
    if 0 < now["patients"] < int(FEW_PATIENTS_COUNT) and now["clusters"] > 0:
        notes.append(f"Dominated by {counted(int(now['patients']), 'patient')}.")
    if now["design_effect"] >= 1.5 and now["patients"] >= int(FEW_PATIENTS_COUNT):
        notes.append(
            f"{int(now['known']):,} treatments tell as much as"
            f" {now['known'] / now['design_effect']:.0f} would from as many patients,"
            " because treatments of one patient are alike."
        )
    return tuple(notes)


def _baseline(months: pd.DataFrame, signed: tuple[str, str] | None) -> Baseline | None:
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


def _centre(months: pd.DataFrame, baseline: Baseline) -> float:
    inside = months[months["local_month"].between(baseline.since, baseline.until)]
    if "total" in inside or inside["count"].isna().any():
        return float(inside["value"].median())
    known = inside["known"].sum()
    return float(inside["count"].sum() / known) if known else math.nan


def _limits(
    indicator: Indicator, months: pd.DataFrame, baseline: Baseline | None
) -> Limits | None:
    if baseline is None or indicator.kind == "amount":
        return None
    centre = _centre(months, baseline)
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


def _change(
    months: pd.DataFrame, policy: Policy, indicator: Indicator
) -> tuple[float | None, float, float]:
    """This month less the one before, by adding the two intervals in squares."""
    if len(months) < 2:
        return None, math.nan, math.nan
    before, now = months.iloc[-2], months.iloc[-1]
    fewest = policy.cells.percent_needs_count if indicator.is_share else 1
    if min(before["known"], now["known"]) < fewest:
        return None, math.nan, math.nan
    change = now["value"] - before["value"]
    if not math.isfinite(change):
        return None, math.nan, math.nan
    down = math.hypot(now["value"] - now["low"], before["high"] - before["value"])
    up = math.hypot(now["high"] - now["value"], before["value"] - before["low"])
    return float(change), float(change - down), float(change + up)


def _says(indicator: Indicator, now: pd.Series, value: float | None) -> str:
    """The line in one sentence."""
    known, patients = int(now["known"]), int(now["patients"])
    if value is None:
        if not known:
            return f"{indicator.title}: nothing known this month."
        return f"{indicator.title}: {now['count']:.0f} of {known:,} known."
    among = f"{known:,} known"
    if indicator.kind in {"treatments", "amount"} and patients:
        among = f"{counted(known, 'treatment')} in {counted(patients, 'patient')}"
    if indicator.kind == "rate":
        among = f"{now['count']:.0f} in {counted(known, 'treatment')}"
    if indicator.is_share and now["count"] == 0:
        most = percent(float(none_found_upper(known / now["design_effect"])))
        return f"{indicator.title}: none in {among}; up to {most} would fit that."
    text = f"{indicator.title}: {shown(indicator, value)}"
    if indicator.unit == "%":
        span = percent_range(now["low"], now["high"])
    else:
        span = f"{significant(now['low'])} to {significant(now['high'])}"
    if math.isfinite(now["low"]):
        text += f" ({span})"
    return f"{text}, {among}."


def _changed(
    indicator: Indicator,
    months: pd.DataFrame,
    change: float | None,
    low: float,
    high: float,
    run: RunRules,
) -> str:
    """What changed since the month before, and whether the series shows a shift."""
    if change is None:
        if len(months) < 2:
            return "First month: nothing to compare with."
        return "Too few in one of the two months to compare."
    before = month_words(months["local_month"].iloc[-2]).split()[0]
    if indicator.unit == "%":
        size = points(change)
        span = points(low, high)
    else:
        size = f"{significant(abs(change))} {indicator.unit}"
        span = f"{signed(low)} to {signed(high)}"
    way = "Up" if change > 0 else "Down"
    if not math.isfinite(low):
        told = f"{way} {size} since {before}; no interval."
    elif low > 0 or high < 0:
        told = f"{way} {size} since {before} ({span})."
    else:
        told = f"No change shown since {before} ({span})."
    if run.signal:
        told += " The run of months shows a shift."
    return told


def _look(
    indicator: Indicator, now: pd.Series, value: float | None, outside: bool
) -> bool:
    """Past its start with the whole interval, or outside its limits."""
    if outside:
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
