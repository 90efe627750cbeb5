"""One line of the month in words: figure, change, and what to be careful of."""

from __future__ import annotations

import math

import pandas as pd

from engine.evidence.review import FEW_PATIENTS_COUNT
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
from engine.stats.charts import RunRules
from engine.stats.cusum import ShareCusum
from engine.stats.rates import none_found_upper


def shown(indicator: Indicator, value: float) -> str:
    """A value of this indicator with its unit."""
    if indicator.unit == "%":
        return percent(value)
    return f"{significant(value)} {indicator.unit}"


def too_few(indicator: Indicator, now: pd.Series, policy: Policy) -> tuple[str, ...]:
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


def notes_of(now: pd.Series, policy: Policy) -> tuple[str, ...]:
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


def says(indicator: Indicator, now: pd.Series, value: float | None) -> str:
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


def changed(
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


def creeping(indicator: Indicator, side: int, cusum: ShareCusum | None) -> str:
    """What the limits and the cumulative sum add; empty where neither signals."""
    if side and side == indicator.wanted_side:
        return " Beyond its limits on the wanted side."
    if side:
        return " Outside its limits."
    if cusum is not None and cusum.signal:
        way = "rise" if indicator.wanted == "down" else "fall"
        return f" The months together point to a {way} (cumulative sum)."
    return ""
