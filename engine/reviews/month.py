"""The month: what happened, what changed, what is sure, what to decide."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from typing import Any
from zoneinfo import ZoneInfo

import pandas as pd

from engine.errors import NothingToReview
from engine.journal import Journal
from engine.replay import Replay
from engine.reviews import month_rows as rows
from engine.reviews import month_words as words
from engine.reviews.figures import month_after, month_words, months_between
from engine.reviews.month_journal import (
    Confirmations,
    confirmations,
    decisions,
    open_decisions,
)
from engine.reviews.month_lines import Line
from engine.reviews.month_series import all_lines
from engine.reviews.signatures import sign_offs, stamps_of
from engine.rules import rule_of

CAUTIONS = (
    "Flags are flags until a clinician has confirmed them.",
    "Estimates come from a model built on bench work; they rank setups, they do not"
    " measure patients.",
    "Local policy and licensed practice decide. Nothing here is advice for a patient"
    " now under care.",
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
    rare_sentence: str
    forgone: pd.DataFrame
    confirmations: Confirmations
    decisions: pd.DataFrame
    open_decisions: pd.DataFrame
    sign_offs: pd.DataFrame
    snapshot: dict[str, Any]
    cautions: tuple[str, ...]

    def line(self, indicator_id: str) -> Line:
        """The line of one indicator; KeyError if there is none."""
        return {each.indicator.id: each for each in self.lines}[indicator_id]


def months_of(replay: Replay) -> pd.DataFrame:
    """local_month, treatments, patients of every month that has any."""
    return replay.history(rows.MONTHS)


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
    lines = all_lines(replay, counts, months, month, unit, journal)
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
    checked = confirmations(replay, journal, month, unit, flags)
    whole = _is_whole(replay, month)
    sentence = words.sentence(month, unit, treatments, patients, named, filters, whole)
    return Month(
        month=month,
        unit=unit,
        sentence=sentence,
        happened=words.happened(lines),
        changed=words.changed(lines),
        sure=words.sure(lines),
        to_decide=words.to_decide(lines, filters, sensors, checked),
        treatments=treatments,
        patients=patients,
        whole=whole,
        months=tuple(months),
        units=replay.history(rows.UNITS),
        lines=lines,
        flags=flags,
        filters=filters,
        sensors=sensors,
        dose=dose,
        dose_sentence=words.dose_sentence(dose),
        exposure_sentence=words.exposure_sentence(dose),
        rare_sentence=_rare(replay, until),
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
        open_decisions=open_decisions(journal, month),
        sign_offs=sign_offs(journal, f"month:{month}"),
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
    last = replay.history(rows.LAST_RECORD, {"zone": replay.log.site_zone})["last_at"]
    if pd.isna(last.iloc[0]):
        return False
    end = pd.Timestamp(f"{month_after(month)}-01") - pd.Timedelta(days=1)
    return bool(last.iloc[0] >= end)


def _dose(replay: Replay, month: str, unit: str | None) -> dict[str, float]:
    found = replay.frame(rows.DOSE_OF_MONTH, {"month": month, "unit": unit})
    return {str(name): float(value) for name, value in found.iloc[0].items()}


def _rare(replay: Replay, until: datetime) -> str:
    """Events and treatments of the whole department up to the end of the month."""
    events = replay.history(rows.EVENT_PLACES)
    places = events.loc[events["on_day"] < pd.Timestamp(until), "place"]
    given = replay.frame(rows.GIVEN_UNTIL, {"until": until})
    return words.rare_events(places.to_numpy(float), float(given["n"].iloc[0]))


def _snapshot(
    replay: Replay,
    journal: Journal | None,
    month: str,
    unit: str | None,
    lines: tuple[Line, ...],
) -> dict[str, Any]:
    """Everything a signature is put under, small enough for the journal."""
    return {
        "month": month,
        "unit": unit,
        **stamps_of(replay, journal),
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
