"""The split at the Y: how its sums are cut."""

from engine.evidence.shape import Number
from engine.evidence.sources import OURS, WILSON_1931

STILL_GAS_ML_PER_S = Number(
    value=1e-6,
    unit="ml_per_s",
    source=OURS,
    where="gas that stands still is taken to move this slowly",
    known="ours",
)
VOLUME_NODES_COUNT = Number(
    value=12.0,
    unit="count",
    source=OURS,
    where="limb volumes a spread is averaged over: split within 0.001",
    known="ours",
)
HARMONICS_COUNT = Number(
    value=12.0,
    unit="count",
    source=OURS,
    where="terms of the series over the breath where the spread is wide",
    known="ours",
)
WIDE_SPREAD_FRAC = Number(
    value=0.1,
    unit="frac",
    source=OURS,
    where="standard deviation of the volume over the breath's from which it is wide",
    known="ours",
)
GAMMA_QUANTILE_COEF = Number(
    value=(9.0, 3.0),
    unit="coef",
    source=WILSON_1931,
    where="gamma quantiles from normal ones: cube of 1 - c/9 + z sqrt(c)/3",
    known="from memory",
)
FALLING_FLOW_PIECES_COUNT = Number(
    value=4.0,
    unit="count",
    source=OURS,
    where="pieces of constant flow a falling flow is cut into in the series",
    known="ours",
)
