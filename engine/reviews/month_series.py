"""The series behind each line of the month: counts, medians and rates by month."""

from __future__ import annotations

import numpy as np
import pandas as pd

from engine.journal import Journal
from engine.replay import Replay
from engine.reviews import month_rows as rows
from engine.reviews.indicators import BY_ID, INDICATORS, OF_TREATMENTS
from engine.reviews.month_journal import baselines, judged_series, stronger_series
from engine.reviews.month_lines import Line, line, mean_series, share_series
from engine.stats.rates import poisson_exact


def all_lines(
    replay: Replay,
    counts: pd.DataFrame,
    months: list[str],
    month: str,
    unit: str | None,
    journal: Journal | None,
) -> tuple[Line, ...]:
    agreed = baselines(journal)
    ready = dict(tuple(counts.groupby("indicator")))
    none = counts.head(0)
    made: dict[str, tuple[pd.DataFrame, tuple[str, ...]]] = {}
    for each in OF_TREATMENTS:
        made[each.id] = (share_series(each, ready.get(each.id, none), months), ())
    made |= _other_series(replay, counts, months, unit, journal)
    return tuple(
        line(
            each,
            made[each.id][0],
            month,
            replay.policy,
            agreed.get(each.id),
            made[each.id][1],
        )
        for each in INDICATORS
    )


def _other_series(
    replay: Replay,
    counts: pd.DataFrame,
    months: list[str],
    unit: str | None,
    journal: Journal | None,
) -> dict[str, tuple[pd.DataFrame, tuple[str, ...]]]:
    zone = replay.log.site_zone
    of_unit = {"unit": unit}
    whole = ("Counted for the whole department.",) if unit else ()
    made: dict[str, tuple[pd.DataFrame, tuple[str, ...]]] = {}

    def share(name: str, parts: pd.DataFrame, notes: tuple[str, ...] = ()) -> None:
        series = share_series(BY_ID[name], rows.summed(parts), months)
        made[name] = (series, notes)

    share("I15", replay.history(rows.NOT_GIVEN, {**of_unit, "zone": zone}))
    share("I08", replay.history(rows.FALLS, {"zone": zone}), whole)
    limit = replay.policy.sensors.unfiltered_since_check_count
    share("I18", replay.history(rows.OVER_COUNT, {**of_unit, "limit": limit}))
    share("I21", judged_series(replay, journal, unit))
    share("I22", stronger_series(journal), whole)
    made["I07"] = (_rises(replay, months), whole)
    made["I11"] = (_delivered(replay, months, unit), _BAND)
    minutes = replay.history(rows.PERSON_MINUTES, of_unit)
    made["I13"] = (mean_series(minutes, months, 100.0), ())
    made["I14"] = (mean_series(replay.history(rows.ROOM_UG, of_unit), months), ())
    made["I19"] = (_events(replay, counts, months, zone, unit), whole)
    return made


_BAND = ("The interval is that of the median, not the spread of treatments.",)


def _rises(replay: Replay, months: list[str]) -> pd.DataFrame:
    """Median slope of the filters whose last reading fell in each month."""
    rows.make_rises(replay)
    return _medians(replay.history(rows.RISES), "slope", months)


def _medians(table: pd.DataFrame, column: str, months: list[str]) -> pd.DataFrame:
    made = []
    by_month = dict(tuple(table.groupby("local_month")[column]))
    for month in months:
        own = by_month.get(month, table[column].head(0))
        values = np.sort(own.dropna().to_numpy(float))
        value, low, high = _median_with_ends(values)
        made.append((month, value, low, high, len(values), len(own) - len(values)))
    columns = ["local_month", "value", "low", "high", "known", "unknown"]
    done = pd.DataFrame(made, columns=columns)
    return done.assign(
        count=done["value"],
        total=done["value"],
        patients=0,
        clusters=0,
        design_effect=1.0,
    )


def _median_with_ends(values: np.ndarray) -> tuple[float, float, float]:
    """Median and its exact order-statistic interval; no interval below six values."""
    from scipy.stats import binom

    n = len(values)
    if n == 0:
        return np.nan, np.nan, np.nan
    rank = int(binom.ppf(0.025, n, 0.5)) - 1
    if n < 6 or rank < 0:
        return float(np.median(values)), np.nan, np.nan
    return float(np.median(values)), float(values[rank]), float(values[n - 1 - rank])


def _delivered(replay: Replay, months: list[str], unit: str | None) -> pd.DataFrame:
    """Median delivered share by month, its interval allowing for patients alike."""
    levels = replay.history(rows.DELIVERED, {"unit": unit}).set_index("local_month")
    above = rows.summed(replay.history(rows.ABOVE_MEDIAN, {"unit": unit}))
    effect = share_series(BY_ID["I12"], above, months).set_index("local_month")
    made = []
    for month in months:
        if month not in levels.index or not levels.loc[month, "known"]:
            unknown = levels.loc[month, "unknown"] if month in levels.index else 0
            made.append((month, *[np.nan] * 5, 0, unknown, 0, 1.0))
            continue
        own = levels.loc[month]
        q = np.asarray(own["levels"], float)
        d = float(effect["design_effect"][month])
        half = 1.96 * 0.5 / np.sqrt(own["known"] / d)
        low, high = np.interp([0.5 - half, 0.5 + half], rows.PERCENTILES, q)
        made.append(
            (
                *(month, q[49], low, high, q[4], q[94]),
                *own[["known", "unknown", "patients"]],
                d,
            )
        )
    columns = "local_month value low high p5 p95 known unknown patients design_effect"
    done = pd.DataFrame(made, columns=columns.split())
    return done.assign(
        count=done["value"], total=done["value"], clusters=done["patients"]
    )


def _events(
    replay: Replay,
    counts: pd.DataFrame,
    months: list[str],
    zone: str,
    unit: str | None,
) -> pd.DataFrame:
    """Flow-sensor events per 1,000 treatments, exact Poisson interval."""
    events = replay.history(rows.SENSOR_EVENTS, {"zone": zone})
    if unit is not None:
        counts = rows.treatment_series(replay, None)
    everyone = counts[counts["indicator"] == rows.EVERYONE].set_index("local_month")
    known = everyone["known"].reindex(months).fillna(0.0)
    seen = events.set_index("local_month")["events"].reindex(months).fillna(0.0)
    low, high = poisson_exact(seen, known / 1000.0)
    value = 1000.0 * seen / known.replace(0, np.nan)
    return pd.DataFrame(
        {
            "local_month": months,
            "value": value.to_numpy(),
            "low": np.where(known > 0, low, np.nan),
            "high": np.where(known > 0, high, np.nan),
            "count": seen.to_numpy(),
            "known": known.to_numpy(),
            "unknown": 0.0,
            "patients": 0.0,
            "clusters": 0.0,
            "design_effect": 1.0,
        }
    )
