"""Filters, the trend of their readings, and what a reading may be mistaken for."""

from engine.evidence.shape import Number
from engine.evidence.sources import JIANG_2022, OURS

# --- the filter itself -----------------------------------------------------------

NEW_FILTER_CMH2O_PER_LPS = Number(
    value=2.26,
    low=2.03,
    high=2.40,
    unit="cmh2o_per_lps",
    source=JIANG_2022,
    where="abstract: filters never used, median and quartiles",
    known="read",
    holds_for="breathing-circuit filters, dry; the test flow is not given",
)
AIRWAY_LIKE_CMH2O_PER_LPS = Number(
    value=8.0,
    unit="cmh2o_per_lps",
    source=OURS,
    where="about what a tube and airways show together; filters rarely get there",
    known="ours",
    note="a reading of the ventilator at or above this may be the patient's airway",
)
OVER_RANGE_CMH2O = Number(
    value=60.0,
    unit="cmh2o",
    source=OURS,
    where="more than the pressures a ventilator can hold across a limb in use",
    known="ours",
)
NEW_FILTER_WITHIN_H = Number(
    value=2.0,
    unit="h",
    source=OURS,
    where="readings this soon after installation are taken as of the new filter",
    known="ours",
)
JUMP_FRAC = Number(
    value=0.5,
    unit="frac",
    source=OURS,
    where="a reading whose neighbours lie below this share of it stands alone",
    known="ours",
)

# --- trends, changes and forecasts -----------------------------------------------

INTERVAL_COVER_FRAC = Number(
    value=0.95,
    unit="frac",
    source=OURS,
    where="all intervals shown",
    known="ours",
)
EXACT_TREND_COUNT = Number(
    value=10,
    unit="count",
    source=OURS,
    where="readings up to which Mann-Kendall is worked out exactly",
    known="ours",
    note="beyond it the normal form is close; published examples use it from there",
)
PAIRWISE_READINGS_COUNT = Number(
    value=2000,
    unit="count",
    source=OURS,
    where="readings up to which all pairs are formed",
    known="ours",
)
TREND_READINGS_COUNT = Number(
    value=6,
    unit="count",
    source=OURS,
    where="readings a trend or a forecast needs unless the policy asks for more",
    known="ours",
    note="with five, only an almost perfect order can reach p .05",
)
CHANGE_READINGS_COUNT = Number(
    value=8,
    unit="count",
    source=OURS,
    where="readings the search for an unlogged change needs",
    known="ours",
)
SEGMENT_READINGS_COUNT = Number(
    value=2,
    unit="count",
    source=OURS,
    where="readings on each side of a suspected change, at least",
    known="ours",
)
EXACT_ARRANGEMENTS_COUNT = Number(
    value=50_000,
    unit="count",
    source=OURS,
    where="arrangements up to which all are tried instead of a sample",
    known="ours",
)
RESIDUAL_ARRANGEMENTS_COUNT = Number(
    value=1999,
    unit="count",
    source=OURS,
    where="arrangements drawn where all are too many",
    known="ours",
)
FIRST_LOOK_ARRANGEMENTS_COUNT = Number(
    value=199,
    unit="count",
    source=OURS,
    where="arrangements drawn first; most filters are settled by them",
    known="ours",
)
FIRST_LOOK_P_FRAC = Number(
    value=0.2,
    unit="frac",
    source=OURS,
    where="p above which the first look settles that nothing changed",
    known="ours",
    note="a change with p .05 exceeds it in fewer than one of a million first looks",
)
SECOND_LOOK_P_FRAC = Number(
    value=0.1,
    unit="frac",
    source=OURS,
    where="p above which a sample settles it and not all arrangements are tried",
    known="ours",
)
BREAK_SEGMENT_FRAC = Number(
    value=0.15,
    unit="frac",
    source=OURS,
    where="smallest share of a level series on either side of a break",
    known="ours",
)
FORECAST_HORIZON_FRAC = Number(
    value=1.0,
    unit="frac",
    source=OURS,
    where="how far ahead a date is given, in observed spans",
    known="ours",
)
SIGN_ARRANGEMENTS_COUNT = Number(
    value=9999,
    unit="count",
    source=OURS,
    where="random signs drawn where all are too many",
    known="ours",
)
POOLED_FILTERS_COUNT = Number(
    value=5,
    unit="count",
    source=OURS,
    where="filters below which aerosol and water are not told apart",
    known="ours",
)
SHARE_DRAWS_COUNT = Number(
    value=2000,
    unit="count",
    source=OURS,
    where="draws of the two rates behind a share's interval",
    known="ours",
)
SHARE_WIDTH_FRAC = Number(
    value=0.5,
    unit="frac",
    source=OURS,
    where="width of a share's interval beyond which it cannot tell",
    known="ours",
)
