"""SE: the expiratory sensor, and what it had met since it was last found sound."""

from engine.evidence.practice import UNFILTERED_OUTLET_FRAC
from engine.evidence.sensor import BETWEEN_VENTILATORS_FRAC, FLOW_READING_SPREAD_FRAC
from engine.evidence.sources import COMMON_PRACTICE, OURS, SENSOR_NOTICE_2024
from engine.rules.conditions import (
    every_treatment,
    fault_followed_soon,
    filter_is_absent,
    last_check_failed,
    unfiltered_count_is_reached,
    volume_is_drifting,
)
from engine.rules.shape import Rule

SE01 = Rule(
    id="SE01",
    title="Treated after a failed sensor check",
    question="Had the last check of the expiratory flow sensor before the start "
    "failed?",
    evidence=(COMMON_PRACTICE,),
    strength="unanimous",
    columns=("sensor_last_outcome", "hours_since_passed_check_h"),
    when=every_treatment,
    fires=last_check_failed,
    says="Last check of the expiratory flow sensor before the start: "
    "{sensor_last_outcome}. Since the last passed one: {hours_since_passed_check_h}.",
    would_change="A later check, repair or swap of the ventilator that was not logged.",
)

SE02 = Rule(
    id="SE02",
    title="Many unfiltered treatments since the last passed check",
    question="Does this unfiltered treatment bring the ventilator to the department's "
    "count since its sensor last passed?",
    evidence=(SENSOR_NOTICE_2024, UNFILTERED_OUTLET_FRAC, OURS),
    strength="department",
    columns=("expiratory_filter", "unfiltered_since_check_count"),
    when=filter_is_absent,
    fires=unfiltered_count_is_reached,
    says="Unfiltered treatments on this ventilator since its sensor last passed: "
    "{unfiltered_since_check_count}; the department checks at "
    "{policy.sensors.unfiltered_since_check_count}.",
    would_change="A check that was not logged, or a filter that was not charted.",
)

SE03 = Rule(
    id="SE03",
    title="Exhaled over inspired volume drifting",
    question="Was the ventilator's exhaled over inspired volume drifting at the start?",
    evidence=(BETWEEN_VENTILATORS_FRAC, FLOW_READING_SPREAD_FRAC, OURS),
    strength="department",
    columns=("volume_drifting",),
    when=every_treatment,
    fires=volume_is_drifting,
    says="Checks of this ventilator show its exhaled over inspired volume moving away "
    "from its own level. Drift alone does not name its cause.",
    would_change="A leak, gas added by a jet, or checks made under other conditions.",
)

SE04 = Rule(
    id="SE04",
    title="Sensor fault soon after an unfiltered treatment",
    question="Did a fault of this ventilator follow soon after this unfiltered "
    "treatment?",
    evidence=(SENSOR_NOTICE_2024, OURS),
    strength="department",
    columns=("expiratory_filter", "fault_soon_after", "hours_to_fault_h"),
    when=filter_is_absent,
    fires=fault_followed_soon,
    says="A fault followed {hours_to_fault_h} after this unfiltered treatment. Near "
    "in time is not a cause; the same window on other ventilators is the comparison.",
    would_change="A cause found on examination, or as many such treatments without a "
    "fault.",
)

RULES = (SE01, SE02, SE03, SE04)
