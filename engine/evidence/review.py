"""What the month and topic reviews count as enough, as a start and as a lot."""

from engine.evidence.shape import Number
from engine.evidence.sources import COMMON_PRACTICE, OURS

# --- when the statistics speak ---------------------------------------------------

FEW_PATIENTS_COUNT = Number(
    value=5,
    unit="count",
    source=OURS,
    where="below this many patients a month is theirs, not the department's",
    known="ours",
)
RUN_POINTS_COUNT = Number(
    value=10,
    unit="count",
    source=OURS,
    where="useful points before the two run rules are read",
    known="ours",
)
BASELINE_POINTS_COUNT = Number(
    value=20,
    unit="count",
    source=OURS,
    where="points before limits are firm; fewer are called provisional",
    known="ours",
    note="a practice value; no source read",
)
SHIFT_OF_CONCERN_RATIO = Number(
    value=2.0,
    unit="ratio",
    source=OURS,
    where="the change of the odds each CUSUM is tuned to find",
    known="ours",
)
CUSUM_FALSE_ALARM_POINTS = Number(
    value=100.0,
    unit="points",
    source=OURS,
    where="months between false signals the CUSUM limit is set to",
    known="ours",
)
FUNNEL_UNITS_COUNT = Number(
    value=5,
    unit="count",
    source=OURS,
    where="units before a funnel is drawn; with fewer, intervals only",
    known="ours",
)
DOUBLE_REVIEWS_COUNT = Number(
    value=30,
    unit="count",
    source=OURS,
    where="charts reviewed twice before kappa and AC1 are printed",
    known="ours",
)

# --- where an indicator asks to be looked at: starting values, the department's own --

FILTER_FITTED_START_FRAC = Number(
    value=0.85,
    unit="frac",
    source=OURS,
    where="share fitted with a filter below which to act",
    known="ours",
)
FILTER_HOURS_START_FRAC = Number(
    value=0.05,
    unit="frac",
    source=OURS,
    where="share of treatments on a filter past its hours",
    known="ours",
)
UNLOGGED_START_FRAC = Number(
    value=0.02,
    unit="frac",
    source=OURS,
    where="share of reading pairs that look like a change nobody logged",
    known="ours",
)
NO_READING_START_FRAC = Number(
    value=0.10,
    unit="frac",
    source=OURS,
    where="share of filtered treatments without a reading in the window",
    known="ours",
)
FIELD_MISSING_START_FRAC = Number(
    value=0.05,
    unit="frac",
    source=OURS,
    where="share of treatments with an essential field blank",
    known="ours",
)
RESUMED_START_FRAC = Number(
    value=0.95,
    unit="frac",
    source=OURS,
    where="share with humidification charted as resumed",
    known="ours",
)
MODE_UNCLEAR_START_FRAC = Number(
    value=0.02,
    unit="frac",
    source=OURS,
    where="share with a mode text that names no one mode",
    known="ours",
)
CONFIRMED_START_FRAC = Number(
    value=0.50,
    unit="frac",
    source=OURS,
    where="share of reviewed flags confirmed; below it the rule needs work",
    known="ours",
)
STRONGER_ACTIONS_START_FRAC = Number(
    value=0.50,
    unit="frac",
    source=COMMON_PRACTICE,
    where="share of agreed actions that are stronger or intermediate",
    known="common practice",
)
MISSED_START_FRAC = Number(
    value=0.035,
    unit="frac",
    source=OURS,
    where="treatments not given, as counted in one hospital; second hand",
    known="from memory",
)
LOW_DELIVERY_RATIO = Number(
    value=2.0,
    unit="ratio",
    source=OURS,
    where="best site over logged site from which a delivery counts as low",
    known="ours",
    note="relative to the same generator's best site, not an absolute dose",
)
FELL_FRAC = Number(
    value=0.30,
    unit="frac",
    source=OURS,
    where="fall between two readings that looks like a new filter, at least",
    known="ours",
)
FELL_CMH2O_PER_LPS = Number(
    value=0.5,
    unit="cmh2o_per_lps",
    source=OURS,
    where="the same fall, at least, in resistance",
    known="ours",
)

# --- topics ----------------------------------------------------------------------

TOPICS_COUNT = Number(
    value=3,
    unit="count",
    source=COMMON_PRACTICE,
    where="two to four topics fit one session",
    known="common practice",
    low=2,
    high=4,
)
PATIENT_CAP_FRAC = Number(
    value=0.05,
    unit="frac",
    source=OURS,
    where="most of a topic's weight that one patient may carry",
    known="ours",
)
POINTS_TO_DRAW_COUNT = Number(
    value=8,
    unit="count",
    source=OURS,
    where="points each side of a session before its effect is drawn",
    known="ours",
    note="a practice value; no source read",
)
POINTS_TO_TEST_COUNT = Number(
    value=12,
    unit="count",
    source=OURS,
    where="points each side of a session before its effect is tested",
    known="ours",
    note="a practice value; no source read",
)
WEIGHT_UNANIMOUS_RATIO = Number(
    value=1.0,
    unit="ratio",
    source=OURS,
    where="weight of a flag all sources agree on; the department may set its own",
    known="ours",
)
WEIGHT_MAJORITY_RATIO = Number(
    value=0.8,
    unit="ratio",
    source=OURS,
    where="weight of a flag most sources support",
    known="ours",
)
WEIGHT_DEPARTMENT_RATIO = Number(
    value=0.5,
    unit="ratio",
    source=OURS,
    where="weight of a flag that rests on the department's own table or limit",
    known="ours",
)
WEIGHT_CONTESTED_RATIO = Number(
    value=0.2,
    unit="ratio",
    source=OURS,
    where="weight of a flag on which sources differ",
    known="ours",
)
