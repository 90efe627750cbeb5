"""Logged settings that cannot both be true, each under its own name.

A contradiction is between entries: it takes two values that are there. A blank
contradicts nothing.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from engine.batch import Batch, is_above, is_below, is_missing, is_word, is_yes, size
from engine.evidence.practice import AT_THE_WYE_CM, VOLUME_SLACK_RATIO
from engine.policy import Policy
from engine.rules.conditions import (
    filter_is_absent,
    hme_is_charted,
    hme_is_in_line,
    in_the_expiratory_limb,
)
from engine.ternary import Ternary
from engine.units import ML_PER_L, S_PER_MIN


def inspiration_outlasts_the_breath(rows: Batch, policy: Policy) -> Ternary:
    cycle_s = S_PER_MIN / rows["respiratory_rate_bpm"]
    return ~is_below(rows["inspiratory_time_s"], cycle_s)


def volume_needs_more_flow(rows: Batch, policy: Policy) -> Ternary:
    """No breath is larger than its highest flow kept up for all of inspiration."""
    flow_ml_per_s = rows["peak_inspiratory_flow_lpm"] * ML_PER_L / S_PER_MIN
    most_ml = flow_ml_per_s * rows["inspiratory_time_s"]
    return is_above(rows["tidal_volume_ml"], most_ml * float(VOLUME_SLACK_RATIO))


def gas_drives_no_jet(rows: Batch, policy: Policy) -> Ternary:
    driven = is_word(rows, "gas_source", "ventilator", "external")
    flows = is_above(rows["generator_gas_lpm"], 0.0)
    needs_none = is_word(
        rows, "generator", "vibrating_mesh", "ultrasonic", "pmdi_spacer"
    )
    return needs_none & (driven | flows)


def jet_has_no_gas(rows: Batch, policy: Policy) -> Ternary:
    jet = is_word(rows, "generator", "jet", "breath_enhanced_jet")
    return jet & is_word(rows, "gas_source", "none")


def hme_is_charted_and_not_there(rows: Batch, policy: Policy) -> Ternary:
    return hme_is_charted(rows, policy) & is_word(rows, "hme_state", "none")


def no_humidification_but_hme_in_line(rows: Batch, policy: Policy) -> Ternary:
    none = is_word(rows, "humidification", "none")
    return none & hme_is_in_line(rows, policy)


def no_humidification_but_heater_on(rows: Batch, policy: Policy) -> Ternary:
    none = is_word(rows, "humidification", "none")
    return none & is_yes(rows, "heated_humidifier_on")


def one_limb_but_expiratory_site(rows: Batch, policy: Policy) -> Ternary:
    one = is_word(rows, "circuit", "single_limb")
    return one & in_the_expiratory_limb(rows, policy)


def filter_absent_but_named(rows: Batch, policy: Policy) -> Ternary:
    named = Ternary.of(~is_missing(rows, "filter_id"))
    return filter_is_absent(rows, policy) & named


def at_the_wye_but_far_from_it(rows: Batch, policy: Policy) -> Ternary:
    far = is_above(rows["distance_from_wye_cm"], float(AT_THE_WYE_CM))
    return is_word(rows, "site", "wye") & far


def puffs_without_an_inhaler(rows: Batch, policy: Policy) -> Ternary:
    puffs = is_above(rows["actuations_count"], 0.0)
    return ~is_word(rows, "generator", "pmdi_spacer") & puffs


def fill_in_an_inhaler(rows: Batch, policy: Policy) -> Ternary:
    filled = is_above(rows["fill_volume_ml"], 0.0)
    return is_word(rows, "generator", "pmdi_spacer") & filled


def support_without_the_patients_breaths(rows: Batch, policy: Policy) -> Ternary:
    supported = is_word(rows, "mode", "psv", "cpap")
    return supported & ~is_yes(rows, "spontaneous_breaths")


CONTRADICTIONS: dict[Callable[[Batch, Policy], Ternary], str] = {
    inspiration_outlasts_the_breath: "inspiration lasts as long as the whole breath",
    volume_needs_more_flow: "the tidal volume needs more than the peak flow gives",
    gas_drives_no_jet: "driving gas on a generator that needs none",
    jet_has_no_gas: "a jet without driving gas",
    hme_is_charted_and_not_there: "an HME charted, and charted as not there",
    no_humidification_but_hme_in_line: "no humidification, but an HME in line",
    no_humidification_but_heater_on: "no humidification, but the heated humidifier on",
    one_limb_but_expiratory_site: "an expiratory limb on a single-limb circuit",
    filter_absent_but_named: "no expiratory filter, but a filter named",
    at_the_wye_but_far_from_it: "at the Y, but far from it",
    puffs_without_an_inhaler: "actuations of a generator that is no inhaler",
    fill_in_an_inhaler: "a fill volume in an inhaler",
    support_without_the_patients_breaths: "a support mode, no breaths of the patient",
}


def settings_contradict(rows: Batch, policy: Policy) -> Ternary:
    """Never unknown: only entries that are there can contradict each other."""
    found = np.zeros(size(rows), dtype=bool)
    for condition in CONTRADICTIONS:
        found |= condition(rows, policy).yes
    return Ternary.of(found)
