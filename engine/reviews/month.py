"""The month: what happened, what changed, what is sure, what to decide."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime
from typing import Any
from zoneinfo import ZoneInfo

import numpy as np
import pandas as pd

from engine.errors import NothingToReview
from engine.journal import Journal
from engine.replay import Replay
from engine.reviews import month_rows as rows
from engine.reviews.figures import (
    inside,
    month_after,
    month_words,
    months_between,
    percent,
    significant,
)
from engine.reviews.indicators import BY_ID, INDICATORS, OF_TREATMENTS
from engine.reviews.month_journal import (
    Confirmations,
    baselines,
    confirmations,
    decisions,
    judged_series,
    sign_offs,
    stronger_series,
)
from engine.reviews.month_lines import Line, line, mean_series, share_series
from engine.reviews.wording import counted, listed
from engine.rules import rule_of
from engine.stats.rates import poisson_exact
from engine.stats.trends import theil_sen

CAUTIONS = (
    "Flags are flags until a clinician has confirmed them.",
    "Estimates come from a model built on bench work; they rank setups, they do not"
    " measure patients.",
    "Local policy and licensed practice decide. Nothing here is advice for a patient"
    " now under care.",
)
ROOM_AND_SENSOR = (
    "No exposure limit exists for most of these drugs: these two are for the trend."
)


@dataclass(frozen=True, kw_only=True)
class Month:
    """What one month of treatments says.

    ``lines``          one an indicator, in the order of ``INDICATORS``
    ``flags``          rule_id, title, flags, treatments, share_frac
    ``filters``        filters near or over the limit, rising, or suspected changed
    ``sensors``        ventilators drifting, failed, or past the unfiltered count
    ``dose``           totals in mg with their bands
    ``forgone``        groups of treatments for which another site gives more
    ``snapshot``       what a signature freezes
    """

    month: str
    unit: str | None
    sentence: str
    happened: str
    changed: str
    sure: str
    to_decide: tuple[str, ...]
    treatments: int
    patients: int
    whole: bool
    months: tuple[str, ...]
    units: pd.DataFrame
    lines: tuple[Line, ...]
    flags: pd.DataFrame
    filters: pd.DataFrame
    sensors: pd.DataFrame
    dose: dict[str, float]
    dose_sentence: str
    exposure_sentence: str
    forgone: pd.DataFrame
    confirmations: Confirmations
    decisions: pd.DataFrame
    sign_offs: pd.DataFrame
    snapshot: dict[str, Any]
    cautions: tuple[str, ...]

    def line(self, indicator_id: str) -> Line:
        """The line of one indicator; KeyError if there is none."""
        return {each.indicator.id: each for each in self.lines}[indicator_id]


def months_of(replay: Replay) -> pd.DataFrame:
    """local_month, treatments, patients of every month that has any."""
    return replay.frame(rows.MONTHS)


def last_whole_month(replay: Replay) -> str:
    """The newest month the log goes beyond, else its last.

    Raises   NothingToReview if there are no treatments.
    """
    months = months_of(replay)["local_month"].tolist()
    if not months:
        raise NothingToReview("the log holds no treatments that were given")
    whole = [month for month in months if _is_whole(replay, month)]
    return whole[-1] if whole else months[-1]


def review_month(
    replay: Replay, month: str, journal: Journal | None = None, unit: str | None = None
) -> Month:
    """One calendar month, local time, of the department or of one of its units.

    Raises   NothingToReview if the month (or the unit in it) has no treatments, or
             too few to be shown without pointing at somebody.
    """
    month_words(month)
    rows.make_cells(replay)
    counts = rows.treatment_series(replay, unit)
    everyone = counts[counts["indicator"] == rows.EVERYONE].set_index("local_month")
    _refuse_if_empty(everyone, month, unit, replay)
    months = months_between(str(everyone.index[0]), str(everyone.index[-1]))
    lines = _lines(replay, counts, months, month, unit, journal)
    named = {each.indicator.id: each for each in lines}
    treatments = int(everyone["known"][month])
    patients = int(everyone["patients"][month])
    flags = _flags(replay, month, unit, treatments)
    since, until = _reach(replay, month)
    period = {"since": since, "until": until}
    filters = replay.frame(rows.FILTERS_TO_LOOK_AT, period)
    sensors = replay.frame(
        rows.SENSORS_TO_LOOK_AT,
        {
            **period,
            "month": month,
            "limit": replay.policy.sensors.unfiltered_since_check_count,
        },
    )
    dose = _dose(replay, month, unit)
    checked = confirmations(replay, journal, month, unit)
    whole = _is_whole(replay, month)
    sentence = _sentence(month, unit, treatments, patients, named, filters, whole)
    return Month(
        month=month,
        unit=unit,
        sentence=sentence,
        happened=_happened(lines),
        changed=_changed(lines),
        sure=_sure(lines),
        to_decide=_to_decide(lines, filters, sensors, checked),
        treatments=treatments,
        patients=patients,
        whole=whole,
        months=tuple(months),
        units=replay.frame(rows.UNITS),
        lines=lines,
        flags=flags,
        filters=filters,
        sensors=sensors,
        dose=dose,
        dose_sentence=_dose_sentence(dose),
        exposure_sentence=_exposure_sentence(dose),
        forgone=replay.frame(
            rows.FORGONE,
            {
                "month": month,
                "unit": unit,
                "fewest": replay.policy.cells.treatments_count,
                "patients": replay.policy.cells.patients_count,
            },
        ),
        confirmations=checked,
        decisions=decisions(journal, month),
        sign_offs=sign_offs(journal, month),
        snapshot=_snapshot(replay, journal, month, unit, lines),
        cautions=CAUTIONS,
    )


def _refuse_if_empty(
    everyone: pd.DataFrame, month: str, unit: str | None, replay: Replay
) -> None:
    if everyone.empty and unit is not None:
        raise NothingToReview(f"no treatments of unit {unit}; choose another unit")
    if everyone.empty:
        raise NothingToReview("the log holds no treatments that were given")
    if month not in everyone.index:
        first, last = everyone.index[0], everyone.index[-1]
        raise NothingToReview(
            f"no treatments in {month_words(month)}; the log has {month_words(first)}"
            f" to {month_words(last)}"
        )
    cells = replay.policy.cells
    small = (
        everyone["known"][month] < cells.treatments_count
        or everyone["patients"][month] < cells.patients_count
    )
    if unit is not None and small:
        raise NothingToReview(
            f"unit {unit} has under {cells.treatments_count} treatments or"
            f" {cells.patients_count} patients in {month_words(month)}; so small a"
            " group is not shown"
        )


def _lines(
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

    share("I15", replay.frame(rows.NOT_GIVEN, {**of_unit, "zone": zone}))
    share("I08", replay.frame(rows.FALLS, {"zone": zone}), whole)
    limit = replay.policy.sensors.unfiltered_since_check_count
    share("I18", replay.frame(rows.OVER_COUNT, {**of_unit, "limit": limit}))
    share("I21", judged_series(replay, journal, unit))
    share("I22", stronger_series(journal), whole)
    made["I07"] = (_rises(replay, months), whole)
    made["I11"] = (_delivered(replay, months, unit), _BAND)
    minutes = replay.frame(rows.PERSON_MINUTES, of_unit)
    made["I13"] = (mean_series(minutes, months, 100.0), ())
    made["I14"] = (mean_series(replay.frame(rows.ROOM_UG, of_unit), months), ())
    made["I19"] = (_events(replay, counts, months, zone, unit), whole)
    return made


_BAND = ("The interval is that of the median, not the spread of treatments.",)


def _rises(replay: Replay, months: list[str]) -> pd.DataFrame:
    """Median slope of the filters whose last reading fell in each month."""
    readings = replay.frame(rows.RISES, {"zone": replay.log.site_zone})
    enough = replay.policy.filters.readings_for_a_trend_count
    found = []
    for _, own in readings.groupby("filter_id", sort=False):
        if len(own) < enough:
            found.append((own["local_month"].iloc[-1], np.nan))
            continue
        slope = theil_sen(own["treatments"].to_numpy(), own["resistance"].to_numpy())
        usable = slope.slope if not slope.refusal else np.nan
        found.append((own["local_month"].iloc[-1], usable))
    table = pd.DataFrame(found, columns=["local_month", "slope"])
    return _medians(table, "slope", months)


def _medians(table: pd.DataFrame, column: str, months: list[str]) -> pd.DataFrame:
    made = []
    for month in months:
        own = table.loc[table["local_month"] == month, column]
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
    levels = replay.frame(rows.DELIVERED, {"unit": unit}).set_index("local_month")
    above = rows.summed(replay.frame(rows.ABOVE_MEDIAN, {"unit": unit}))
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
    events = replay.frame(rows.SENSOR_EVENTS, {"zone": zone})
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


def _flags(
    replay: Replay, month: str, unit: str | None, treatments: int
) -> pd.DataFrame:
    flags = replay.frame(rows.FLAGS, {"month": month, "unit": unit})
    told = [rule_of(rule_id) for rule_id in flags["rule_id"]]
    return flags.assign(
        title=[rule.title for rule in told],
        strength=[rule.strength for rule in told],
        share_frac=flags["treatments"] / max(treatments, 1),
    )


def _reach(replay: Replay, month: str) -> tuple[datetime, datetime]:
    """First moment of the month and of the next, in UTC as the log's times are."""
    zone = ZoneInfo(replay.log.site_zone)

    def start(of: str) -> datetime:
        local = datetime.fromisoformat(f"{of}-01T00:00:00").replace(tzinfo=zone)
        return local.astimezone(ZoneInfo("UTC")).replace(tzinfo=None)

    return start(month), start(month_after(month))


