"""GE: how the generator was run."""

from engine.evidence.practice import (
    EXTERNAL_GAS_LPM,
    INLET_DELIVERED_FRAC,
    JET_KEPT_FRAC,
    JET_RESIDUAL_ML,
    MESH_RESIDUAL_ML,
    MISTIMED_LOSS_FRAC,
    WYE_DELIVERED_FRAC,
)
from engine.evidence.sources import (
    ARI_2010B,
    BERLINSKI_2013,
    BERLINSKI_2015,
    EHRMANN_2017,
    FDA_2009,
    GEORGOPOULOS_2000,
    KLEINSTREUER_2014,
    LI_2022,
    MIURA_2026,
    NAUGHTON_2021,
    ODOHERTY_1992,
    OTTO_2023,
    REILLY_2024,
    WAN_2014,
)
from engine.rules.conditions import (
    at_the_wye,
    bias_flow_runs,
    drug_is_in_an_unsuited_pair,
    ends_before_it_starts,
    fed_by_a_pump,
    fill_is_below_the_smallest,
    gas_is_external,
    generator_has_an_output_range,
    generator_is_inhaler,
    generator_is_jet,
    generator_is_nebulizer,
    generator_is_unsuited_to_drug,
    output_is_continuous,
    runs_too_long,
    runs_too_short,
)
from engine.rules.shape import Rule, all_of, any_of, is_not

GE01 = Rule(
    id="GE01",
    title="Inhaler not actuated with inspiration",
    question="Was the metered-dose inhaler actuated regardless of inspiration?",
    evidence=(MISTIMED_LOSS_FRAC, GEORGOPOULOS_2000, NAUGHTON_2021),
    strength="majority",
    columns=("generator", "synchrony"),
    when=generator_is_inhaler,
    fires=output_is_continuous,
    says="{generator} charted with {synchrony}: puffs outside inspiration leave part "
    "of the dose in the chamber.",
    would_change="Actuation at the onset of inspiration that was not charted. An "
    "inhaler without a chamber has no word in the log.",
)

GE02 = Rule(
    id="GE02",
    title="Jet driven by gas from outside the ventilator",
    question="Was the jet driven by gas the ventilator does not supply?",
    evidence=(EXTERNAL_GAS_LPM, LI_2022, EHRMANN_2017),
    strength="majority",
    columns=("generator", "gas_source", "generator_gas_lpm"),
    when=generator_is_jet,
    fires=gas_is_external,
    says="{generator} on external gas, flow {generator_gas_lpm}. Gas the ventilator "
    "does not know of adds volume and alters triggering and volume readings while it "
    "runs.",
    would_change="A ventilator that drives the jet itself, charted as wall gas.",
)

GE03 = Rule(
    id="GE03",
    title="Continuous generator at the Y with bias flow",
    question="With bias flow running, did a continuous generator stand at the Y?",
    evidence=(
        INLET_DELIVERED_FRAC,
        WYE_DELIVERED_FRAC,
        BERLINSKI_2013,
        BERLINSKI_2015,
        ARI_2010B,
    ),
    against=(REILLY_2024, MIURA_2026),
    strength="majority",
    columns=("generator", "synchrony", "site", "bias_flow_lpm", "bias_flow_assumed"),
    when=all_of(generator_is_nebulizer, bias_flow_runs),
    fires=all_of(at_the_wye, output_is_continuous),
    says="{generator} with {synchrony} {site} while {bias_flow_lpm} of bias flow ran"
    "{bias_flow_origin}: part of what is made in exhalation is swept past the patient.",
    would_change="No bias flow in that mode, or output with inspiration only.",
)

GE04 = Rule(
    id="GE04",
    title="Run time does not fit fill and output",
    question="Was the run shorter or longer than fill volume and output allow?",
    evidence=(JET_RESIDUAL_ML, MESH_RESIDUAL_ML, OTTO_2023, WAN_2014),
    strength="department",
    columns=("generator", "drug_class", "fill_volume_ml", "synchrony", "duration_min"),
    when=all_of(
        generator_has_an_output_range,
        is_not(fed_by_a_pump),
        is_not(ends_before_it_starts),
    ),
    fires=any_of(runs_too_short, all_of(output_is_continuous, runs_too_long)),
    says="{duration_min} charted for {fill_volume_ml} in the {generator}; its output "
    "would take {run_time_allowed}.",
    would_change="A treatment stopped early for a reason, a refill, or an end charted "
    "with the round instead of the treatment.",
)

GE05 = Rule(
    id="GE05",
    title="Drug unsuited to the generator",
    question="Does the department list this drug as unsuited to this generator?",
    evidence=(KLEINSTREUER_2014, EHRMANN_2017, FDA_2009),
    strength="majority",
    columns=("drug", "generator"),
    when=drug_is_in_an_unsuited_pair,
    fires=generator_is_unsuited_to_drug,
    says="{drug} in the {generator}: {unsuited_note}.",
    would_change="Another formulation of the drug, or another generator than charted.",
)

GE06 = Rule(
    id="GE06",
    title="Jet fill too small for what stays behind",
    question="Was the fill of the jet below the department's smallest?",
    evidence=(JET_RESIDUAL_ML, JET_KEPT_FRAC, ODOHERTY_1992, BERLINSKI_2013),
    strength="department",
    columns=("generator", "fill_volume_ml"),
    when=generator_is_jet,
    fires=fill_is_below_the_smallest,
    says="{fill_volume_ml} in the {generator}, of which {JET_RESIDUAL_ML} stay behind; "
    "the department's smallest fill is {policy.generator_use.jet_smallest_fill_ml}.",
    would_change="Diluent that was added and not charted.",
)

RULES = (GE01, GE02, GE03, GE04, GE05, GE06)
