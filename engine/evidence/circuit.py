"""The breathing circuit: tubing, volumes and what is assumed when nobody logged it."""

from engine.evidence.shape import Number
from engine.evidence.sources import COMMON_PRACTICE, LELLOUCHE_2024, OURS

# --- tubing and volumes ----------------------------------------------------------

LIMB_MM = Number(
    value=22.0,
    unit="mm",
    source=COMMON_PRACTICE,
    where="inner diameter of adult corrugated tubing",
    known="common practice",
)
CHILD_LIMB_MM = Number(
    value=15.0,
    low=10.0,
    high=15.0,
    unit="mm",
    source=COMMON_PRACTICE,
    where="inner diameter of tubing used with a child's tube",
    known="common practice",
)
HUMIDIFIER_LIMB_CM = Number(
    value=150.0,
    low=120.0,
    high=180.0,
    unit="cm",
    source=COMMON_PRACTICE,
    where="tubing between humidifier outlet and Y; total moves little within the range",
    known="common practice",
)
INLET_TUBE_CM = Number(
    value=10.0,
    unit="cm",
    source=OURS,
    where="tubing between a generator at the humidifier inlet and the chamber",
    known="ours",
)
VENTILATOR_TUBE_CM = Number(
    value=50.0,
    unit="cm",
    source=COMMON_PRACTICE,
    where="tubing between ventilator outlet and humidifier",
    known="common practice",
)
CHAMBER_ML = Number(
    value=200.0,
    low=50.0,
    high=300.0,
    unit="ml",
    source=COMMON_PRACTICE,
    where="gas volume of a humidifier chamber",
    known="common practice",
)
SPACER_ML = Number(
    value=150.0,
    unit="ml",
    source=COMMON_PRACTICE,
    where="in-line chamber spacer of a metered-dose inhaler",
    known="common practice",
)
WYE_FITTING_ML = Number(
    value=5.0,
    unit="ml",
    source=OURS,
    where="gas between a generator next to the Y and the Y itself",
    known="ours",
)
CONNECTOR_ML = Number(
    value=10.0,
    unit="ml",
    source=COMMON_PRACTICE,
    where="gas between the Y and the tube: elbow and connector, adult",
    known="common practice",
)
SMALL_CONNECTOR_ML = Number(
    value=4.0,
    unit="ml",
    source=OURS,
    where="as above, child",
    known="ours",
)
HME_ML = Number(
    value=50.0,
    low=20.0,
    high=80.0,
    unit="ml",
    source=COMMON_PRACTICE,
    where="gas volume of an adult HME",
    known="common practice",
)
EXPIRATORY_LIMB_CM = Number(
    value=150.0,
    unit="cm",
    source=COMMON_PRACTICE,
    where="tubing between Y and the filter position",
    known="common practice",
)
RESPIRATORY_RC_S = Number(
    value=0.5,
    low=0.3,
    high=0.8,
    unit="s",
    source=OURS,
    where="time constant of passive expiration",
    known="ours",
    note="measured means of about 0.5 to 0.7 s are published for adults",
)

# --- what is taken where the log is silent ---------------------------------------

