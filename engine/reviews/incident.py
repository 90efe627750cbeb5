"""One sensor fault: what the records support, and what they do not.

Looks back from the fault to the last passed check of that sensor, puts everything on
one clock, and grades each explanation by named conditions. One fault makes no rate
and no p-value; a log alone reaches no further than "consistent with".
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from engine.errors import UnknownId
from engine.evidence.sensor import (
    COMPARABLE_WINDOWS_COUNT,
    EXAMINED_WITHIN_H,
    GAS_NEAR_H,
    HUMID_NEAR_H,
    WATER_NEAR_H,
)
from engine.replay import Replay
from engine.reviews import incident_rows as rows
from engine.reviews.examination import causes_named
from engine.reviews.explanations import Evidence, Explanation, explain
from engine.reviews.incident_words import (
    CAUTIONS,
    actions_for,
    not_supported,
    sentence_of,
)
from engine.reviews.signatures import sign_offs, stamps_of
from engine.reviews.timeline import Clock, clock_of, timeline_of
from engine.stats.drift import Drift, drift_of
from engine.stats.filter_life import life_of
from engine.stats.matched import Windows, comparable_windows, matched_pairs
from engine.stats.odds import Ratio

if TYPE_CHECKING:
    from engine.journal import Journal

EXPIRATORY_FLOW = "expiratory_flow"


@dataclass(frozen=True, kw_only=True)
class LookBack:
    """From where to where the review looks, and why there."""

    from_at: pd.Timestamp
    to_at: pd.Timestamp
    opened_by: str  # a sentence
    check_id: str | None
    hours_h: float | None
    shown_from: pd.Timestamp  # earlier than from_at where the drift began before it


@dataclass(frozen=True, kw_only=True)
class Burden:
    """Aerosol that went on to the sensors since the last passed check.

    ``ventilators`` has one row a ventilator, each since its own last passed check.
    """

    treatments_count: int
    present_count: int
    absent_count: int
    unknown_count: int
    not_estimated_count: int
    sensor_ml: float
    sensor_low_ml: float
    sensor_high_ml: float
    place: int | None
    of: int
    ventilators: pd.DataFrame


@dataclass(frozen=True, kw_only=True)
class Incident:
    """Everything the incident reviewer leaves with."""

    sentence: str
    facts: dict[str, Any]
    site_zone: str
    look_back: LookBack
    clock: Clock
    timeline: pd.DataFrame
    treatments: pd.DataFrame
    burden: Burden
    checks: pd.DataFrame
    filters: pd.DataFrame
    readings: pd.DataFrame
    events: pd.DataFrame
    drift: Drift
    drift_started_at: pd.Timestamp | None
    explanations: tuple[Explanation, ...]
    exposed_ventilators: pd.DataFrame
    patients: pd.DataFrame
    windows: Windows
    faults_count: int
    pairs: Ratio
    not_supported: tuple[str, ...]
    suggested_actions: pd.DataFrame
    actions: pd.DataFrame
    harm: pd.DataFrame
    harm_sentence: str
    snapshot: dict[str, Any]
    sign_offs: pd.DataFrame
    cautions: tuple[str, ...]


def incidents(replay: Replay) -> pd.DataFrame:
    """Every incident of the log, the latest first."""
    return replay.frame(rows.INCIDENTS)


def review_incident(
    replay: Replay, incident_id: str, journal: Journal | None = None
) -> Incident:
    """The review of one logged incident.

    Raises   UnknownId if the log has no incident of that id.
    """
    found = replay.frame(rows.INCIDENT, {"incident_id": incident_id})
    if found.empty:
        raise UnknownId(f"no incident {incident_id} in the log")
    facts = {str(k): _plain(v) for k, v in found.iloc[0].items()}
    return review_fault(replay, facts, journal)


def review_fault(
    replay: Replay, facts: dict[str, Any], journal: Journal | None = None
) -> Incident:
    """The review of a fault that need not stand in the log.

    ``facts``  ventilator_token and happened_at (UTC), and as far as known incident_id,
               sensor, harm, note
    """
    facts = {
        "incident_id": None,
        "harm": None,
        "note": None,
        **facts,
        "sensor": facts.get("sensor") or EXPIRATORY_FLOW,
        "happened_at": pd.Timestamp(facts["happened_at"]),
    }
    checks = _checks(replay, facts)
    drift, started_at, checks = _drift(replay, facts, checks)
    look = _look_back(replay, facts, started_at)
    asked = {"ventilator": facts["ventilator_token"], "to": look.to_at}
    shown = {**asked, "from": look.shown_from}
    treatments = replay.frame(rows.TREATMENTS, shown)
    treatments["since_check"] = treatments["started_at"] > look.from_at
    clock = clock_of(
        replay.frame(rows.OFFSETS, {"ventilator": facts["ventilator_token"]}),
        replay.policy.sensors.clock_offset_limit_s,
    )
    events = _events(replay, facts, look, clock)
    readings = replay.frame(rows.READINGS, shown)
    filters = replay.frame(rows.FILTERS, shown)
    burden = _burden(replay, facts)
    windows = _windows(replay, facts)
    pairs, faults = _pairs(replay, facts)
    evidence = _evidence(
        replay,
        facts,
        look,
        burden,
        treatments[treatments["since_check"]],
        events,
        checks,
        drift,
        started_at,
    )
    explanations = explain(evidence)
    timeline = timeline_of(
        facts,
        look.shown_from,
        treatments,
        filters,
        readings,
        _until_restored(checks, look.to_at),
        events,
        clock,
    )
    harm, harm_sentence = _harm(facts, journal)
    exposed = _exposed(replay, facts, burden)
    return Incident(
        sentence=sentence_of(
            facts,
            explanations,
            look=look,
            burden=burden,
            drift=drift,
            started_at=started_at,
            zone=replay.log.site_zone,
            clock=clock,
        ),
        facts=facts,
        site_zone=replay.log.site_zone,
        look_back=look,
        clock=clock,
        timeline=timeline,
        treatments=treatments,
        burden=burden,
        checks=checks,
        filters=filters,
        readings=readings,
        events=events,
        drift=drift,
        drift_started_at=started_at,
        explanations=explanations,
        exposed_ventilators=exposed,
        patients=replay.frame(rows.PATIENTS, {**asked, "from": look.from_at}),
        windows=windows,
        faults_count=faults,
        pairs=pairs,
        not_supported=not_supported(explanations, burden, pairs, faults, clock, look),
        suggested_actions=actions_for(explanations),
        actions=_actions(facts, journal),
        harm=harm,
        harm_sentence=harm_sentence,
        snapshot=_snapshot(replay, facts, journal, burden, explanations),
        sign_offs=sign_offs(journal, f"incident:{facts['incident_id']}"),
        cautions=CAUTIONS,
    )


def _snapshot(
    replay: Replay,
    facts: dict[str, Any],
    journal: Journal | None,
    burden: Burden,
    explanations: tuple[Explanation, ...],
) -> dict[str, Any]:
    """Everything a signature is put under, small enough for the journal."""
    return {
        "incident": facts["incident_id"],
        **stamps_of(replay, journal),
        "figures": {
            "Aerosol to the sensor, mL": {
                "value": round(float(burden.sensor_ml), 6),
                "known": burden.treatments_count - burden.not_estimated_count,
                "unknown": burden.not_estimated_count,
            }
        },
        "grades": {each.title: each.grade for each in explanations},
    }


def _look_back(
    replay: Replay, facts: dict[str, Any], started_at: pd.Timestamp | None
) -> LookBack:
    at = facts["happened_at"]
    who = {"ventilator": facts["ventilator_token"]}
    reach = replay.frame(rows.REACH, who).iloc[0]
    found = replay.frame(rows.LAST_CHECK, {**who, "sensor": facts["sensor"], "at": at})
    if not found.empty:
        check = found.iloc[0]
        hours = (at - check["checked_at"]).total_seconds() / 3600
        word = str(check["outcome"])
        return LookBack(
            from_at=check["checked_at"],
            to_at=at,
            opened_by=f"check {check['check_id']} of this sensor, {word}",
            check_id=str(check["check_id"]),
            hours_h=hours,
            shown_from=_shown_from(check["checked_at"], started_at),
        )
    first = reach["first_at"]
    if pd.isna(first):
        why = "the log holds no other record of this ventilator"
    elif first > at:
        why = "the fault lies before the ventilator's first record in the log"
    else:
        why = (
            "no passed check of this sensor stands in the log before the fault;"
            " the look-back begins at the ventilator's first record"
        )
    early = at if pd.isna(first) or first > at else first - pd.Timedelta(seconds=1)
    return LookBack(
        from_at=early,
        to_at=at,
        opened_by=why,
        check_id=None,
        hours_h=None,
        shown_from=early,
    )


def _shown_from(from_at: pd.Timestamp, started_at: pd.Timestamp | None) -> pd.Timestamp:
    """The timeline reaches back a day before the drift, where that began earlier."""
    if started_at is None:
        return from_at
    return min(from_at, started_at - pd.Timedelta(days=1))


def _checks(replay: Replay, facts: dict[str, Any]) -> pd.DataFrame:
    return replay.frame(
        rows.CHECKS,
        {
            "ventilator": facts["ventilator_token"],
            "sensor": facts["sensor"],
            "gas_near": pd.Timedelta(hours=float(GAS_NEAR_H)).to_pytimedelta(),
        },
    )


def _drift(
    replay: Replay, facts: dict[str, Any], checks: pd.DataFrame
) -> tuple[Drift, pd.Timestamp | None, pd.DataFrame]:
    """Drift up to the fault; checks after it are shown, not used."""
    at = facts["happened_at"]
    before = (checks["checked_at"] <= at).to_numpy()
    hours = (checks["checked_at"] - at).dt.total_seconds().to_numpy(float) / 3600
    sensors = replay.policy.sensors
    done = drift_of(
        hours[before],
        checks["ratio"].to_numpy(float)[before],
        sensors.drift_weight,
        sensors.drift_limit_sd,
        calibrated=checks["outcome"].isin(["recalibrated", "replaced"])[before],
        left_out=checks["external_gas"].to_numpy(bool)[before],
    )
    # A drift a calibration ended before the fault is not the drift of this fault.
    current = done.drifting and done.ended_h is None
    started = None
    if current and done.started_h is not None:
        started = at + pd.Timedelta(hours=done.started_h)
    columns = {"ewma": done.ewma, "low": done.low_limit, "high": done.high_limit}
    for name, values in columns.items():
        full = np.full(len(checks), math.nan)
        full[before] = values
        checks[name] = full
    return done, started, checks


def _events(
    replay: Replay, facts: dict[str, Any], look: LookBack, clock: Clock
) -> pd.DataFrame:
    """Service events of the look-back and after the fault, put on the site's clock."""
    margin = pd.Timedelta(seconds=abs(clock.offset_s or 0.0))
    after = pd.Timedelta(hours=float(EXAMINED_WITHIN_H))
    events = replay.frame(
        rows.EVENTS,
        {
            "ventilator": facts["ventilator_token"],
            "from": look.shown_from - margin - pd.Timedelta(hours=float(WATER_NEAR_H)),
            "to": look.to_at + margin + after,
        },
    )
    shift = events["own_clock"].to_numpy(bool) * clock.at(events["happened_at"])
    events["offset_s"] = np.where(events["own_clock"], shift, np.nan)
    moved = pd.to_timedelta(np.nan_to_num(shift), unit="s")
    events["at"] = events["happened_at"] - moved
    # After the fault only what was found or done about it still belongs to it.
    soon = events["at"] <= look.to_at + pd.Timedelta(hours=float(WATER_NEAR_H))
    done = events["kind"].isin(["repair", "cleaning", "self_test"])
    kept = events[soon | done]
    return kept.sort_values(["at", "event_id"], ignore_index=True)


