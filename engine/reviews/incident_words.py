"""The incident review in sentences: first line, limits, actions that could follow."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import pandas as pd

from engine.reviews.explanations import (
    AGAINST,
    CONSISTENT,
    NO_RECORD,
    SUPPORTED,
    Explanation,
)
from engine.reviews.wording import counted, listed
from engine.stats.drift import Drift
from engine.stats.matched import smallest_matched_p
from engine.stats.odds import Ratio

if TYPE_CHECKING:
    from engine.reviews.incident import Burden, LookBack
    from engine.reviews.timeline import Clock

CAUTIONS: tuple[str, ...] = (
    "A log alone reaches no further than consistent with. Only an examination of the"
    " device can support a cause, and only a reproduced fault confirms it.",
    "A field that was not logged is unknown, never normal; a missing alarm is not"
    " evidence of a normal ventilator.",
    "Setups and equipment are judged here, never people.",
)

# Strength as in the action hierarchy of root cause analysis: systems above training.
STRENGTHS = ("stronger", "intermediate", "weaker")
_ACTIONS: dict[str, tuple[tuple[str, str, str], ...]] = {
    "aerosol_film": (
        (
            "stronger",
            "Stock circuits with the expiratory filter already fitted",
            "share of treatments with a filter, of those known",
        ),
        (
            "intermediate",
            "Filter and its id as fields that must be filled before a treatment starts",
            "share of treatments whose filter state is unknown",
        ),
        (
            "intermediate",
            "A sensor check after a set number of unfiltered treatments",
            "unfiltered treatments since the last passed check, highest ventilator",
        ),
        (
            "weaker",
            "A reminder and teaching on filters during nebulisation",
            "share of treatments with a filter, before and after",
        ),
    ),
    "filter_loading": (
        (
            "stronger",
            "One filter kind for nebulised treatments, with its limit printed on it",
            "filters over the limit before removal",
        ),
        (
            "intermediate",
            "A resistance reading with its flow in every shift of nebulised treatment",
            "filters in use without a reading in the window",
        ),
    ),
    "condensate": (
        (
            "stronger",
            "A circuit with a heated expiratory limb or a water trap below the sensor",
            "drain events near an alarm",
        ),
        (
            "intermediate",
            "Draining as a logged step before each treatment",
            "treatments with a drain entry",
        ),
    ),
    "external_gas": (
        (
            "stronger",
            "Generators that need no external gas on these ventilators",
            "treatments driven by external gas",
        ),
    ),
    "calibration_overdue": (
        (
            "intermediate",
            "The due date of the next check shown where ventilators are handed out",
            "ventilators past the interval",
        ),
    ),
    "circuit_change": (
        (
            "intermediate",
            "A leak and resistance test after every circuit change, logged",
            "circuit changes followed by a test",
        ),
    ),
    "electronics": (
        (
            "intermediate",
            "Spare sensor modules kept ready, and the removed one examined",
            "faults whose module was examined",
        ),
    ),
    "exhalation_valve": (
        (
            "intermediate",
            "The exhalation valve in the routine check",
            "checks that include the valve",
        ),
    ),
    "sensor_age": (
        (
            "stronger",
            "Sensors replaced by hours in use, the hours kept by the ventilator",
            "sensors past the agreed hours",
        ),
    ),
}
_ALWAYS = (
    "intermediate",
    "The removed sensor kept and examined, with a photograph",
    "faults whose sensor was examined",
)


def sentence_of(
    facts: dict[str, Any],
    explanations: tuple[Explanation, ...],
    *,
    look: LookBack,
    burden: Burden,
    drift: Drift,
    started_at: pd.Timestamp | None,
    zone: str,
    clock: Clock,
) -> str:
    """The first lines of the screen and the report."""
    known = facts["incident_id"]
    name = f"{known}: ventilator" if known else "Ventilator"
    sensor = str(facts["sensor"]).replace("_", " ")
    opening = (
        f"{name} {facts['ventilator_token']}, {sensor} sensor,"
        f" {local(facts['happened_at'], zone)}."
    )
    parts = [
        opening,
        _since(look, burden),
        _drift_words(drift, started_at, zone, look),
        _verdict(explanations),
    ]
    if clock.over_limit:
        parts.append(clock.sentence.split(". ")[0].rstrip(".") + ".")
    return " ".join(part for part in parts if part)


def local(at: Any, zone: str) -> str:
    """A moment as the site's clock showed it."""
    moment = pd.Timestamp(at).tz_localize("UTC").tz_convert(zone)
    return f"{moment:%d %b %Y %H:%M}"


def millilitres(value: float, low: float, high: float) -> str:
    """``2.4 mL (0.9 to 4.0)``."""
    return f"{value:.1f} mL ({low:.1f} to {high:.1f})"


