"""Facts of the trade and published figures the rules rest on.

What is marked "common practice" is what the trade says of itself, without a source.
"""

from engine.evidence.shape import Number
from engine.evidence.sources import (
    AARC_2012,
    ANESTHESIOLOGY_2017,
    ARI_2016,
    COMMON_PRACTICE,
    DIOT_1995,
    EHRMANN_2013,
    INSPSYNC_2024,
    KLEINSTREUER_2014,
    LI_2022,
    OURS,
    THOMAS_1993,
)

# --- where a generator goes, and what it is worth ---------------------------------

JET_FROM_PATIENT_CM = Number(
    value=53.5,
    low=46.0,
    high=61.0,
    unit="cm",
    source=COMMON_PRACTICE,
    where="jet nebulizer on the inspiratory limb, 18 to 24 inches from the patient",
    known="common practice",
    holds_for="no bias flow",
)
WELL_SET_DEPOSITED_FRAC = Number(
    value=0.15,
    unit="frac",
    source=COMMON_PRACTICE,
    where="dose in the lung, at most, when output, humidity, breath and timing are set",
    known="common practice",
)
POORLY_SET_DEPOSITED_FRAC = Number(
    value=0.0225,
    low=0.015,
    high=0.03,
    unit="frac",
    source=COMMON_PRACTICE,
    where="dose in the lung when they are not; middle of the range",
    known="common practice",
)
INLET_DELIVERED_FRAC = Number(
    value=0.218,
    unit="frac",
    source=INSPSYNC_2024,
    where="companion abstract: continuous mesh at the humidifier inlet",
    known="read",
    holds_for="adult bench, bias flow 3.5 L/min, active humidifier",
)
WYE_DELIVERED_FRAC = Number(
    value=0.137,
    unit="frac",
    source=INSPSYNC_2024,
    where="companion abstract: the same mesh at the Y",
    known="read",
    holds_for="adult bench, bias flow 3.5 L/min, active humidifier",
)
MISTIMED_LOSS_FRAC = Number(
    value=0.35,
    unit="frac",
    source=DIOT_1995,
    where="dose lost when an inhaler is not actuated with the breath, about",
    known="from memory",
)

# --- fill, residual, driving gas --------------------------------------------------

JET_RESIDUAL_ML = Number(
    value=1.4,
    low=0.8,
    high=2.0,
    unit="ml",
    source=KLEINSTREUER_2014,
    where="Table 1: what stays in a jet nebulizer; middle of the range",
    known="read",
)
MESH_RESIDUAL_ML = Number(
    value=0.1,
    low=0.0,
    high=0.2,
    unit="ml",
    source=KLEINSTREUER_2014,
    where="Table 1: less than the upper figure; the middle from memory",
    known="read",
)
JET_KEPT_FRAC = Number(
    value=0.51,
    unit="frac",
    source=THOMAS_1993,
    where="abstract: activity left in a jet nebulizer filled with 3 mL",
    known="read",
)
EXTERNAL_GAS_LPM = Number(
    value=6.0,
    low=4.0,
    high=8.0,
    unit="lpm",
    source=LI_2022,
    where="abstract: external jet gas that worsened every measure of triggering",
    known="read",
    note="middle of the two flows tried",
)

# --- humidity ---------------------------------------------------------------------

HME_LEAST_MG_PER_L = Number(
    value=30.0,
    unit="mg_per_l",
    source=AARC_2012,
    where="abstract: water an HME should give at least",
    known="read",
)

# --- filters and what passes without one ------------------------------------------

UNFILTERED_OUTLET_FRAC = Number(
    value=0.45,
    unit="frac",
    source=ARI_2016,
    where="abstract: more than this of the dose at the outlet without a filter",
    known="read",
    holds_for="continuous jet at the Y, one adult setting; not for every generator",
)
FILTERED_OUTLET_FRAC = Number(
    value=0.0025,
    unit="frac",
    source=COMMON_PRACTICE,
    where="dose bystanders may meet with a filter",
    known="common practice",
    note="not seen in the text read; its ratio of 160 gives 0.0028",
)
FILTER_FITTED_FRAC = Number(
    value=0.65,
    unit="frac",
    source=EHRMANN_2013,
    where="abstract: physicians who say they fit one; 28 % of those never change it",
    known="read",
    holds_for="854 intensivists, self-report",
)
FILTER_IN_USE_H = Number(
    value=24.0,
    unit="h",
    source=COMMON_PRACTICE,
    where="how long a filter stays in the expiratory limb as a rule",
    known="common practice",
)
VISCOUS_FILTER_H = Number(
    value=4.0,
    low=2.0,
    high=4.0,
    unit="h",
    source=ANESTHESIOLOGY_2017,
    where="custom of most institutions with viscous diluents",
    known="read",
)

# --- when two logged settings contradict each other -------------------------------

VOLUME_SLACK_RATIO = Number(
    value=1.25,
    unit="ratio",
    source=OURS,
    where="tidal volume over peak flow times inspiratory time that rounding explains",
    known="ours",
    note="gas cannot enter faster than its peak flow, so a ratio above 1 is an error",
)
AT_THE_WYE_CM = Number(
    value=10.0,
    unit="cm",
    source=OURS,
    where="a generator charted at the Y is within this of it",
    known="ours",
)