def _is_whole(replay: Replay, month: str) -> bool:
    """Whether the log goes to the last day of the month at least."""
    last = replay.frame(rows.LAST_RECORD, {"zone": replay.log.site_zone})["last_at"]
    if pd.isna(last.iloc[0]):
        return False
    end = pd.Timestamp(f"{month_after(month)}-01") - pd.Timedelta(days=1)
    return bool(last.iloc[0] >= end)


def _dose(replay: Replay, month: str, unit: str | None) -> dict[str, float]:
    found = replay.frame(rows.DOSE_OF_MONTH, {"month": month, "unit": unit})
    return {str(name): float(value) for name, value in found.iloc[0].items()}


def _sentence(
    month: str,
    unit: str | None,
    treatments: int,
    patients: int,
    lines: Mapping[str, Line],
    filters: pd.DataFrame,
    whole: bool,
) -> str:
    where = f", unit {unit}" if unit else ""
    cut = "" if whole else " so far (the log ends inside the month)"
    parts = [
        f"{month_words(month)}{where}: {counted(treatments, 'treatment')} in"
        f" {counted(patients, 'patient')}{cut}."
    ]
    fitted = lines["I01"]
    if fitted.value is not None:
        unknown = percent(fitted.unknown_frac)
        told = fitted.indicator.sentence.format(value=percent(fitted.value))
        parts.append(f"{told} (unknown {unknown}).")
    elif fitted.unknown:
        parts.append("Whether filters were fitted cannot be told.")
    states = filters["state"].value_counts()
    near = [
        f"{counted(int(states[state]), 'filter')} {words}"
        for state, words in (
            ("over_limit", "went over the limit"),
            ("near_limit", "came near it"),
        )
        if state in states
    ]
    moved = [each for each in lines.values() if each.change_shown]
    shift = f"{counted(len(moved), 'indicator')} changed" if moved else ""
    rest = listed([*near, *([shift] if shift else [])])
    if rest:
        parts.append(f"{rest[0].upper()}{rest[1:]}.")
    return " ".join(parts)


