"""What could have caused a sensor fault, each graded by named conditions.

``needed``   must all hold for the records to be consistent with the explanation; one
             that does not hold speaks against it, one the records do not answer
             leaves it at "no record".
``against``  any that holds speaks against it.
``also``     adds weight; orders explanations of one grade and changes no grade.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import pandas as pd

from engine.evidence.sensor import HIGH_PLACE_FRAC

GRADES = ("supported", "consistent", "no record", "against")
SUPPORTED, CONSISTENT, NO_RECORD, AGAINST = GRADES
Rows = tuple[tuple[str, str], ...]  # (table, id)


@dataclass(frozen=True, kw_only=True)
class Condition:
    """One thing the records say, do not say, or leave open."""

    role: str  # needed, against, also, examination
    text: str
    holds: bool | None
    rows: Rows = ()
    otherwise: str = ""  # what is so where it does not hold
    weight: int = 1  # how specific it is; 0 where other causes would show it as well


@dataclass(frozen=True, kw_only=True)
class Explanation:
    """One explanation, its grade and everything the grade rests on."""

    id: str
    title: str
    grade: str
    sentence: str
    conditions: tuple[Condition, ...]
    refuted_by: str
    settled_by: str

    @property
    def weight(self) -> int:
        """How much speaks for it: conditions that hold, by how specific they are."""
        speaking = [c for c in self.conditions if c.role != "against" and c.holds]
        return sum(c.weight for c in speaking)

    @property
    def rows(self) -> Rows:
        """The rows behind it, each once."""
        return tuple(dict.fromkeys(row for c in self.conditions for row in c.rows))


@dataclass(frozen=True, kw_only=True)
class Evidence:
    """What was gathered around one fault; None is what no record answers."""

    at: pd.Timestamp
    hours_since_check_h: float | None
    check_interval_h: float
    check_rows: Rows = ()
    treatments_ever: bool = False
    absent: Rows = ()
    unknown: Rows = ()
    present: Rows = ()
    first_unfiltered_at: pd.Timestamp | None = None
    unknown_ever: bool = False
    many_unfiltered_count: int = 10
    burden_place: int | None = None
    burden_of: int = 0
    drifting: bool | None = None
    drift_sudden: bool | None = None
    drift_falling: bool | None = None
    drift_started_at: pd.Timestamp | None = None
    drift_rows: Rows = ()
    restored_after: Rows = ()
    humid_near: bool | None = None
    humid_rows: Rows = ()
    water_events: Rows = ()
    filter_state: str | None = None
    filter_known: bool | None = None
    filter_rows: Rows = ()
    gas_running: bool | None = None
    gas_rows: Rows = ()
    ratio_last_above: bool | None = None
    circuit_events: Rows = ()
    kinds_ever: frozenset[str] = frozenset()
    valve_events: Rows = ()
    electronic_events: Rows = ()
    fault_events: Rows = ()
    sensor_age_rank: tuple[int, int] | None = None
    sensor_age_rows: Rows = ()
    examined: dict[str, bool] = field(default_factory=dict)
    examination_rows: Rows = ()


def explain(evidence: Evidence) -> tuple[Explanation, ...]:
    """All explanations, the best supported first; ties keep the order written here."""
    made = [_graded(spec, evidence) for spec in SPECS]
    return tuple(sorted(made, key=lambda e: (GRADES.index(e.grade), -e.weight)))


@dataclass(frozen=True)
class _Spec:
    id: str
    title: str
    conditions: Callable[[Evidence], list[Condition]]
    refuted_by: str
    settled_by: str


def _graded(spec: _Spec, evidence: Evidence) -> Explanation:
    conditions = spec.conditions(evidence)
    examined = evidence.examined.get(spec.id)
    if examined is not None:
        text = (
            "an engineering record names it as found"
            if examined
            else "an engineering record looked for it and did not find it"
        )
        conditions = [
            Condition(
                role="examination",
                text=text,
                holds=examined,
                rows=evidence.examination_rows,
            ),
            *conditions,
        ]
    grade = grade_of(conditions)
    return Explanation(
        id=spec.id,
        title=spec.title,
        grade=grade,
        sentence=_sentence(grade, conditions),
        conditions=tuple(conditions),
        refuted_by=spec.refuted_by,
        settled_by=spec.settled_by,
    )


def grade_of(conditions: list[Condition]) -> str:
    """The grade these conditions give; the rule is written at the head of this file."""
    examined = [c.holds for c in conditions if c.role == "examination"]
    if examined:
        return SUPPORTED if examined[0] else AGAINST
    if any(c.holds for c in conditions if c.role == "against"):
        return AGAINST
    needed = [c.holds for c in conditions if c.role == "needed"]
    if False in needed:
        return AGAINST
    return NO_RECORD if None in needed or not needed else CONSISTENT


def _sentence(grade: str, conditions: list[Condition]) -> str:
    told = {
        SUPPORTED: ("examination", True, "Supported by an engineering record: "),
        CONSISTENT: ("needed", True, "The records are consistent with it: "),
        NO_RECORD: ("needed", None, "The records do not say "),
    }
    if grade in told:
        role, holds, opening = told[grade]
        parts = [c.text for c in conditions if c.role == role and c.holds is holds]
        if grade == NO_RECORD:
            parts = [f"whether {part}" for part in parts]
        return f"{opening}{'; '.join(parts)}."
    parts = [c.text for c in conditions if c.role == "against" and c.holds]
    parts += [
        c.otherwise or c.text
        for c in conditions
        if c.role in {"needed", "examination"} and c.holds is False
    ]
    return f"The records speak against it: {'; '.join(parts)}."


def _aerosol_film(e: Evidence) -> list[Condition]:
    reached: bool | None = bool(e.absent)
    if not e.absent and (e.unknown or not e.treatments_ever):
        reached = None
    slow_after = None
    if e.drifting and e.drift_started_at is not None and not e.drift_sudden:
        first = e.first_unfiltered_at
        slow_after = first is not None and e.drift_started_at >= first
    many = len(e.absent) >= e.many_unfiltered_count
    return [
        Condition(
            role="needed",
            text="unfiltered aerosol was given on this ventilator since its last"
            " passed check",
            otherwise="every treatment since the last passed check had its filter, or"
            " none was given",
            holds=reached,
            rows=e.absent or e.unknown,
        ),
        # A few unfiltered treatments alone are found on most ventilators.
        Condition(
            role="needed",
            text="the volume ratio drifted, or unfiltered treatments reached the"
            " department's limit",
            otherwise="the volume ratio kept its level",
            holds=many or e.drifting,
            rows=e.drift_rows if e.drifting else e.absent,
        ),
        Condition(
            role="against",
            text="the volume ratio changed in one step, not little by little",
            holds=e.drift_sudden if e.drifting else None,
            rows=e.drift_rows,
        ),
        Condition(
            role="against",
            text="the volume ratio kept its level up to the fault",
            holds=None if e.drifting is None else not e.drifting,
            rows=e.drift_rows,
        ),
        Condition(
            role="against",
            text="the drift began before any unfiltered treatment on record",
            holds=None if slow_after is None or e.unknown_ever else not slow_after,
            rows=e.drift_rows,
        ),
        Condition(
            role="also",
            text="as many unfiltered treatments as the department's limit, or more",
            holds=many or None,
            rows=e.absent,
        ),
        Condition(
            role="also",
            text="the volume ratio drifted slowly, beginning after unfiltered"
            " treatments",
            holds=slow_after,
            rows=e.drift_rows,
            weight=2,
        ),
        Condition(
            role="also",
            text="the estimated burden is among the highest of all ventilators",
            holds=_among_highest(e),
            weight=0,
        ),
        Condition(
            role="also",
            text="the sensor passed again after cleaning, recalibration or replacement",
            holds=bool(e.restored_after) or None,
            rows=e.restored_after,
        ),
    ]


def _condensate(e: Evidence) -> list[Condition]:
    slow = None if not e.drifting else not e.drift_sudden
    return [
        Condition(
            role="needed",
            text="humid gas reached the expiratory side near the fault",
            otherwise="the gas was not humidified near the fault",
            holds=e.humid_near,
            rows=e.humid_rows,
        ),
        Condition(
            role="needed",
            text="an entry near the fault speaks of water or of draining",
            holds=bool(e.water_events) or None,
            rows=e.water_events,
        ),
        Condition(
            role="against",
            text="the volume ratio moved over days; water comes and goes in minutes",
            holds=slow,
            rows=e.drift_rows,
        ),
    ]


def _filter_loading(e: Evidence) -> list[Condition]:
    loaded = {"over_limit": True, "near_limit": True, "rising": False, "steady": False}
    below = "rising but below" if e.filter_state == "rising" else "steady and below"
    return [
        Condition(
            role="needed",
            text="the filter in use was near or over its limit",
            otherwise=f"the filter in use was {below} its limit at its last reading",
            holds=loaded.get(e.filter_state or ""),
            rows=e.filter_rows,
        ),
        Condition(
            role="also",
            text="it was over the department's limit",
            holds=(e.filter_state == "over_limit") or None,
            rows=e.filter_rows,
        ),
    ]


def _exhalation_valve(e: Evidence) -> list[Condition]:
    return [
        Condition(
            role="needed",
            text="an alarm, fault or note near the fault names the valve or PEEP",
            holds=bool(e.valve_events) or None,
            rows=e.valve_events,
        )
    ]


def _external_gas(e: Evidence) -> list[Condition]:
    return [
        Condition(
            role="needed",
            text="a treatment driven by external gas was running",
            otherwise="no treatment driven by external gas was running",
            holds=e.gas_running,
            rows=e.gas_rows,
        ),
        Condition(
            role="against",
            text="the exhaled volume read low; added gas makes it read high",
            holds=e.drift_falling if e.drifting else None,
            rows=e.drift_rows,
        ),
        Condition(
            role="also",
            text="the exhaled volume read above its level",
            holds=e.ratio_last_above or None,
            rows=e.drift_rows,
        ),
    ]


def _calibration_overdue(e: Evidence) -> list[Condition]:
    hours = e.hours_since_check_h
    return [
        Condition(
            role="needed",
            text="the last passed check was longer ago than the department allows",
            otherwise="the last passed check lies within the department's interval",
            holds=None if hours is None else hours > e.check_interval_h,
            rows=e.check_rows,
        )
    ]


def _circuit_change(e: Evidence) -> list[Condition]:
    kept = "circuit_change" in e.kinds_ever
    return [
        Condition(
            role="needed",
            text="a circuit change is logged shortly before",
            otherwise="circuit changes are logged for this ventilator, and none"
            " shortly before",
            holds=True if e.circuit_events else (False if kept else None),
            rows=e.circuit_events,
        ),
        Condition(
            role="against",
            text="the drift had been going on before it",
            holds=None if not e.drifting else not e.drift_sudden,
            rows=e.drift_rows,
        ),
    ]


def _electronics(e: Evidence) -> list[Condition]:
    at_once = None if e.drifting is None else (not e.drifting or bool(e.drift_sudden))
    return [
        Condition(
            role="needed",
            text="the sensor failed at once, without a drift before",
            otherwise="the volume ratio drifted before the fault",
            holds=at_once,
            rows=e.drift_rows,
            weight=0,
        ),
        Condition(
            role="needed",
            text="the ventilator logged a fault of its own",
            holds=bool(e.fault_events) or None,
            rows=e.fault_events,
        ),
        Condition(
            role="also",
            text="its code or note names an electrical part",
            holds=bool(e.electronic_events) or None,
            rows=e.electronic_events,
        ),
        Condition(
            role="also",
            text="every treatment since the last passed check had its filter",
            holds=(bool(e.present) and not e.absent and not e.unknown) or None,
            rows=e.present,
        ),
    ]


def _sensor_age(e: Evidence) -> list[Condition]:
    old = None
    if e.sensor_age_rank is not None and e.sensor_age_rank[1] > 1:
        place, of = e.sensor_age_rank
        old = place <= max(1, round(float(HIGH_PLACE_FRAC) * of))
    return [
        Condition(
            role="needed",
            text="the sensor is among the longest in use of the department's",
            otherwise="other sensors of the department have been in use longer",
            holds=old,
            rows=e.sensor_age_rows,
        )
    ]


def _among_highest(e: Evidence) -> bool | None:
    if e.burden_place is None or e.burden_of < 2:
        return None
    return e.burden_place <= max(1, round(float(HIGH_PLACE_FRAC) * e.burden_of))


SPECS: tuple[_Spec, ...] = (
    _Spec(
        "aerosol_film",
        "Aerosol film or build-up on the sensor",
        _aerosol_film,
        "A clean sensor on examination; the same drift on a ventilator that had its"
        " filter throughout; a reading that recovers without cleaning.",
        "The removed sensor under a lens, the deposit named, and readings before and"
        " after cleaning.",
    ),
    _Spec(
        "condensate",
        "Condensate in the sensor or limb",
        _condensate,
        "A dry limb and sensor at the time; a fault that stays after draining.",
        "A note of what was seen when the limb was opened, and readings after.",
    ),
    _Spec(
        "filter_loading",
        "Loading of the expiratory filter",
        _filter_loading,
        "A filter resistance taken at the time that lies near that of a new one; a"
        " fault that stays after the filter was changed.",
        "The removed filter's resistance at a known flow.",
    ),
    _Spec(
        "exhalation_valve",
        "Sticking exhalation valve",
        _exhalation_valve,
        "A valve that passes its test; PEEP steady throughout.",
        "The valve on the test bench, and the PEEP readings of those hours.",
    ),
    _Spec(
        "external_gas",
        "Added gas from an external source",
        _external_gas,
        "No treatment running at the time; a difference that stays with the gas off.",
        "Volumes with the gas on and off.",
    ),
    _Spec(
        "calibration_overdue",
        "Calibration overdue",
        _calibration_overdue,
        "A check passed within the interval, found in another record.",
        "The service record of the sensor.",
    ),
    _Spec(
        "circuit_change",
        "A circuit changed shortly before",
        _circuit_change,
        "A leak and resistance test passed after the change.",
        "The circuit test that followed the change.",
    ),
    _Spec(
        "electronics",
        "Electronics or connection",
        _electronics,
        "The same fault with another module; no fault when cable and unit are moved.",
        "The engineer's finding with the module swapped.",
    ),
    _Spec(
        "sensor_age",
        "Age of the sensor",
        _sensor_age,
        "A sensor replaced recently, found in another record.",
        "The date the sensor was fitted, and its hours.",
    ),
)
