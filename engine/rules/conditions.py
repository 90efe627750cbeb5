"""Named conditions: each a clause about the setup, answered yes, no or unknown.

A condition takes a batch and the policy. What is not logged makes it unknown, with no
code here: the helpers of ``engine.batch`` and the logic of ``engine.ternary`` see to
that. Conditions on the placement table stand in ``placement``, contradictions between
settings in ``contradictions``, sums over the policy's limits in ``limits``.
"""

from __future__ import annotations

import numpy as np

from engine.batch import Batch, is_above, is_below, is_missing, is_word, is_yes, size
from engine.policy import Policy
from engine.rules.limits import (
    asked_for,
    drug_holds,
    drugs_held,
    filter_hours_h,
    run_time_min,
)
from engine.ternary import UNKNOWN, Ternary

NEBULIZERS = ("jet", "breath_enhanced_jet", "vibrating_mesh", "ultrasonic")


def every_treatment(rows: Batch, policy: Policy) -> Ternary:
    """Asked of all."""
    return Ternary.always(size(rows))


# --- generator, site, circuit -----------------------------------------------------


def generator_is_nebulizer(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "generator", *NEBULIZERS)


def generator_is_jet(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "generator", "jet")


def generator_is_inhaler(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "generator", "pmdi_spacer")


def output_is_continuous(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "synchrony", "continuous")


def gas_is_external(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "gas_source", "external")


def in_the_expiratory_limb(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "site", "expiratory_limb")


def in_the_inspiratory_limb(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "site", "inspiratory_limb")


def at_the_wye(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "site", "wye")


def between_wye_and_airway(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "site", "airway_side")


def circuit_has_two_limbs(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "circuit", "dual_limb")


def bias_flow_runs(rows: Batch, policy: Policy) -> Ternary:
    from_lpm = policy.generator_use.bias_flow_runs_from_lpm
    return ~is_below(rows["bias_flow_lpm"], from_lpm)


# --- humidification ---------------------------------------------------------------


def hme_is_charted(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "humidification", "hme", "hmef")


def heated_humidifier_is_charted(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "humidification", "heated_humidifier")


def heated_humidifier_is_on(rows: Batch, policy: Policy) -> Ternary:
    return is_yes(rows, "heated_humidifier_on")


def hme_is_in_line(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "hme_state", "in_line")


def hme_is_out_or_bypassed(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "hme_state", "bypassed", "removed")


def humidification_is_resumed(rows: Batch, policy: Policy) -> Ternary:
    return is_yes(rows, "humidification_resumed")


# --- run time, fill and drug ------------------------------------------------------


def generator_has_an_output_range(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "generator", *policy.generator_use.output_ml_min)


def fed_by_a_pump(rows: Batch, policy: Policy) -> Ternary:
    """Pulmonary vasodilators run from a pump; their fill tells nothing of the time."""
    return is_word(rows, "drug_class", "pulmonary_vasodilator")


def end_is_missing(rows: Batch, policy: Policy) -> Ternary:
    return Ternary.of(is_missing(rows, "ended_at"))


def ends_before_it_starts(rows: Batch, policy: Policy) -> Ternary:
    return is_below(rows["duration_min"], 0.0)


def runs_past_the_longest(rows: Batch, policy: Policy) -> Ternary:
    return is_above(rows["duration_min"], policy.records.longest_run_min)


def runs_too_short(rows: Batch, policy: Policy) -> Ternary:
    return is_below(rows["duration_min"], run_time_min(rows, policy)[0])


def runs_too_long(rows: Batch, policy: Policy) -> Ternary:
    return is_above(rows["duration_min"], run_time_min(rows, policy)[1])


def fill_is_below_the_smallest(rows: Batch, policy: Policy) -> Ternary:
    return is_below(rows["fill_volume_ml"], policy.generator_use.jet_smallest_fill_ml)


def drug_is_in_an_unsuited_pair(rows: Batch, policy: Policy) -> Ternary:
    return drug_holds(rows, [pair.drug for pair in policy.generator_use.unsuited])


def generator_is_unsuited_to_drug(rows: Batch, policy: Policy) -> Ternary:
    pairs = policy.generator_use.unsuited
    known = ~is_missing(rows, "drug")
    found = Ternary.of(np.zeros(size(rows), dtype=bool))
    for pair, held in zip(
        pairs, drugs_held(rows, [pair.drug for pair in pairs]), strict=True
    ):
        used = is_word(rows, "generator", *pair.generator)
        found = found | (Ternary.of(held, known) & used)
    return found


