"""Aerosol generators: droplet size and driving gas where the log is silent."""

from engine.evidence.shape import Number
from engine.evidence.sources import (
    CHEST_1987,
    COMMON_PRACTICE,
    CUCCIA_2020,
    DUBUS_2005,
    OURS,
)

JET_MMAD_UM = Number(
    value=4.8,
    low=3.5,
    high=6.0,
    unit="um",
    source=DUBUS_2005,
    where="abstract",
    known="read",
)
JET_GSD_RATIO = Number(
    value=2.1,
    low=1.8,
    high=2.5,
    unit="ratio",
    source=COMMON_PRACTICE,
    where="usual spread of a jet nebulizer",
    known="common practice",
)
BREATH_ENHANCED_MMAD_UM = Number(
    value=1.2,
    low=1.04,
    high=1.34,
    unit="um",
    source=CUCCIA_2020,
    where="abstract: measured in the circuit, middle of the range",
    known="read",
)
BREATH_ENHANCED_GSD_RATIO = Number(
    value=1.9,
    unit="ratio",
    source=OURS,
    where="not reported; taken between jet and inhaler",
    known="ours",
)
MESH_MMAD_UM = Number(
    value=4.8,
    low=3.5,
    high=6.0,
    unit="um",
    source=DUBUS_2005,
    where="abstract: 4.6 um for the continuous mesh, rounded up for adult devices",
    known="read",
)
MESH_GSD_RATIO = Number(
    value=2.0,
    low=2.0,
    high=2.2,
    unit="ratio",
    source=COMMON_PRACTICE,
    where="usual spread of a vibrating mesh",
    known="common practice",
)
ULTRASONIC_MMAD_UM = Number(
    value=5.2,
    low=4.0,
    high=6.0,
    unit="um",
    source=CHEST_1987,
    where="abstract: mass median 5.4 um, a little smaller in the circuit",
    known="read",
)
ULTRASONIC_GSD_RATIO = Number(
    value=1.8,
    low=1.5,
    high=2.2,
    unit="ratio",
    source=COMMON_PRACTICE,
    where="usual spread of an ultrasonic nebulizer",
    known="common practice",
)
INHALER_MMAD_UM = Number(
    value=2.6,
    low=2.0,
    high=3.0,
    unit="um",
    source=COMMON_PRACTICE,
    where="what a chamber spacer lets through",
    known="common practice",
)
INHALER_GSD_RATIO = Number(
    value=1.6,
    low=1.4,
    high=1.9,
    unit="ratio",
    source=COMMON_PRACTICE,
    where="usual spread past a chamber spacer",
    known="common practice",
)
JET_GAS_LPM = Number(
    value=7.0,
    low=4.0,
    high=9.0,
    unit="lpm",
    source=COMMON_PRACTICE,
    where="driving gas of a continuous jet nebulizer",
    known="common practice",
)
PUFF_S = Number(
    value=0.15,
    unit="s",
    source=OURS,
    where="time one actuation takes, at the start of an inspiration",
    known="ours",
)
