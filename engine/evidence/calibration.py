"""Free constants of the balance, fitted once to the calibration studies.

Written by ``python -m engine.physics.calibrate --write``; not by hand. Low and high
hold 80 % of what the fit leaves open.
"""

from engine.evidence.shape import Number
from engine.evidence.sources import CALIBRATION_FIT

LIMB_TANKS_COUNT = Number(
    value=8.0,
    unit="count",
    source=CALIBRATION_FIT,
    where="stirred tanks in series that spread gas like the limb; set, not fitted",
    known="fitted",
    note="4 to 16 fit about as well",
)
SETTLING_MULTIPLIER_RATIO = Number(
    value=0.7457,
    low=0.344,
    high=1.62,
    unit="ratio",
    source=CALIBRATION_FIT,
    where="settling in the limb over well-mixed settling",
    known="fitted",
)
HUMID_SURVIVAL_FRAC = Number(
    value=0.6195,
    low=0.552,
    high=0.682,
    unit="frac",
    source=CALIBRATION_FIT,
    where="dose through an actively humidified circuit over dry gas",
    known="fitted",
)
WYE_SURVIVAL_FRAC = Number(
    value=0.9016,
    low=0.803,
    high=0.954,
    unit="frac",
    source=CALIBRATION_FIT,
    where="aerosol that passes Y and connectors",
    known="fitted",
)
CHAMBER_SURVIVAL_FRAC = Number(
    value=0.9343,
    low=0.82,
    high=0.978,
    unit="frac",
    source=CALIBRATION_FIT,
    where="aerosol that passes the humidifier chamber",
    known="fitted",
)
MESH_EMITTED_FRAC = Number(
    value=0.8701,
    low=0.765,
    high=0.932,
    unit="frac",
    source=CALIBRATION_FIT,
    where="nominal dose leaving the generator as aerosol",
    known="fitted",
)
ULTRASONIC_EMITTED_FRAC = Number(
    value=0.6998,
    low=0.562,
    high=0.809,
    unit="frac",
    source=CALIBRATION_FIT,
    where="nominal dose leaving the generator as aerosol",
    known="fitted",
)
INHALER_EMITTED_FRAC = Number(
    value=0.4681,
    low=0.398,
    high=0.539,
    unit="frac",
    source=CALIBRATION_FIT,
    where="label dose leaving the spacer as aerosol",
    known="fitted",
)
JET_EMITTED_FRAC = Number(
    value=0.5752,
    low=0.478,
    high=0.667,
    unit="frac",
    source=CALIBRATION_FIT,
    where="nominal dose leaving the generator as aerosol",
    known="fitted",
)
PULSED_JET_EMITTED_FRAC = Number(
    value=0.3626,
    low=0.279,
    high=0.455,
    unit="frac",
    source=CALIBRATION_FIT,
    where="nominal dose leaving a jet driven in inspiration only",
    known="fitted",
)
BREATH_ENHANCED_EMITTED_FRAC = Number(
    value=0.4611,
    low=0.333,
    high=0.595,
    unit="frac",
    source=CALIBRATION_FIT,
    where="nominal dose leaving the generator as aerosol",
    known="fitted",
)
DELIVERED_SPREAD_LOGIT = Number(
    value=0.556,
    unit="logit",
    source=CALIBRATION_FIT,
    where="spread of single results about the estimate, their study left out",
    known="fitted",
)
WITHIN_STUDY_LOGIT = Number(
    value=0.2338,
    unit="logit",
    source=CALIBRATION_FIT,
    where="spread of conditions inside a study about the estimate",
    known="fitted",
)
