"""How an invented department behaves: shares of each habit before and after teaching.

Basis   practice surveys where one was found (named beside the figure), otherwise a
        choice made for this project. Nothing here describes a real department.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TypeAlias

Shares: TypeAlias = dict[str | None, float]


@dataclass(frozen=True, kw_only=True)
class Drug:
    """One drug as this department gives it; ``share`` is of the orders."""

    name: str
    drug_class: str
    share: float
    dose_mg: float
    fill_ml: float
    every_h: float
    loads_filter_cmh2o_per_lps_per_ml: float


# Mix of drugs: survey of adult units, reshaped; loading is invented.
DRUGS: tuple[Drug, ...] = (
    Drug(
        name="albuterol",
        drug_class="bronchodilator",
        share=0.50,
        dose_mg=2.5,
        fill_ml=3.0,
        every_h=4.0,
        loads_filter_cmh2o_per_lps_per_ml=0.02,
    ),
    Drug(
        name="ipratropium",
        drug_class="bronchodilator",
        share=0.30,
        dose_mg=0.5,
        fill_ml=2.5,
        every_h=6.0,
        loads_filter_cmh2o_per_lps_per_ml=0.02,
    ),
    Drug(
        name="budesonide",
        drug_class="steroid",
        share=0.11,
        dose_mg=1.0,
        fill_ml=2.0,
        every_h=12.0,
        loads_filter_cmh2o_per_lps_per_ml=0.05,
    ),
    Drug(
        name="colistin",
        drug_class="anti_infective",
        share=0.025,
        dose_mg=80.0,
        fill_ml=4.0,
        every_h=8.0,
        loads_filter_cmh2o_per_lps_per_ml=0.03,
    ),
    Drug(
        name="tobramycin",
        drug_class="anti_infective",
        share=0.02,
        dose_mg=300.0,
        fill_ml=5.0,
        every_h=12.0,
        loads_filter_cmh2o_per_lps_per_ml=0.03,
    ),
    Drug(
        name="pentamidine",
        drug_class="anti_infective",
        share=0.005,
        dose_mg=300.0,
        fill_ml=6.0,
        every_h=24.0,
        loads_filter_cmh2o_per_lps_per_ml=0.03,
    ),
    Drug(
        name="acetylcysteine",
        drug_class="mucoactive",
        share=0.015,
        dose_mg=600.0,
        fill_ml=3.0,
        every_h=8.0,
        loads_filter_cmh2o_per_lps_per_ml=0.05,
    ),
    Drug(
        name="hypertonic saline",
        drug_class="mucoactive",
        share=0.015,
        dose_mg=120.0,
        fill_ml=4.0,
        every_h=8.0,
        loads_filter_cmh2o_per_lps_per_ml=0.04,
    ),
    Drug(
        name="epoprostenol",
        drug_class="pulmonary_vasodilator",
        share=0.01,
        dose_mg=1.0,
        fill_ml=30.0,
        every_h=4.0,
        loads_filter_cmh2o_per_lps_per_ml=0.02,
    ),
)

# Generators in use: surveys of intensivists, multi-answer, reshaped.
GENERATORS: Shares = {
    "jet": 0.55,
    "vibrating_mesh": 0.20,
    "pmdi_spacer": 0.20,
    "ultrasonic": 0.02,
    None: 0.03,
}
# Modes: an observational record reshaped to adults; None is an unmapped term.
MODES: Shares = {
    "psv": 0.30,
    "cpap": 0.05,
    "vcv": 0.30,
    "simv": 0.10,
    "prvc": 0.12,
    "pcv": 0.08,
    "aprv": 0.01,
    None: 0.04,
}
# Expiratory filter as charted: surveys for the first, a choice for the second.
FILTER_BEFORE: Shares = {"present": 0.66, "absent": 0.22, None: 0.12}
FILTER_AFTER: Shares = {"present": 0.82, "absent": 0.08, None: 0.10}

# Share of treatments placed as the table prefers: an observed audit, a choice.
PREFERRED_SITE_BEFORE, PREFERRED_SITE_AFTER = 0.40, 0.55
# HME left between generator and airway where an HME humidifies: a choice.
HME_IN_LINE, HME_UNSAID = 0.12, 0.20
HME_IN_LINE_BIRCH_BEFORE = 0.45
# Heated humidifier during the treatment: three surveys.
HEATER: Shares = {"on": 0.65, "off": 0.25, None: 0.10}
# One unit's nights, continuous jets at the Y: the story of this department.
JET_AT_WYE_NIGHTS_BEFORE, JET_AT_WYE_NIGHTS_AFTER = 0.75, 0.20

MISSING_END, MISSING_READING, NOT_GIVEN = 0.30, 0.35, 0.035
MISSING_BIAS, ASSUMED_BIAS = 0.35, 0.45
MISSING_FIELD = 0.02
EXTERNAL_GAS_OF_JETS = 0.12
UNSYNCHRONISED_PMDI = 0.15
REMOVED_BY_POLICY_H, LAPSE = 24.0, 0.45
FALSE_ENTRIES = 0.004
