"""What expiratory filters and HMEs let through, and where it goes then."""

from engine.evidence.shape import Number
from engine.evidence.sources import (
    ARI_2016,
    COMMON_PRACTICE,
    OURS,
    WILKES_2002,
    WILKES_2004,
)

PLEATED_PENETRATION_FRAC = Number(
    value=0.00037,
    low=0.00002,
    high=0.0067,
    unit="frac",
    source=WILKES_2002,
    where="abstract: range of nine pleated filters; its geometric middle taken",
    known="read",
    holds_for="salt particles near the most penetrating size, 30 L/min",
)
ELECTROSTATIC_PENETRATION_FRAC = Number(
    value=0.03,
    low=0.0025,
    high=0.35,
    unit="frac",
    source=WILKES_2002,
    where="abstract: range of 24 electrostatic filters; its geometric middle taken",
    known="read",
    holds_for="salt particles near the most penetrating size, 30 L/min",
)
HMEF_PENETRATION_FRAC = Number(
    value=0.01,
    low=0.001,
    high=0.1,
    unit="frac",
    source=OURS,
    where="about 99 % is reported for filter-HMEs with droplets; the range is ours",
    known="ours",
)
ANY_FILTER_PENETRATION_FRAC = Number(
    value=0.006,
    low=0.0002,
    high=0.1,
    unit="frac",
    source=ARI_2016,
    where="abstract: outlet dose more than 160 times less with a filter; range ours",
    known="read",
    holds_for="filter of unknown kind",
)
PENETRATION_FLOW_COEF = Number(
    value=(30.0, 1.37),
    unit="coef",
    source=WILKES_2004,
    where="abstract: 2 to 40 times more from 15 to 75 L/min; power of flow, middle",
    known="read",
    note="first figure: the test flow in L/min",
)
SENSOR_HELD_FRAC = Number(
    value=0.1,
    low=0.02,
    high=0.4,
    unit="frac",
    source=OURS,
    where="share of what passes the filter position that stays on sensor and valve",
    known="ours",
    note="no published split; unfiltered, nearly half a dose was caught at the outlet",
)
HME_CAPTURE_FRAC = Number(
    value=0.9,
    low=0.6,
    high=0.99,
    unit="frac",
    source=COMMON_PRACTICE,
    where="aerosol an HME without filter takes from gas passing through it",
    known="common practice",
)
HMEF_CAPTURE_FRAC = Number(
    value=0.99,
    low=0.9,
    high=0.999,
    unit="frac",
    source=OURS,
    where="aerosol a filter-HME takes from gas passing through it",
    known="ours",
)
