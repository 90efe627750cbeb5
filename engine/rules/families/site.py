"""PL: where the generator stood, against the department's table and the estimate."""

from engine.evidence.practice import (
    JET_FROM_PATIENT_CM,
    POORLY_SET_DEPOSITED_FRAC,
    WELL_SET_DEPOSITED_FRAC,
)
from engine.evidence.sources import (
    ARI_2010A,
    BERLINSKI_2013,
    BERLINSKI_2015,
    COMMON_PRACTICE,
    EHRMANN_2017,
    HOU_2022,
    INSPSYNC_2024,
    MIURA_2026,
    REILLY_2024,
    SENSOR_NOTICE_2024,
)
from engine.rules.conditions import (
    another_site_gives_more,
    estimate_stands,
    every_treatment,
    in_the_expiratory_limb,
    in_the_inspiratory_limb,
)
from engine.rules.placement import (
    distance_outside_band,
    row_has_a_band,
    row_is_contested,
    site_is_discordant,
    table_speaks,
)
from engine.rules.shape import Rule, all_of, is_not

_SETUP = (
    "generator",
    "synchrony",
    "bias_flow_lpm",
    "humidification",
    "mode",
    "circuit",
    "site",
)

PL01 = Rule(
    id="PL01",
    title="Site discordant with the placement table",
    question="Does the department's table list the logged site as discordant?",
    evidence=(COMMON_PRACTICE, ARI_2010A, BERLINSKI_2013, EHRMANN_2017),
    strength="department",
    columns=_SETUP,
    when=all_of(table_speaks, is_not(row_is_contested), is_not(in_the_expiratory_limb)),
    fires=site_is_discordant,
    says="{generator} {site}; in this setup the department's table puts it "
    "{preferred_sites} ({placement_note}).",
    would_change="A site, mode or bias flow charted wrongly, or a reason at the "
    "bedside to leave the usual site.",
)

PL02 = Rule(
    id="PL02",
    title="Site on which sources differ",
    question="Where sources differ, does the table in use count the site as "
    "discordant?",
    evidence=(COMMON_PRACTICE, INSPSYNC_2024, BERLINSKI_2013, BERLINSKI_2015),
    against=(HOU_2022, REILLY_2024, MIURA_2026),
    strength="contested",
    columns=_SETUP,
    when=all_of(table_speaks, row_is_contested, is_not(in_the_expiratory_limb)),
    fires=site_is_discordant,
    says="{generator} {site}. Sources differ here, so this is no error. The table "
    "follows {placement_evidence}: {placement_note}. Found otherwise by "
    "{placement_against}: {placement_against_note}.",
    would_change="The department taking the other side into its table, or newer work "
    "that settles the question.",
)

PL03 = Rule(
    id="PL03",
    title="Generator in the expiratory limb",
    question="Did the generator stand in the expiratory limb?",
    evidence=(COMMON_PRACTICE, SENSOR_NOTICE_2024),
    strength="unanimous",
    columns=("generator", "site", "expiratory_filter"),
    when=every_treatment,
    fires=in_the_expiratory_limb,
    says="{generator} {site}: what it makes goes to filter, sensor and room instead "
    "of the patient. Expiratory filter: {expiratory_filter}.",
    would_change="A limb charted wrongly; a circuit drawn from the patient's side "
    "reads the other way round.",
)

PL04 = Rule(
    id="PL04",
    title="Distance from the Y outside the table's reach",
    question="In the inspiratory limb, was the generator nearer to or farther from "
    "the Y than the table says?",
    evidence=(JET_FROM_PATIENT_CM, ARI_2010A, EHRMANN_2017),
    against=(REILLY_2024, MIURA_2026),
    strength="department",
    columns=(*_SETUP, "distance_from_wye_cm"),
    when=all_of(in_the_inspiratory_limb, row_has_a_band, is_not(row_is_contested)),
    fires=distance_outside_band,
    says="{generator} in the inspiratory limb, {distance_from_wye_cm} from the Y; the "
    "table's reach is {placement_band}.",
    would_change="A distance counted from the patient instead of the Y, or in inches.",
)

PL05 = Rule(
    id="PL05",
    title="Another site gives more by the estimate",
    question="Does the estimate show another site of this generator giving more, "
    "beyond its band?",
    evidence=(
        WELL_SET_DEPOSITED_FRAC,
        POORLY_SET_DEPOSITED_FRAC,
        INSPSYNC_2024,
    ),
    against=(REILLY_2024, MIURA_2026),
    strength="contested",
    columns=(
        "generator",
        "site",
        "best_site",
        "best_ratio",
        "difference_shown",
        "delivered_frac",
        "best_delivered_frac",
        "assumed",
    ),
    when=estimate_stands,
    fires=another_site_gives_more,
    says="{generator} {site}: by the estimate {delivered_frac} passes the tube; "
    "{best_site} it would be {best_delivered_frac}, {best_ratio} times as much. In "
    "the department's table that site is {best_site_class}. A model estimate from "
    "bench work; sources differ on how much the site matters.",
    would_change="A setting that was assumed because it was not logged, or a bench "
    "result nearer to this setup.",
)

RULES = (PL01, PL02, PL03, PL04, PL05)