def _burden(replay: Replay, facts: dict[str, Any]) -> Burden:
    table = replay.frame(
        rows.BURDENS, {"sensor": facts["sensor"], "at": facts["happened_at"]}
    )
    table["is_this"] = table["ventilator_token"] == facts["ventilator_token"]
    own = table[table["is_this"]]
    if own.empty:
        return Burden(
            treatments_count=0,
            present_count=0,
            absent_count=0,
            unknown_count=0,
            not_estimated_count=0,
            sensor_ml=0.0,
            sensor_low_ml=0.0,
            sensor_high_ml=0.0,
            place=None,
            of=len(table),
            ventilators=table,
        )
    row = own.iloc[0]
    place = int((table["sensor_ml"] > row["sensor_ml"]).sum()) + 1
    return Burden(
        treatments_count=int(row["treatments_count"]),
        present_count=int(row["present_count"]),
        absent_count=int(row["absent_count"]),
        unknown_count=int(row["unknown_count"]),
        not_estimated_count=int(row["not_estimated_count"]),
        sensor_ml=float(row["sensor_ml"]),
        sensor_low_ml=float(row["sensor_low_ml"]),
        sensor_high_ml=float(row["sensor_high_ml"]),
        place=place if row["treatments_count"] else None,
        of=len(table),
        ventilators=table,
    )


