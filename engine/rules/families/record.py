"""RE: what the entry itself leaves open. A blank is work undone, never a person."""

from engine.evidence.practice import AT_THE_WYE_CM, VOLUME_SLACK_RATIO
from engine.evidence.sources import COMMON_PRACTICE, OURS
from engine.rules.conditions import (
    clock_is_off,
    end_is_missing,
    ends_before_it_starts,
    essential_field_is_missing,
    every_treatment,
    fed_by_a_pump,
    mode_is_unmapped,
    mode_text_is_charted,
    runs_past_the_longest,
)
from engine.rules.contradictions import settings_contradict
from engine.rules.shape import Rule, all_of, any_of, is_not

RE01 = Rule(
    id="RE01",
    title="Essential field missing",
    question="Is a field blank that the department needs of every treatment?",
    evidence=(COMMON_PRACTICE,),
    strength="department",
    columns=(
        "generator",
        "site",
        "mode",
        "started_at",
        "ended_at",
        "circuit",
        "expiratory_filter",
        "humidification",
    ),
    when=every_treatment,
    fires=essential_field_is_missing,
    says="Not logged: {blank_fields}.",
    would_change="The field charted elsewhere or lost in the export.",
)

RE02 = Rule(
    id="RE02",
    title="End missing, before the start or too far from it",
    question="Does the entry lack an end that could be true?",
    evidence=(COMMON_PRACTICE,),
    strength="department",
    columns=("ended_at", "duration_min", "drug_class"),
    when=every_treatment,
    fires=any_of(
        end_is_missing,
        ends_before_it_starts,
        all_of(runs_past_the_longest, is_not(fed_by_a_pump)),
    ),
    says="{end_fault}.",
    would_change="An end charted elsewhere, or a treatment that ran on.",
)

RE03 = Rule(
    id="RE03",
    title="Mode text ambiguous or unmapped",
    question="Is the mode charted in words that do not name one mode?",
    evidence=(COMMON_PRACTICE,),
    strength="department",
    columns=("mode", "mode_text"),
    when=mode_text_is_charted,
    fires=mode_is_unmapped,
    says="Mode charted as “{mode_text}”, which does not name one mode.",
    would_change="The site's own meaning of the term, entered in the import map.",
)

RE04 = Rule(
    id="RE04",
    title="Ventilator clock off",
    question="Was the ventilator's clock off by more than the department allows?",
    evidence=(COMMON_PRACTICE,),
    strength="department",
    columns=("clock_offset_s",),
    when=every_treatment,
    fires=clock_is_off,
    says="The ventilator's clock stood {clock_offset} the reference; the department "
    "allows {clock_limit}. Times taken from it are moved by "
    "as much.",
    would_change="A clock set right between the measurement and the treatment.",
)

RE05 = Rule(
    id="RE05",
    title="Settings that contradict each other",
    question="Does the entry hold settings that cannot both be true?",
    evidence=(VOLUME_SLACK_RATIO, AT_THE_WYE_CM, OURS),
    strength="department",
    columns=(
        "respiratory_rate_bpm",
        "inspiratory_time_s",
        "peak_inspiratory_flow_lpm",
        "tidal_volume_ml",
        "generator",
        "gas_source",
        "generator_gas_lpm",
        "actuations_count",
        "fill_volume_ml",
        "humidification",
        "heated_humidifier_on",
        "hme_state",
        "circuit",
        "site",
        "distance_from_wye_cm",
        "mode",
        "spontaneous_breaths",
        "expiratory_filter",
        "filter_id",
    ),
    when=every_treatment,
    fires=settings_contradict,
    says="The entry holds what cannot both be true: {contradictions}.",
    would_change="The entry of one of the two being wrong; which one it does not tell.",
)

RULES = (RE01, RE02, RE03, RE04, RE05)
