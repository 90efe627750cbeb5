"""Rooms and bystanders: how long aerosol stays, how much of it is breathed in."""

from engine.evidence.shape import Number
from engine.evidence.sources import CDC_2003, COMMON_PRACTICE, OTOOLE_2020

BYSTANDER_LPM = Number(
    value=9.0,
    unit="lpm",
    source=COMMON_PRACTICE,
    where="air a person at rest breathes",
    known="common practice",
)
CEILING_M = Number(
    value=2.4,
    unit="m",
    source=COMMON_PRACTICE,
    where="height over which droplets settle in a mixed room",
    known="common practice",
)
MIXING_COEF = Number(
    value=(1.0, 10.0),
    unit="coef",
    source=CDC_2003,
    where="factor on the clearance time: perfect mixing, and very poor mixing",
    known="read",
)
NEAR_FIELD_MG_PER_M3 = Number(
    value=0.077,
    low=0.073,
    high=0.091,
    unit="mg_per_m3",
    source=OTOOLE_2020,
    where="abstract: beside a ventilator without a filter, tidal volume 820 mL",
    known="read",
    note="four to five times what a mixed room gives: the near field is not in it",
)