def _windows(replay: Replay, facts: dict[str, Any]) -> Windows:
    """The window before the fault against earlier ones in which a treatment fell."""
    table = replay.frame(
        rows.WINDOWS,
        {
            "ventilator": facts["ventilator_token"],
            "at": facts["happened_at"],
            "window_h": replay.policy.sensors.fault_soon_after_h,
        },
    )
    table = table[table["back"] <= int(COMPARABLE_WINDOWS_COUNT)]
    hazard = table[table["back"] == 0]["exposed"]
    before = None
    if not hazard.empty:
        before = {1: True, 0: False}.get(int(hazard.iloc[0]))
    earlier = table[table["back"] > 0]["exposed"].to_numpy()
    if hazard.empty and not table.empty:
        before = False
    return comparable_windows(earlier, before, "an unfiltered treatment")


def _pairs(replay: Replay, facts: dict[str, Any]) -> tuple[Ratio, int]:
    """All faults of this sensor in the log, each against its own earlier window."""
    table = replay.frame(
        rows.PAIRS,
        {
            "sensor": facts["sensor"],
            "window_h": replay.policy.sensors.fault_soon_after_h,
            "windows": int(COMPARABLE_WINDOWS_COUNT),
        },
    )
    known = table[(table["hazard"] >= 0) & (table["control"] >= 0)]
    b = int(((known["hazard"] == 1) & (known["control"] == 0)).sum())
    c = int(((known["hazard"] == 0) & (known["control"] == 1)).sum())
    faults = replay.frame(
        f"SELECT count(*) AS n FROM ({rows.FAULTS})",
        {
            "sensor": facts["sensor"],
            "window_h": replay.policy.sensors.fault_soon_after_h,
        },
    )
    return matched_pairs(b, c), int(faults["n"].iloc[0])


