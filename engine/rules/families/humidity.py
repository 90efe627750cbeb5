"""HU: what humidified the gas, and whether it came back."""

from engine.evidence.circuit import DRYING_GAS_MG_PER_L
from engine.evidence.filter_capture import HME_CAPTURE_FRAC, HMEF_CAPTURE_FRAC
from engine.evidence.practice import HME_LEAST_MG_PER_L
from engine.evidence.sources import (
    COMMON_PRACTICE,
    DHANANI_2016,
    EHRMANN_2017,
    ESCMID_2017,
    GEORGOPOULOS_2000,
    WILLIAMS_2010,
)
from engine.rules.conditions import (
    between_wye_and_airway,
    every_treatment,
    heated_humidifier_is_charted,
    heated_humidifier_is_on,
    hme_is_charted,
    hme_is_in_line,
    hme_is_out_or_bypassed,
    humidification_is_resumed,
)
from engine.rules.shape import Rule, all_of, any_of, as_charted, is_not

HU01 = Rule(
    id="HU01",
    title="HME between generator and airway",
    question="Was an HME or filter-HME in line between the generator and the airway?",
    evidence=(
        HME_CAPTURE_FRAC,
        HMEF_CAPTURE_FRAC,
        EHRMANN_2017,
        ESCMID_2017,
        DHANANI_2016,
        GEORGOPOULOS_2000,
    ),
    strength="unanimous",
    columns=("generator", "site", "humidification", "hme_state"),
    when=hme_is_charted,
    fires=all_of(hme_is_in_line, is_not(between_wye_and_airway)),
    says="{generator} {site} with the {humidification} {hme_state}: it stands between "
    "generator and airway and catches most of the aerosol.",
    would_change="An HME that was bypassed or out for the treatment, or a generator on "
    "its patient side.",
)

HU02 = Rule(
    id="HU02",
    title="Humidification not confirmed resumed",
    question="Where humidification was interrupted for the treatment, was it resumed?",
    evidence=(EHRMANN_2017, HME_LEAST_MG_PER_L, DRYING_GAS_MG_PER_L),
    strength="majority",
    columns=(
        "humidification",
        "heated_humidifier_on",
        "hme_state",
        "humidification_resumed",
    ),
    when=any_of(
        all_of(heated_humidifier_is_charted, is_not(heated_humidifier_is_on)),
        all_of(hme_is_charted, hme_is_out_or_bypassed),
    ),
    fires=is_not(humidification_is_resumed),
    says="For the treatment {interruption}; resumed afterwards: "
    "{humidification_resumed}. Gas at the Y dries within minutes.",
    would_change="An entry elsewhere that it was resumed, or a later treatment that "
    "shows it running.",
)

HU03 = Rule(
    id="HU03",
    title="HME and heated humidifier both charted",
    question="Does the entry hold both an HME in line and a heated humidifier?",
    evidence=(COMMON_PRACTICE, WILLIAMS_2010),
    strength="majority",
    columns=("humidification", "heated_humidifier_on", "hme_state"),
    when=every_treatment,
    fires=all_of(
        as_charted(hme_is_in_line),
        any_of(
            as_charted(heated_humidifier_is_charted),
            as_charted(heated_humidifier_is_on),
        ),
    ),
    says="Humidification charted as {humidification}, heated humidifier on: "
    "{heated_humidifier_on}, HME: {hme_state}. Together an HME takes up water and "
    "its resistance rises; it also catches aerosol made upstream.",
    would_change="One of the two left over from an earlier entry.",
)

RULES = (HU01, HU02, HU03)