DEFAULT_DISTANCE_CM = Number(
    value=15.0,
    unit="cm",
    source=COMMON_PRACTICE,
    where="where a generator in the inspiratory limb is usually put",
    known="common practice",
)
BIAS_TRIED_COEF = Number(
    value=(2.0, 0.0, 5.0),
    unit="coef",
    source=OURS,
    where="bias flows in L/min tried where none is logged; the first gives the point",
    known="ours",
)
LEAK_TRIED_COEF = Number(
    value=(25.0, 10.0, 40.0),
    unit="coef",
    source=COMMON_PRACTICE,
    where="leak flows in L/min through the port of a single-limb circuit, tried alike",
    known="common practice",
)
DEFAULT_RATE_BPM = Number(
    value=16.0,
    unit="bpm",
    source=OURS,
    where="breaths taken where no rate is logged",
    known="ours",
)
FASTEST_TIDAL_RATE_BPM = Number(
    value=60.0,
    unit="bpm",
    source=OURS,
    where="no estimate above this rate",
    known="ours",
    note="oscillation is charted in Hz or far above it; no bench work here covers it",
)
DEFAULT_DUTY_FRAC = Number(
    value=0.3,
    unit="frac",
    source=OURS,
    where="share of the cycle spent inspiring where no inspiratory time is logged",
    known="ours",
)
DEFAULT_TUBE_MM = Number(
    value=8.0,
    unit="mm",
    source=COMMON_PRACTICE,
    where="adult tube where none is logged",
    known="common practice",
)
SMALL_TUBE_MM = Number(
    value=5.5,
    unit="mm",
    source=COMMON_PRACTICE,
    where="child's tube where none is logged and the breaths are small",
    known="common practice",
)
SMALL_BREATH_ML = Number(
    value=250.0,
    unit="ml",
    source=OURS,
    where="breaths below this are taken for a child's where no tube size is logged",
    known="ours",
)
SMALLEST_BREATH_ML = Number(
    value=100.0,
    unit="ml",
    source=OURS,
    where="no estimate below this tidal volume",
    known="ours",
    note="bench work at 40 mL is missed by more than a factor of two",
)
DRYING_GAS_MG_PER_L = Number(
    value=30.0,
    low=9.1,
    high=34.2,
    unit="mg_per_l",
    source=LELLOUCHE_2024,
    where="water in the gas at the Y: below this within minutes of switching off",
    known="read",
)

# --- what each assumption may move, on the logit scale ---------------------------

ASSUMED_DISTANCE_LOGIT = Number(
    value=0.2,
    unit="logit",
    source=OURS,
    where="half the change between 5 and 40 cm, worked out with the split at the Y",
    known="ours",
)
ASSUMED_INSPIRATORY_TIME_LOGIT = Number(
    value=0.3,
    unit="logit",
    source=OURS,
    where="half the change between 0.8 and 1.4 s",
    known="ours",
)
ASSUMED_RATE_LOGIT = Number(
    value=0.25,
    unit="logit",
    source=OURS,
    where="half the change between cycles of 3 and 5 s",
    known="ours",
)
ASSUMED_TUBE_LOGIT = Number(
    value=0.15,
    unit="logit",
    source=OURS,
    where="half the change between tubes of 7 and 9 mm",
    known="ours",
)
ASSUMED_SIZE_LOGIT = Number(
    value=0.2,
    unit="logit",
    source=OURS,
    where="half the change between droplets of 3.5 and 6 um",
    known="ours",
)
ASSUMED_GAS_LOGIT = Number(
    value=0.12,
    unit="logit",
    source=OURS,
    where="half the change between 4 and 9 L/min of driving gas",
    known="ours",
)
ASSUMED_TIMING_LOGIT = Number(
    value=0.4,
    unit="logit",
    source=OURS,
    where="continuous output taken where synchronised output may have been used",
    known="ours",
)
ASSUMED_PATTERN_LOGIT = Number(
    value=0.3,
    unit="logit",
    source=OURS,
    where="breaths the patient takes on top of the ventilator's are not in the model",
    known="ours",
)
LEAK_SPREAD_LOGIT = Number(
    value=0.8,
    unit="logit",
    source=OURS,
    where="spread of results in circuits with a leak, in place of the fitted one",
    known="ours",
)
RESIDUAL_SPREAD_LOGIT = Number(
    value=0.4,
    unit="logit",
    source=OURS,
    where="spread of what stays in generators of one kind",
    known="ours",
)
BAND_COVER_FRAC = Number(
    value=0.8,
    unit="frac",
    source=OURS,
    where="share of results the bands are to hold",
    known="ours",
)
SHOWN_DIFFERENCE_RATIO = Number(
    value=1.4,
    unit="ratio",
    source=OURS,
    where="a smaller difference between sites is within the spread inside a study",
    known="ours",
)