def _exposed(replay: Replay, facts: dict[str, Any], burden: Burden) -> pd.DataFrame:
    """Other ventilators with as many unfiltered treatments since their last check."""
    most = replay.policy.sensors.unfiltered_since_check_count
    table = burden.ventilators
    same = (table["absent_count"] >= most) & ~table["is_this"]
    return table[same].reset_index(drop=True)


def _evidence(
    replay: Replay,
    facts: dict[str, Any],
    look: LookBack,
    burden: Burden,
    treatments: pd.DataFrame,
    events: pd.DataFrame,
    checks: pd.DataFrame,
    drift: Drift,
    started_at: pd.Timestamp | None,
) -> Evidence:
    at = facts["happened_at"]
    who = {"ventilator": facts["ventilator_token"]}
    by_state = {
        state: _ids("treatment", own["treatment_id"])
        for state, own in treatments.groupby("filter_state")
    }
    # A cleaning that did not stop a drift has not set the sensor back.
    onset = at if started_at is None else min(at, started_at)
    reset = replay.frame(
        rows.UNFILTERED_SINCE_RESET,
        {**who, "sensor": facts["sensor"], "at": at, "onset": onset},
    ).iloc[0]
    kinds = replay.frame(rows.KINDS_EVER, who)["kind"]
    state, filter_rows = _filter_state(replay, facts)
    gas, gas_rows = _gas(treatments, at)
    humid, humid_rows = _humid(treatments, at)
    soon = replay.policy.sensors.fault_soon_after_h
    examined = _after(events, at, ("repair", "cleaning"))
    used = checks[(checks["checked_at"] <= at) & checks["ratio"].notna()]
    return Evidence(
        at=at,
        hours_since_check_h=look.hours_h,
        check_interval_h=replay.policy.sensors.check_interval_h,
        check_rows=(("sensor_check", look.check_id),) if look.check_id else (),
        treatments_ever=_any_treatment(replay, who),
        absent=by_state.get("absent", ()),
        unknown=by_state.get("unknown", ()),
        present=by_state.get("present", ()),
        first_unfiltered_at=_plain(reset["first_at"]),
        unknown_ever=bool(reset["unknown_count"]),
        many_unfiltered_count=replay.policy.sensors.unfiltered_since_check_count,
        burden_place=burden.place,
        burden_of=burden.of,
        drifting=_drifting_now(drift, used, at, replay),
        drift_sudden=drift.sudden if started_at is not None else None,
        drift_falling=drift.falling if started_at is not None else None,
        drift_started_at=started_at,
        drift_rows=_drift_rows(used, started_at),
        restored_after=_restored(checks, at),
        humid_near=humid,
        humid_rows=humid_rows,
        water_events=_near(events, at, float(WATER_NEAR_H), "condensate", ("drain",)),
        filter_state=state,
        filter_rows=filter_rows,
        gas_running=gas,
        gas_rows=gas_rows,
        ratio_last_above=bool(drift.falling is False and started_at is not None),
        circuit_events=_before(events, at, soon, ("circuit_change",)),
        kinds_ever=frozenset(kinds),
        valve_events=_near(events, at, soon, "exhalation_valve", (), ("peep", "valve")),
        electronic_events=_near(events, at, soon, "electronics", ()),
        fault_events=_before(events, at, soon, ("fault",), after_too=True),
        examined=causes_named(examined["note"]),
        examination_rows=_ids("service_event", examined["event_id"]),
        **_sensor_age(replay, facts),
    )


