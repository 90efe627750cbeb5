"""EX: what reached the room."""

from engine.evidence.practice import FILTERED_OUTLET_FRAC, UNFILTERED_OUTLET_FRAC
from engine.evidence.sources import ARI_2016, NIOSH_AEROSOLIZED, OURS, RIBAVIRIN_LABEL
from engine.rules.conditions import (
    drug_is_hazardous,
    estimate_stands,
    filter_is_absent,
    room_dose_is_over_the_level,
)
from engine.rules.shape import Rule

EX01 = Rule(
    id="EX01",
    title="Hazardous drug without a filter",
    question="Was a drug the department lists as hazardous given without an "
    "expiratory filter?",
    evidence=(NIOSH_AEROSOLIZED, RIBAVIRIN_LABEL, UNFILTERED_OUTLET_FRAC),
    strength="unanimous",
    columns=("drug", "expiratory_filter"),
    when=drug_is_hazardous,
    fires=filter_is_absent,
    says="{drug} with the expiratory filter charted as {expiratory_filter}; the "
    "department lists it as hazardous to those near by.",
    would_change="A filter or scavenging that the entry does not mention.",
)

EX02 = Rule(
    id="EX02",
    title="Estimated dose to the room over the department's level",
    question="Does the estimate put more into the room than the department's level, "
    "with the whole of its band?",
    evidence=(UNFILTERED_OUTLET_FRAC, FILTERED_OUTLET_FRAC, ARI_2016, OURS),
    strength="department",
    columns=(
        "nominal_dose_mg",
        "room_frac",
        "room_low_frac",
        "room_high_frac",
        "assumed",
    ),
    when=estimate_stands,
    fires=room_dose_is_over_the_level,
    says="By the estimate {room_dose} of {nominal_dose_mg} reached the room (band "
    "{room_dose_low} to {room_dose_high}); the department's level is "
    "{policy.exposure.room_dose_limit_mg}. A model estimate from bench work.",
    would_change="A filter that was not charted, or another dose than charted.",
)

RULES = (EX01, EX02)
