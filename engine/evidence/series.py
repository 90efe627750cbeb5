"""Constants of charts over time."""

from engine.evidence.shape import Number
from engine.evidence.sources import (
    ANHOEJ_2014,
    NCHS_2023,
    NELSON_1994,
    NIST_HANDBOOK,
    SPIEGELHALTER_2005,
)

SIGMAS_RATIO = Number(
    value=3.0,
    unit="ratio",
    source=NIST_HANDBOOK,
    where="chapter 6.3: distance of the limits from the centre, in sigmas",
    known="read",
)
LEFT_TAIL_FRAC = Number(
    value=0.00135,
    unit="frac",
    source=NIST_HANDBOOK,
    where="chapter 6.3: chance beyond one three-sigma limit of a normal",
    known="read",
)
RANGE_TO_SD_RATIO = Number(
    value=1.128,
    unit="ratio",
    source=NIST_HANDBOOK,
    where="6.3.2.2: mean range of two over their standard deviation",
    known="read",
)
RUN_CROSSINGS_FRAC = Number(
    value=0.05,
    unit="frac",
    source=ANHOEJ_2014,
    where="the quantile of the number of crossings below which there are too few",
    known="read",
)
TIME_POWER_RATIO = Number(
    value=3.6,
    unit="ratio",
    source=NELSON_1994,
    where="hours between events to this power's root are nearly normal",
    known="read",
    note="read in a textbook that applies it",
)
WINSORISED_FRAC = Number(
    value=0.10,
    unit="frac",
    source=SPIEGELHALTER_2005,
    where="share of units pulled in at either end before dispersion is judged",
    known="from memory",
)
WIDEST_INTERVAL_RATIO = Number(
    value=1.60,
    unit="ratio",
    source=NCHS_2023,
    where="abstract: widest interval of a rate that may be shown, beside the rate",
    known="read",
    note="for plain counts the rule of ten decides before this one does",
)