def _any_treatment(replay: Replay, who: dict[str, Any]) -> bool:
    sql = "SELECT count(*) AS n FROM asked WHERE ventilator_token = $ventilator"
    return bool(replay.frame(sql, who)["n"].iloc[0])


def _drifting_now(
    drift: Drift, used: pd.DataFrame, at: pd.Timestamp, replay: Replay
) -> bool | None:
    """Whether the ratio drifts at the fault; unknown without checks near it."""
    if drift.drifting and drift.ended_h is None:
        return True
    if drift.drifting is None or used.empty:
        return None
    last = (at - used["checked_at"].max()).total_seconds() / 3600
    return False if last <= replay.policy.sensors.check_interval_h else None


def _drift_rows(
    used: pd.DataFrame, started_at: pd.Timestamp | None
) -> tuple[tuple[str, str], ...]:
    """The checks since the drift began; without one, the last few before the fault."""
    shown = used.tail(8)
    if started_at is not None:
        shown = used[used["checked_at"] >= started_at]
    return _ids("sensor_check", shown["check_id"])


def _restored(checks: pd.DataFrame, at: pd.Timestamp) -> tuple[tuple[str, str], ...]:
    """Work on the sensor after the fault, and the check that passed after it."""
    after = checks[checks["checked_at"] >= at]
    worked = after[after["outcome"].isin(["recalibrated", "replaced"])]
    return _ids("sensor_check", worked["check_id"].head(1))


