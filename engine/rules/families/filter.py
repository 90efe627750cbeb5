"""FI: the filter in the expiratory limb, and what is known of its resistance."""

from engine.evidence.filter import NEW_FILTER_CMH2O_PER_LPS
from engine.evidence.practice import (
    FILTER_FITTED_FRAC,
    FILTER_IN_USE_H,
    FILTERED_OUTLET_FRAC,
    UNFILTERED_OUTLET_FRAC,
    VISCOUS_FILTER_H,
)
from engine.evidence.sources import (
    BAI_1997,
    COMMON_PRACTICE,
    EHRMANN_2017,
    ESCMID_2017,
    JIANG_2022,
    OURS,
    SEN_1968,
)
from engine.rules.conditions import (
    circuit_has_two_limbs,
    filter_change_is_suspected,
    filter_is_absent,
    filter_is_in_place,
    filter_is_over_its_limit,
    filter_is_past_its_hours,
    filter_is_rising_or_near,
    filter_reads_over_its_limit,
    generator_is_nebulizer,
    reading_has_its_flow,
    reading_is_in_window,
)
from engine.rules.shape import Rule, all_of, is_not

FI01 = Rule(
    id="FI01",
    title="No filter in the expiratory limb",
    question="On a circuit with two limbs, was a nebulizer run without an expiratory "
    "filter?",
    evidence=(
        UNFILTERED_OUTLET_FRAC,
        FILTERED_OUTLET_FRAC,
        FILTER_FITTED_FRAC,
        ESCMID_2017,
        EHRMANN_2017,
    ),
    strength="majority",
    columns=("generator", "circuit", "expiratory_filter"),
    when=all_of(circuit_has_two_limbs, generator_is_nebulizer),
    fires=filter_is_absent,
    says="Expiratory filter charted as {expiratory_filter} while the {generator} ran: "
    "exhaled aerosol goes on to the expiratory sensor and the room.",
    would_change="A filter built into the ventilator that the entry does not mention.",
)

FI02 = Rule(
    id="FI02",
    title="Filter over the department's limit",
    question="Did the filter in use read over the department's resistance limit?",
    evidence=(NEW_FILTER_CMH2O_PER_LPS, JIANG_2022, OURS),
    strength="department",
    columns=(
        "expiratory_filter",
        "filter_in_use_id",
        "filter_reading_cmh2o_per_lps",
        "filter_reading_age_h",
        "filter_reading_in_window",
    ),
    when=filter_is_in_place,
    fires=filter_is_over_its_limit,
    says="Filter {filter_in_use_id} last read {filter_reading_cmh2o_per_lps} (age of "
    "the reading: {filter_reading_age_h}); the department's limit is "
    "{policy.filters.limit_cmh2o_per_lps}. No published bedside limit exists.",
    would_change="A reading that holds the airway as well as the filter, or one taken "
    "at another flow.",
)

FI03 = Rule(
    id="FI03",
    title="Filter rising towards its limit",
    question="Were the filter's readings rising, or near the limit, before the start?",
    evidence=(SEN_1968, JIANG_2022, OURS),
    strength="department",
    columns=(
        "expiratory_filter",
        "filter_in_use_id",
        "filter_trend",
        "filter_reading_cmh2o_per_lps",
    ),
    when=all_of(filter_is_in_place, is_not(filter_reads_over_its_limit)),
    fires=filter_is_rising_or_near,
    says="Filter {filter_in_use_id} is {filter_trend}, last at "
    "{filter_reading_cmh2o_per_lps}; the department's limit is "
    "{policy.filters.limit_cmh2o_per_lps}.",
    would_change="Readings at different flows, or water in the filter that drained.",
)

FI04 = Rule(
    id="FI04",
    title="Filter past its hours",
    question="Was the filter in use longer than the department allows for this drug?",
    evidence=(FILTER_IN_USE_H, VISCOUS_FILTER_H, ESCMID_2017, EHRMANN_2017),
    strength="department",
    columns=(
        "expiratory_filter",
        "filter_in_use_id",
        "filter_age_h",
        "drug",
        "drug_class",
    ),
    when=filter_is_in_place,
    fires=filter_is_past_its_hours,
    says="Filter {filter_in_use_id} had been in use for {filter_age_h} at the start; "
    "for {drug_named} the department allows {filter_hours}.",
    would_change="A change of filter that nobody logged.",
)

FI05 = Rule(
    id="FI05",
    title="Suspected unlogged filter change",
    question="Is this the first use after a fall in resistance that looks like a "
    "change nobody logged?",
    evidence=(BAI_1997, OURS),
    strength="department",
    columns=(
        "expiratory_filter",
        "filter_in_use_id",
        "filter_change_suspected",
        "filter_reading_cmh2o_per_lps",
    ),
    when=filter_is_in_place,
    fires=filter_change_is_suspected,
    says="The readings of filter {filter_in_use_id} fell to "
    "{filter_reading_cmh2o_per_lps} with no change logged; it may be another filter.",
    would_change="A reading at another flow, or water that drained from the filter.",
)

FI06 = Rule(
    id="FI06",
    title="No filter reading in the window",
    question="Was the filter not read within the window before the start?",
    evidence=(COMMON_PRACTICE, OURS),
    strength="department",
    columns=(
        "expiratory_filter",
        "filter_in_use_id",
        "filter_reading_in_window",
        "filter_reading_age_h",
    ),
    when=filter_is_in_place,
    fires=is_not(reading_is_in_window),
    says="Filter {filter_in_use_id}: no reading within "
    "{policy.filters.reading_window_h} before the start; age of the last usable one: "
    "{filter_reading_age_h}.",
    would_change="A reading charted elsewhere.",
)

FI07 = Rule(
    id="FI07",
    title="Filter reading without its flow",
    question="Is the last reading in the window without the flow it was taken at?",
    evidence=(JIANG_2022, OURS),
    strength="department",
    columns=(
        "expiratory_filter",
        "filter_in_use_id",
        "filter_reading_in_window",
        "filter_reading_has_flow",
    ),
    when=all_of(filter_is_in_place, reading_is_in_window),
    fires=is_not(reading_has_its_flow),
    says="The last reading of filter {filter_in_use_id} names no flow; a pressure drop "
    "without its flow is no resistance.",
    would_change="A fixed test flow of the department, entered with the readings.",
)

RULES = (FI01, FI02, FI03, FI04, FI05, FI06, FI07)