def _happened(lines: tuple[Line, ...]) -> str:
    told = [each.says for each in lines if each.look and each.value is not None]
    if not told:
        return "Nothing lies outside its limits or past the figure it is held against."
    return " ".join(told[:4])


def _changed(lines: tuple[Line, ...]) -> str:
    told = [
        f"{each.indicator.title}: {each.changed[0].lower()}{each.changed[1:]}"
        for each in lines
        if each.change_shown
    ]
    if not told:
        return "No difference from the month before goes beyond its interval."
    return " ".join(told[:5])


def _sure(lines: tuple[Line, ...]) -> str:
    dim = [
        f"{inside(each.indicator.title)} ({percent(each.unknown_frac)} unknown)"
        for each in lines
        if each.known + each.unknown and each.unknown_frac > 0.2
    ]
    if not dim:
        return "Every figure rests on records of which no more than a fifth is blank."
    return f"Least sure, because much is not recorded: {listed(dim[:5])}."


def _to_decide(
    lines: tuple[Line, ...],
    filters: pd.DataFrame,
    sensors: pd.DataFrame,
    checked: Confirmations,
) -> tuple[str, ...]:
    asked = [
        f"{each.indicator.title}: {each.figure}, {_past(each)}. Is it the setup, the"
        " supply or the record?"
        for each in lines
        if each.look
    ]
    over = int((filters["state"] == "over_limit").sum())
    if over:
        asked.append(
            f"{counted(over, 'filter')} over the department's limit: is the change"
            " interval right?"
        )
    if len(sensors):
        asked.append(
            f"{counted(len(sensors), 'ventilator')} with a sensor to look at: is a"
            " check due?"
        )
    if checked.flags and not checked.reviewed:
        asked.append(
            f"None of {counted(checked.flags, 'flag')} has been reviewed: draw a sample"
            " before acting on them."
        )
    return tuple(asked[:6])