def _until_restored(checks: pd.DataFrame, at: pd.Timestamp) -> pd.DataFrame:
    """Checks up to the fault and on to the first that found the sensor right again."""
    right = checks["outcome"].isin(["passed", "recalibrated", "replaced"])
    again = checks[(checks["checked_at"] > at) & right]["checked_at"]
    end = again.min() if not again.empty else at
    return checks[checks["checked_at"] <= end]


def _filter_state(
    replay: Replay, facts: dict[str, Any]
) -> tuple[str | None, tuple[tuple[str, str], ...]]:
    """State, from readings up to the fault, of the filter then on the ventilator."""
    at = facts["happened_at"]
    found = replay.frame(
        "SELECT filter_id, installed_at FROM filter_use"
        " WHERE ventilator_token = $ventilator AND installed_at <= $at"
        " AND (removed_at IS NULL OR removed_at > $at)"
        " ORDER BY installed_at DESC, filter_id LIMIT 1",
        {"ventilator": facts["ventilator_token"], "at": at},
    )
    if found.empty:
        return None, ()
    own = found.iloc[0]
    readings = replay.frame(
        "SELECT reading_id, read_at, resistance_cmh2o_per_lps AS r FROM reading"
        " WHERE filter_id = $filter_id AND read_at <= $at"
        " AND resistance_cmh2o_per_lps IS NOT NULL ORDER BY read_at, reading_id",
        {"filter_id": own["filter_id"], "at": at},
    )
    limits = replay.policy.filters
    hours = (readings["read_at"] - own["installed_at"]).dt.total_seconds() / 3600
    life = life_of(
        hours.to_numpy(float),
        readings["r"].to_numpy(float),
        limits.limit_cmh2o_per_lps,
        limits.near_limit_frac,
        limits.readings_for_a_trend_count,
        limits.rising_p,
        limits.unlogged_change_p,
    )
    behind = (
        ("filter_use", str(own["filter_id"])),
        *_ids("filter_reading", readings["reading_id"].tail(8)),
    )
    return life.state, behind


def _gas(
    treatments: pd.DataFrame, at: pd.Timestamp
) -> tuple[bool | None, tuple[tuple[str, str], ...]]:
    """Whether external gas ran at the fault, and the treatments that say so."""
    near = pd.Timedelta(hours=float(GAS_NEAR_H))
    ends = treatments["ended_at"].fillna(treatments["started_at"])
    running = treatments[ends + near >= at]
    rows_behind = _ids("treatment", running["treatment_id"])
    if running.empty:
        return False, ()
    external = running["gas_source"] == "external"
    if external.any():
        return True, _ids("treatment", running[external]["treatment_id"])
    return (None if running["gas_source"].isna().any() else False), rows_behind


def _humid(
    treatments: pd.DataFrame, at: pd.Timestamp
) -> tuple[bool | None, tuple[tuple[str, str], ...]]:
    near = pd.Timedelta(hours=float(HUMID_NEAR_H))
    recent = treatments[(treatments["started_at"] >= at - near)].dropna(
        subset=["humid"]
    )
    if recent.empty:
        return None, ()
    last = recent.iloc[-1]
    return bool(last["humid"] > 0), (("treatment", str(last["treatment_id"])),)


def _sensor_age(replay: Replay, facts: dict[str, Any]) -> dict[str, Any]:
    ages = replay.frame(
        rows.SENSOR_AGES, {"sensor": facts["sensor"], "at": facts["happened_at"]}
    )
    own = ages[ages["ventilator_token"] == facts["ventilator_token"]]
    if own.empty:
        return {}
    place = int((ages["age_h"] > own["age_h"].iloc[0]).sum()) + 1
    return {
        "sensor_age_rank": (place, len(ages)),
        "sensor_age_rows": _ids("sensor_check", own["check_id"]),
    }