def drug_is_hazardous(rows: Batch, policy: Policy) -> Ternary:
    return drug_holds(rows, policy.exposure.hazardous_drugs)


# --- filter -----------------------------------------------------------------------


def filter_is_in_place(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "expiratory_filter", "present")


def filter_is_absent(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "expiratory_filter", "absent")


def filter_is_over_its_limit(rows: Batch, policy: Policy) -> Ternary:
    """Past the limit at its last reading; an old reading below it tells nothing."""
    limit = policy.filters.limit_cmh2o_per_lps
    over = is_above(rows["filter_reading_cmh2o_per_lps"], limit)
    return over | (_unknown(rows) & ~reading_is_in_window(rows, policy))


def filter_is_rising_or_near(rows: Batch, policy: Policy) -> Ternary:
    """Too few readings for a trend leave it unknown."""
    told = is_word(rows, "filter_trend", "rising", "near_limit")
    few = is_word(rows, "filter_trend", "too_few_readings")
    return told | (_unknown(rows) & few)


def filter_reads_over_its_limit(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "filter_trend", "over_limit")


def filter_is_past_its_hours(rows: Batch, policy: Policy) -> Ternary:
    """Known without the drug where every drug's hours give the same answer."""
    fewest, most = filter_hours_h(rows, policy)
    age = rows["filter_age_h"]
    past_most, past_fewest = is_above(age, most), is_above(age, fewest)
    return past_most | (_unknown(rows) & past_fewest)


def filter_change_is_suspected(rows: Batch, policy: Policy) -> Ternary:
    return is_yes(rows, "filter_change_suspected")


def reading_is_in_window(rows: Batch, policy: Policy) -> Ternary:
    return is_yes(rows, "filter_reading_in_window")


def reading_has_its_flow(rows: Batch, policy: Policy) -> Ternary:
    return is_yes(rows, "filter_reading_has_flow")


# --- the estimate -----------------------------------------------------------------


def estimate_stands(rows: Batch, policy: Policy) -> Ternary:
    """Unknown where more was assumed than the department accepts; never no."""
    assumed = np.bitwise_count(rows["assumed"].astype(np.uint32))
    few = assumed <= policy.estimate.most_assumptions_count
    return Ternary.of(few, few)


def another_site_gives_more(rows: Batch, policy: Policy) -> Ternary:
    known = (rows["best_site"] >= 0) & (rows["site"] >= 0)
    other = Ternary.of(rows["best_site"] != rows["site"], known)
    more = is_above(rows["best_ratio"], policy.estimate.no_difference_ratio)
    return is_yes(rows, "difference_shown") & more & other


def room_dose_is_over_the_level(rows: Batch, policy: Policy) -> Ternary:
    """Yes with the low end of the band, no with the high end, unknown between."""
    dose, level = rows["nominal_dose_mg"], policy.exposure.room_dose_limit_mg
    surely = is_above(dose * rows["room_low_frac"], level)
    maybe = is_above(dose * rows["room_high_frac"], level)
    return surely | (_unknown(rows) & maybe)


# --- sensor, clock, record --------------------------------------------------------


def last_check_failed(rows: Batch, policy: Policy) -> Ternary:
    return is_word(rows, "sensor_last_outcome", "failed")


def unfiltered_count_is_reached(rows: Batch, policy: Policy) -> Ternary:
    most = policy.sensors.unfiltered_since_check_count
    return ~is_below(rows["unfiltered_since_check_count"], most)


def volume_is_drifting(rows: Batch, policy: Policy) -> Ternary:
    return is_yes(rows, "volume_drifting")


def fault_followed_soon(rows: Batch, policy: Policy) -> Ternary:
    return is_yes(rows, "fault_soon_after")


def clock_is_off(rows: Batch, policy: Policy) -> Ternary:
    offset_s = np.abs(rows["clock_offset_s"])
    return is_above(offset_s, policy.sensors.clock_offset_limit_s)


def essential_field_is_missing(rows: Batch, policy: Policy) -> Ternary:
    """Never unknown: a blank is what it looks for."""
    blank = [
        is_missing(rows, name) & asked_for(rows, name)
        for name in policy.records.essential
    ]
    return Ternary.of(np.any(blank, axis=0))


def mode_text_is_charted(rows: Batch, policy: Policy) -> Ternary:
    return Ternary.of(~is_missing(rows, "mode_text"))


def mode_is_unmapped(rows: Batch, policy: Policy) -> Ternary:
    return Ternary.of(is_missing(rows, "mode"))


def _unknown(rows: Batch) -> Ternary:
    return Ternary.always(size(rows), UNKNOWN)