def _past(each: Line) -> str:
    if bool(each.months["outside"].iloc[-1]):
        return "outside the limits of earlier months"
    return f"surely {each.indicator.start_words}"


def _dose_sentence(dose: Mapping[str, float]) -> str:
    told = dose["shown"] + dose["not_shown"]
    if not told:
        return "Whether another site would have given more cannot be told this month."
    text = (
        f"By the estimate another site of the same generator gives more, beyond the"
        f" band, in {counted(int(dose['shown']), 'treatment')} of {told:,.0f} that"
        f" could be estimated ({percent(dose['shown'] / told)})."
    )
    if dose["unknown"]:
        text += f" For {counted(int(dose['unknown']), 'treatment')} it cannot be told."
    return text


def _exposure_sentence(dose: Mapping[str, float]) -> str:
    if not dose["estimated"]:
        return "What reached room and sensors cannot be told this month."

    def told(name: str) -> str:
        low, high = dose[f"{name}_low_mg"], dose[f"{name}_high_mg"]
        middle = significant(dose[f"{name}_mg"])
        return f"{middle} mg ({significant(low)} to {significant(high)})"

    return (
        f"By the estimate {told('room')} reached the room and {told('sensor')} the"
        f" expiratory sensors, from {counted(int(dose['estimated']), 'treatment')} of"
        f" {dose['treatments']:,.0f}. {ROOM_AND_SENSOR}"
    )


def _snapshot(
    replay: Replay,
    journal: Journal | None,
    month: str,
    unit: str | None,
    lines: tuple[Line, ...],
) -> dict[str, Any]:
    """Everything a signature is put under, small enough for the journal."""
    stamp = replay.stamp
    return {
        "month": month,
        "unit": unit,
        "engine_version": stamp["engine_version"],
        "log_fingerprint": stamp["log_fingerprint"],
        "policy_name": stamp["policy_name"],
        "policy_hash": stamp["policy_hash"],
        "journal_head": journal.head if journal is not None else None,
        "figures": {
            each.indicator.id: {
                "value": None if each.value is None else round(each.value, 6),
                "known": each.known,
                "unknown": each.unknown,
                "patients": each.patients,
            }
            for each in lines
        },
    }
