"""Expiratory flow sensors: how far their readings spread before anything is wrong."""

from engine.evidence.shape import Number
from engine.evidence.sources import GOVONI_2012, OURS, SANBORN_2005

BETWEEN_VENTILATORS_FRAC = Number(
    value=0.06,
    unit="frac",
    source=GOVONI_2012,
    where="abstract: 600 mL set, exhaled 608 with standard deviation 36 mL",
    known="read",
    holds_for="66 ventilators in four units, exhaled over set volume",
)
FLOW_READING_SPREAD_FRAC = Number(
    value=0.027,
    low=0.02,
    high=0.034,
    unit="frac",
    source=SANBORN_2005,
    where="stated accuracy of flow 6 to 10 % at three standard deviations, a third",
    known="read",
    note="used only while a ventilator has too few checks of its own",
)
SMALLEST_SPREAD_FRAC = Number(
    value=0.005,
    unit="frac",
    source=OURS,
    where="no ventilator's checks are taken to agree better than this",
    known="ours",
)
BASELINE_CHECKS_COUNT = Number(
    value=5,
    unit="count",
    source=OURS,
    where="checks after a calibration that set a ventilator's own level, at most",
    known="ours",
)
DRIFT_CHECKS_COUNT = Number(
    value=6,
    unit="count",
    source=OURS,
    where="checks since a calibration below which drift cannot be told",
    known="ours",
)
OWN_SPREAD_CHECKS_COUNT = Number(
    value=8,
    unit="count",
    source=OURS,
    where="checks from which a ventilator's own spread is used",
    known="ours",
)
WATER_NEAR_H = Number(
    value=12.0,
    unit="h",
    source=OURS,
    where="how near the fault an entry about water counts",
    known="ours",
)
GAS_NEAR_H = Number(
    value=1.0,
    unit="h",
    source=OURS,
    where="how long a treatment without an end is taken to run, and gas to linger",
    known="ours",
)
EXAMINED_WITHIN_H = Number(
    value=720.0,
    unit="h",
    source=OURS,
    where="how long after the fault an examination still counts as one of it",
    known="ours",
)
HUMID_NEAR_H = Number(
    value=48.0,
    unit="h",
    source=OURS,
    where="how near the fault a treatment tells how the gas was humidified",
    known="ours",
)
HIGH_PLACE_FRAC = Number(
    value=0.25,
    unit="frac",
    source=OURS,
    where="share of ventilators that counts as the highest",
    known="ours",
)
COMPARABLE_WINDOWS_COUNT = Number(
    value=60,
    unit="count",
    source=OURS,
    where="comparable windows looked back on, at most",
    known="ours",
)