def _since(look: LookBack, burden: Burden) -> str:
    if look.hours_h is None:
        start = f"{look.opened_by[0].upper()}{look.opened_by[1:]}."
        since = "In that time"
    else:
        since = f"Since its last passed check {_span(look.hours_h)} before"
        start = ""
    if burden.treatments_count == 0:
        body = f"{since} no treatment is recorded on it."
    else:
        body = (
            f"{since}, {counted(burden.treatments_count, 'treatment')}: filter present"
            f" in {burden.present_count}, absent in {burden.absent_count}, unknown in"
            f" {burden.unknown_count}. {_burden_words(burden)}"
        )
    return f"{start} {body}".strip()


def _burden_words(burden: Burden) -> str:
    if burden.not_estimated_count == burden.treatments_count:
        return "How much aerosol reached the sensor cannot be estimated."
    amount = millilitres(burden.sensor_ml, burden.sensor_low_ml, burden.sensor_high_ml)
    rest = (
        f", {counted(burden.not_estimated_count, 'treatment')} without an estimate"
        if burden.not_estimated_count
        else ""
    )
    place = ""
    if burden.place is not None and burden.of > 1:
        place = f", place {burden.place} of {burden.of} ventilators"
    return f"An estimated {amount} of nebulised liquid reached the sensor{rest}{place}."


def _drift_words(
    drift: Drift, started_at: pd.Timestamp | None, zone: str, look: LookBack
) -> str:
    if drift.drifting is None:
        return "The checks are too few to tell whether its volume ratio drifted."
    if started_at is None:
        return "Its volume ratio kept its level up to the fault."
    way = "fell" if drift.falling else "rose"
    how = "in one step" if drift.sudden else "slowly"
    change = abs(drift.last_change_frac or 0.0)
    early = look.hours_h is not None and started_at < look.from_at
    already = "; the last passed check came after that" if early else ""
    return (
        f"Its exhaled / inspired volume ratio {way} {how} from"
        f" {local(started_at, zone)}, by {change:.0%} at the last check{already}."
    )


def _verdict(explanations: tuple[Explanation, ...]) -> str:
    supported = [e for e in explanations if e.grade == SUPPORTED]
    fitting = [e for e in explanations if e.grade == CONSISTENT]
    if supported:
        names = listed([_lower(e.title) for e in supported])
        return f"An engineering record supports {names}."
    if fitting:
        best = [e for e in fitting if e.weight == fitting[0].weight]
        rest = len(fitting) - len(best)
        more = f", and less so with {rest} more" if rest else ""
        names = listed([_lower(e.title) for e in best])
        return f"The records are consistent with {names}{more}; they prove none of it."
    if any(e.grade == NO_RECORD for e in explanations):
        return (
            "The records leave the cause open: none of the explanations is on record."
        )
    return "The records speak against every explanation asked about."


def not_supported(
    explanations: tuple[Explanation, ...],
    burden: Burden,
    pairs: Ratio,
    faults_count: int,
    clock: Clock,
    look: LookBack,
) -> tuple[str, ...]:
    """What a reader must not take from this review, in sentences."""
    said = ["A rate of such faults: one fault supports none."]
    if not any(e.grade == SUPPORTED for e in explanations):
        said.append("Any cause beyond consistent with: no examination is on record.")
    silent = [_lower(e.title) for e in explanations if e.grade == NO_RECORD]
    if silent:
        said.append(f"Anything either way on {listed(silent)}: no record.")
    if burden.unknown_count:
        n = counted(burden.unknown_count, "treatment")
        said.append(f"Whether a filter stood in the limb in {n} since the last check.")
    if look.hours_h is None:
        said.append("How long the sensor had been unchecked.")
    if clock.offset_s is None:
        said.append("The order of ventilator events and charted entries to the minute.")
    differing = pairs.sets_used
    least = smallest_matched_p(differing) if differing else 1.0
    if least > 0.05:
        said.append(
            f"A comparison of windows before faults with others: of"
            f" {counted(faults_count, 'fault')} in the log"
            f" {counted(differing, 'differs', 'differ')}, too few for any test."
        )
    return tuple(said)


def actions_for(explanations: tuple[Explanation, ...]) -> pd.DataFrame:
    """Actions a team may choose from, the strongest first; none is decided here."""
    found = []
    for explanation in explanations:
        if explanation.grade in {SUPPORTED, CONSISTENT}:
            for strength, text, measure in _ACTIONS.get(explanation.id, ()):
                found.append((strength, text, measure, explanation.title))
    found.append((*_ALWAYS, "any cause"))
    table = pd.DataFrame(found, columns=["strength", "text", "measure", "because"])
    order = table["strength"].map({s: i for i, s in enumerate(STRENGTHS)})
    return (
        table.assign(_order=order)
        .sort_values("_order", kind="stable")
        .drop(columns="_order")
        .drop_duplicates("text", ignore_index=True)
    )


def _span(hours: float) -> str:
    if math.isnan(hours):
        return "an unknown time"
    return f"{hours:.0f} h" if hours < 72 else f"{hours / 24:.0f} days"


def _lower(title: str) -> str:
    return title[0].lower() + title[1:]


__all__ = [
    "AGAINST",
    "CAUTIONS",
    "STRENGTHS",
    "actions_for",
    "local",
    "millilitres",
    "not_supported",
    "sentence_of",
]
