"""Filling a rule's sentence for one treatment on screen.

A name in braces is, in this order: a phrase worked out here, a setting of the policy
(``policy.filters.limit_cmh2o_per_lps``), a number of the evidence (in capitals), or a
column. What is not logged is said as such; no figure stands in a template.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from functools import reduce
from typing import Any

import numpy as np

from engine.batch import COLUMNS, Batch, from_values
from engine.columns import code_of
from engine.evidence import practice, sources
from engine.policy import Policy
from engine.policy.sections import PlacementRow
from engine.rules import placement
from engine.rules.contradictions import CONTRADICTIONS
from engine.rules.limits import asked_for, filter_hours_h, run_time_min
from engine.rules.wording import (
    NOT_LOGGED,
    cited,
    is_logged,
    joined,
    label_of,
    measured,
    published,
    setting,
    shown,
    word,
)
from engine.units import S_PER_MIN

Row = Mapping[str, Any]
_FIELD = re.compile(r"{([A-Za-z0-9_.]+)}")


def said(template: str, row: Row, policy: Policy) -> str:
    """The template with every name in braces filled; begins with a capital."""
    text = _FIELD.sub(lambda found: _filled(found.group(1), row, policy), template)
    return text[:1].upper() + text[1:]


def fields_of(template: str) -> tuple[str, ...]:
    """The names a template asks for."""
    return tuple(_FIELD.findall(template))


def batch_of_one(row: Row) -> dict[str, np.ndarray]:
    """The batch a single displayed row stands for; times are left out."""
    values = {
        name: row[name] if is_logged(row.get(name)) else None
        for name, column in COLUMNS.items()
        if column.kind != "time" and name in row
    }
    return from_values(**values)


def _filled(name: str, row: Row, policy: Policy) -> str:
    if name in PHRASES:
        return PHRASES[name](row, policy)
    if name.startswith("policy."):
        value = reduce(getattr, name.split(".")[1:], policy)
        return setting(name, value)
    if name.isupper():
        return published(getattr(practice, name))
    return shown(name, row.get(name))


# --- the placement table ----------------------------------------------------------


def _preferred(row: Row, policy: Policy) -> str:
    holds = placement.preferred_sites(batch_of_one(row), policy)[0]
    names = [
        word("site", site)
        for site, is_preferred in zip(placement.SITES, holds, strict=True)
        if is_preferred
    ]
    return joined(names) or "at a site that depends on what was not logged"


def _of_rows(
    pick: Callable[[PlacementRow], list[str]], last: str | None = None
) -> Callable[[Row, Policy], str]:
    """What the rows that could decide say, each thing once."""

    def phrase(row: Row, policy: Policy) -> str:
        deciding = placement.rows_that_could_decide(batch_of_one(row), policy, 0)
        said = [text for each in deciding for text in pick(each) if text]
        once = list(dict.fromkeys(said))
        return (joined(once, last) if last else "; or: ".join(once)) or "nothing named"

    return phrase


def _works(keys: tuple[str, ...]) -> list[str]:
    known = sources()
    return [cited(known[key]) if key in known else key for key in keys]


def _band(each: PlacementRow) -> list[str]:
    if each.distance_from_wye_cm is None:
        return []
    low, high = each.distance_from_wye_cm
    return [f"{low:g} to {measured(high, 'cm')}"]


def _best_class(row: Row, policy: Policy) -> str:
    best = row.get("best_site")
    if not is_logged(best):
        return NOT_LOGGED
    site = np.array([code_of("site", str(best))], dtype=np.int8)
    found = int(placement.class_of(batch_of_one(row), policy, site)[0])
    if found < 0:
        return "one thing or another, depending on what was not logged"
    return placement.CLASSES[found]


# --- humidification, run time, drug -----------------------------------------------


def _interruption(row: Row, policy: Policy) -> str:
    if row.get("hme_state") in {"removed", "bypassed"}:
        return f"the HME was {row['hme_state']}"
    return "the heated humidifier was off"


def _run_time(row: Row, policy: Policy) -> str:
    low, high = (float(end[0]) for end in run_time_min(batch_of_one(row), policy))
    if np.isnan(low) or np.isnan(high):
        return NOT_LOGGED
    return f"{low:.0f} to {high:.0f} min"


def _unsuited(row: Row, policy: Policy) -> str:
    drug = str(row.get("drug") or "").lower()
    notes = [
        f"{pair.note} ({joined(_works(pair.evidence), 'and')})"
        for pair in policy.generator_use.unsuited
        if pair.drug.lower() in drug and row.get("generator") in pair.generator
    ]
    return "; ".join(notes)


def _drug_named(row: Row, policy: Policy) -> str:
    if is_logged(row.get("drug")):
        return str(row["drug"])
    if is_logged(row.get("drug_class")):
        return f"a {word('drug_class', str(row['drug_class']))}"
    return "a drug not logged"


def _filter_hours(row: Row, policy: Policy) -> str:
    fewest, most = (float(end[0]) for end in filter_hours_h(batch_of_one(row), policy))
    if fewest == most:
        return measured(most, "h")
    return f"{fewest:.3g} to {measured(most, 'h')}, depending on the drug"


# --- exposure, clock, record ------------------------------------------------------


def _room_dose(end: str) -> Callable[[Row, Policy], str]:
    def phrase(row: Row, policy: Policy) -> str:
        dose, share = row.get("nominal_dose_mg"), row.get(f"room{end}_frac")
        if not (is_logged(dose) and is_logged(share)):
            return NOT_LOGGED
        return measured(float(dose) * float(share), "mg")  # type: ignore[arg-type]

    return phrase


def _clock(row: Row, policy: Policy) -> str:
    offset = row.get("clock_offset_s")
    if not is_logged(offset):
        return NOT_LOGGED
    way = "ahead of" if float(offset) > 0 else "behind"  # type: ignore[arg-type]
    return f"{measured(abs(float(offset)) / S_PER_MIN, 'min')} {way}"  # type: ignore[arg-type]


def _clock_limit(row: Row, policy: Policy) -> str:
    return measured(policy.sensors.clock_offset_limit_s / S_PER_MIN, "min")


def _bias_flow_origin(row: Row, policy: Policy) -> str:
    """Behind a bias flow, where the figure comes from; nothing if unknown."""
    assumed = row.get("bias_flow_assumed")
    if not is_logged(assumed):
        return ""
    return " (the ventilator's default, not charted)" if assumed else " (as charted)"


def _blank_fields(row: Row, policy: Policy) -> str:
    batch = batch_of_one(row)
    blank = [
        label_of(name).split(",")[0].lower()
        for name in policy.records.essential
        if not is_logged(row.get(name)) and asked_for(batch, name)[0]
    ]
    return joined(blank, "and")


def _end_fault(row: Row, policy: Policy) -> str:
    if not is_logged(row.get("ended_at")):
        return "no end is charted"
    duration = row.get("duration_min")
    if is_logged(duration) and float(duration) < 0:  # type: ignore[arg-type]
        return "the end is charted before the start"
    most = setting("longest_run_min", policy.records.longest_run_min)
    ran = shown("duration_min", duration)
    return f"the charted times give a run of {ran}; beyond {most} only a pump is likely"


def _contradictions(row: Row, policy: Policy) -> str:
    batch: Batch = batch_of_one(row)
    found = [text for rule, text in CONTRADICTIONS.items() if rule(batch, policy).yes]
    return "; ".join(found)


PHRASES: dict[str, Callable[[Row, Policy], str]] = {
    "preferred_sites": _preferred,
    "placement_note": _of_rows(lambda each: [each.note]),
    "placement_evidence": _of_rows(lambda each: _works(each.evidence), "and"),
    "placement_against": _of_rows(lambda each: _works(each.against), "and"),
    "placement_against_note": _of_rows(lambda each: [each.against_note]),
    "placement_band": _of_rows(_band),
    "best_site_class": _best_class,
    "interruption": _interruption,
    "bias_flow_origin": _bias_flow_origin,
    "run_time_allowed": _run_time,
    "unsuited_note": _unsuited,
    "drug_named": _drug_named,
    "filter_hours": _filter_hours,
    "room_dose": _room_dose(""),
    "room_dose_low": _room_dose("_low"),
    "room_dose_high": _room_dose("_high"),
    "clock_offset": _clock,
    "clock_limit": _clock_limit,
    "blank_fields": _blank_fields,
    "end_fault": _end_fault,
    "contradictions": _contradictions,
}
