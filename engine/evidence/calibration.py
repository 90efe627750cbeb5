"""Free constants of the balance, fitted once to the calibration studies."""

from engine.evidence.shape import Number
from engine.evidence.sources import OURS

LIMB_TANKS_COUNT = Number(
    value=8.0,
    low=2.0,
    high=16.0,
    unit="count",
    source=OURS,
    where="stirred tanks in series that spread gas like the limb does",
    known="fitted",
)
SETTLING_MULTIPLIER_RATIO = Number(
    value=0.61,
    low=0.27,
    high=1.4,
    unit="ratio",
    source=OURS,
    where="settling in the limb over well-mixed settling",
    known="fitted",
)
HUMID_SURVIVAL_FRAC = Number(
    value=0.61,
    low=0.54,
    high=0.67,
    unit="frac",
    source=OURS,
    where="dose through an actively humidified circuit over dry gas",
    known="fitted",
)
WYE_SURVIVAL_FRAC = Number(
    value=0.93,
    low=0.86,
    high=0.97,
    unit="frac",
    source=OURS,
    where="aerosol that passes Y and connectors",
    known="fitted",
)
CHAMBER_SURVIVAL_FRAC = Number(
    value=0.93,
    low=0.81,
    high=0.975,
    unit="frac",
    source=OURS,
    where="aerosol that passes the humidifier chamber",
    known="fitted",
)
MESH_EMITTED_FRAC = Number(
    value=0.86,
    low=0.78,
    high=0.92,
    unit="frac",
    source=OURS,
    where="nominal dose leaving the generator as aerosol",
    known="fitted",
)
ULTRASONIC_EMITTED_FRAC = Number(
    value=0.67,
    low=0.56,
    high=0.77,
    unit="frac",
    source=OURS,
    where="nominal dose leaving the generator as aerosol",
    known="fitted",
)
INHALER_EMITTED_FRAC = Number(
    value=0.44,
    low=0.38,
    high=0.50,
    unit="frac",
    source=OURS,
    where="label dose leaving the spacer as aerosol",
    known="fitted",
)
JET_EMITTED_FRAC = Number(
    value=0.56,
    low=0.47,
    high=0.64,
    unit="frac",
    source=OURS,
    where="nominal dose leaving the generator as aerosol",
    known="fitted",
)
PULSED_JET_EMITTED_FRAC = Number(
    value=0.33,
    low=0.25,
    high=0.42,
    unit="frac",
    source=OURS,
    where="nominal dose leaving a jet driven in inspiration only",
    known="fitted",
)
BREATH_ENHANCED_EMITTED_FRAC = Number(
    value=0.455,
    low=0.36,
    high=0.56,
    unit="frac",
    source=OURS,
    where="nominal dose leaving the generator as aerosol",
    known="fitted",
)
DELIVERED_SPREAD_LOGIT = Number(
    value=0.55,
    unit="logit",
    source=OURS,
    where="spread of single results about the estimate, a study left out of the fit",
    known="fitted",
)
WITHIN_STUDY_LOGIT = Number(
    value=0.25,
    unit="logit",
    source=OURS,
    where="spread of conditions within a study about the estimate",
    known="fitted",
)
