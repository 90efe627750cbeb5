"""The lung model: regions, subjects and coefficients of ICRP Publication 66."""

from engine.evidence.shape import Number
from engine.evidence.sources import HINDS_1999, ICRP_66, OURS

_READ_IN = "read in the public KDEP source"

# --- subjects (Table 15): FRC; dead space of ET, BB, bb in mL; scaling SFt, SFb, SFA --


def _subject(who: str, *values: float) -> Number:
    return Number(
        value=values,
        unit="coef",
        source=ICRP_66,
        where=f"Table 15, {who}",
        known="read",
        note="FRC mL; dead space ET, BB, bb mL; scaling factors t, b, A",
    )


MALE_COEF = _subject("adult male", 3301, 50, 49, 47, 1, 1, 1)
FEMALE_COEF = _subject("adult female", 2681, 40, 40, 44, 1.08, 1.04, 1.07)
YEARS_15_COEF = _subject("male of 15 years", 2677, 45, 44, 41, 1.04, 1.03, 1.07)
YEARS_10_COEF = _subject("child of 10 years", 1484, 25, 26, 26, 1.26, 1.16, 1.31)
YEARS_5_COEF = _subject("child of 5 years", 767, 13.3, 15.5, 16.7, 1.55, 1.30, 1.63)
YEAR_1_COEF = _subject("child of 1 year", 244, 4.7, 6.8, 8.7, 2.20, 1.55, 2.30)
MONTHS_3_COEF = _subject("infant of 3 months", 148, 2.6, 4.5, 6.8, 2.68, 1.67, 2.58)

# --- how regions filter ----------------------------------------------------------

BRONCHI_IN_COEF = Number(
    value=(4.08e-6, 1.152, 2.3),
    unit="coef",
    source=ICRP_66,
    where=f"Tables 12 and 13, BB inspiration, aerodynamic; {_READ_IN}",
    known="read",
)
BRONCHI_OUT_COEF = Number(
    value=(2.04e-6, 1.152, 2.3),
    unit="coef",
    source=ICRP_66,
    where=f"Tables 12 and 13, BB expiration, aerodynamic; {_READ_IN}",
    known="read",
)
BRONCHI_THERMAL_COEF = Number(
    value=(22.02, 1.24, 0.6391),
    unit="coef",
    source=ICRP_66,
    where=f"Tables 12 and 13, BB, thermodynamic; {_READ_IN}",
    known="read",
)
BRONCHI_TURBULENCE_COEF = Number(
    value=(100.0, 100.0, 10.0, 0.9),
    unit="coef",
    source=ICRP_66,
    where=f"factor psi of BB diffusion; {_READ_IN}",
    known="read",
)
BRONCHIOLES_COEF = Number(
    value=(0.1147, 0.056, 1.5, 0.25, 1.173),
    unit="coef",
    source=ICRP_66,
    where=f"Tables 12 and 13, bb, aerodynamic; {_READ_IN}",
    known="read",
)
BRONCHIOLES_THERMAL_COEF = Number(
    value=(-76.8, 167.0, 0.65, 0.5676),
    unit="coef",
    source=ICRP_66,
    where=f"Tables 12 and 13, bb, thermodynamic; {_READ_IN}",
    known="read",
)
ALVEOLI_COEF = Number(
    value=(0.146, 0.98, 0.6495),
    unit="coef",
    source=ICRP_66,
    where=f"Tables 12 and 13, AI, aerodynamic; {_READ_IN}",
    known="read",
)
ALVEOLI_THERMAL_COEF = Number(
    value=(170.0, 103.0, 2.13, 0.6101),
    unit="coef",
    source=ICRP_66,
    where=f"Tables 12 and 13, AI, thermodynamic; {_READ_IN}",
    known="read",
)
NOSE_FRONT_COEF = Number(
    value=(3e-4, 18.0, 0.5),
    unit="coef",
    source=ICRP_66,
    where=f"ET1, aerodynamic and thermodynamic; {_READ_IN}",
    known="read",
)
NOSE_BACK_COEF = Number(
    value=(5.5e-5, 1.17, 15.1, 0.538),
    unit="coef",
    source=ICRP_66,
    where=f"ET2 behind the nose, aerodynamic and thermodynamic; {_READ_IN}",
    known="read",
)
MOUTH_COEF = Number(
    value=(1.1e-4, 0.6, -0.2, 1.4, 9.0, 0.5),
    unit="coef",
    source=ICRP_66,
    where=f"ET2 behind the mouth, aerodynamic and thermodynamic; {_READ_IN}",
    known="read",
)
HEAD_FLOW_COEF = Number(
    value=(3.0, -0.25),
    unit="coef",
    source=ICRP_66,
    where="powers of scaling factor and of flow in the head's filters",
    known="read",
)
INHALABLE_COEF = Number(
    value=(0.5, 7.6e-4, 2.8, 1e-5, 2.75, 0.055),
    unit="coef",
    source=ICRP_66,
    where="equation 12: what enters nose or mouth",
    known="read",
)
AEROSOL_SPREAD_COEF = Number(
    value=(1.5, 100.0, 1.5),
    unit="coef",
    source=ICRP_66,
    where="equation 16: geometric standard deviation of workplace aerosols",
    known="read",
)
DIFFUSION_COEF = Number(
    value=(1.38e-16, 310.0, 1.88e-4, 1e-4),
    unit="coef",
    source=ICRP_66,
    where="Annexe D: Boltzmann, body temperature, viscosity, cm per um (CGS units)",
    known="read",
)
WORKER_COEF = Number(
    value=(2.5, 750.0, 300.0, 0.54, 5.5, 1250.0, 833.0, 1.5),
    unit="coef",
    source=ICRP_66,
    where="reference worker: hours, mL, mL/s and m3/h sitting, then in light exercise",
    known="read",
)

# --- what the treatments use -----------------------------------------------------

SMALL_CHILD_TUBE_MM = Number(
    value=5.5,
    unit="mm",
    source=OURS,
    where="below this tube size the lung of a child of 5 years is taken",
    known="ours",
    note="a tube of age / 4 + 4 mm is common practice",
)
MODEL_TB_FRAC = Number(
    value=0.1,
    unit="frac",
    source=OURS,
    where="what the choice of lung model moves between larger airways and alveoli",
    known="ours",
    note="a one-path model with other deposition laws was compared",
)

# --- fits to the whole model, for checks -----------------------------------------

HINDS_INHALABLE_COEF = Number(
    value=(0.5, 0.00076, 2.8),
    unit="coef",
    source=HINDS_1999,
    where="equation 11.2",
    known="read",
)
HINDS_HEAD_COEF = Number(
    value=(6.84, 1.183, 0.924, -1.885),
    unit="coef",
    source=HINDS_1999,
    where="equation 11.1",
    known="read",
)
HINDS_BRONCHIAL_COEF = Number(
    value=(0.00352, 0.234, 3.40, 63.9, 0.819, 1.61),
    unit="coef",
    source=HINDS_1999,
    where="equation 11.3",
    known="read",
)
HINDS_ALVEOLAR_COEF = Number(
    value=(0.0155, 0.416, 2.84, 19.11, 0.482, 1.362),
    unit="coef",
    source=HINDS_1999,
    where="equation 11.4",
    known="read",
)
HINDS_TOTAL_COEF = Number(
    value=(0.0587, 0.911, 4.77, 1.485, 0.943, 0.508, -2.58),
    unit="coef",
    source=HINDS_1999,
    where="equation 11.5",
    known="read",
)