def _near(
    events: pd.DataFrame,
    at: pd.Timestamp,
    hours: float,
    cause: str,
    kinds: tuple[str, ...],
    code_words: tuple[str, ...] = (),
) -> tuple[tuple[str, str], ...]:
    """Events near the fault of these kinds, or whose text names the cause."""
    span = pd.Timedelta(hours=hours)
    near = events[(events["at"] - at).abs() <= span]
    texts = (
        near["code"].fillna("").str.replace("_", " ") + ". " + near["note"].fillna("")
    )
    named = [bool(causes_named([text]).get(cause)) for text in texts]
    coded = [any(word in text.lower() for word in code_words) for text in texts]
    kept = near[
        near["kind"].isin(kinds) | np.array(named, bool) | np.array(coded, bool)
    ]
    return _ids("service_event", kept["event_id"])


def _before(
    events: pd.DataFrame,
    at: pd.Timestamp,
    hours: float,
    kinds: tuple[str, ...],
    after_too: bool = False,
) -> tuple[tuple[str, str], ...]:
    span = pd.Timedelta(hours=hours)
    end = at + span if after_too else at
    kept = events[
        (events["at"] >= at - span) & (events["at"] <= end) & events["kind"].isin(kinds)
    ]
    return _ids("service_event", kept["event_id"])


def _after(
    events: pd.DataFrame, at: pd.Timestamp, kinds: tuple[str, ...]
) -> pd.DataFrame:
    return events[(events["at"] >= at) & events["kind"].isin(kinds)]


def _ids(table: str, ids: pd.Series) -> tuple[tuple[str, str], ...]:
    return tuple((table, str(value)) for value in ids)


def _actions(facts: dict[str, Any], journal: Journal | None) -> pd.DataFrame:
    """What was decided for this incident, from the journal."""
    columns = [
        "text",
        "strength",
        "owner_role",
        "measure",
        "due",
        "at",
        "actor",
        "role",
    ]
    found = []
    for entry in _standing(facts, journal, "decision"):
        said = entry.new if isinstance(entry.new, dict) else {"text": entry.new}
        found.append(
            {
                **{name: said.get(name, "") for name in columns[:5]},
                "at": entry.at_utc,
                "actor": entry.actor,
                "role": entry.role,
            }
        )
    return pd.DataFrame(found, columns=columns)


def _harm(facts: dict[str, Any], journal: Journal | None) -> tuple[pd.DataFrame, str]:
    """The latest harm rating of each rater; disagreement is shown, not averaged."""
    latest = {}
    for entry in _standing(facts, journal, "note"):
        if isinstance(entry.new, dict) and "harm" in entry.new:
            latest[entry.actor] = {
                "actor": entry.actor,
                "role": entry.role,
                "harm": str(entry.new["harm"]),
                "reason": entry.reason,
                "at": entry.at_utc,
            }
    columns = ["actor", "role", "harm", "reason", "at"]
    table = pd.DataFrame(list(latest.values()), columns=columns)
    words = sorted(set(table["harm"]))
    logged = facts["harm"] or "unknown"
    if len(table) == 0:
        return table, f"Harm as logged: {logged}. Nobody has rated it yet; two should."
    if len(table) == 1:
        return table, f"One rater says {words[0]}; a second rating is missing."
    if len(words) == 1:
        return table, f"{len(table)} raters agree: {words[0]}."
    return table, f"{len(table)} raters differ: {', '.join(words)}. Settle it together."


def _standing(facts: dict[str, Any], journal: Journal | None, action: str) -> list[Any]:
    if journal is None or not facts["incident_id"]:
        return []
    object_name = f"incident:{facts['incident_id']}"
    return [e for e in journal.standing(action) if e.object == object_name]


def _plain(value: Any) -> Any:
    return None if pd.isna(value) else value
