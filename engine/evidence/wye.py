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
# spread: standard deviation of the volume of the way to the Y over the breath's
NARROW_SPREAD_FRAC = Number(
    value=0.03,
    unit="frac",
    source=OURS,
    where="spread below which a few limb volumes stand for all",
    known="ours",
)
WIDE_SPREAD_FRAC = Number(
    value=0.1,
    unit="frac",
    source=OURS,
    where="spread from which the share is summed as a series",
    known="ours",
)
WIDEST_SPREAD_FRAC = Number(
    value=0.4,
    unit="frac",
    source=OURS,
    where="spread from which the limb is all but mixed",
    known="ours",
)
NARROW_NODES_COUNT = Number(
    value=5.0,
    unit="count",
    source=OURS,
    where="limb volumes a narrow spread is averaged over",
    known="ours",
)
VOLUME_NODES_COUNT = Number(
    value=12.0,
    unit="count",
    source=OURS,
    where="limb volumes a middling spread is averaged over: split within 0.01",
    known="ours",
)
WIDE_NODES_COUNT = Number(
    value=5.0,
    unit="count",
    source=OURS,
    where="limb volumes the age is averaged over where the share is a series",
    known="ours",
)
AGE_NODES_COUNT = Number(
    value=3.0,
    unit="count",
    source=OURS,
    where="limb volumes the age of what is swept past is averaged over",
    known="ours",
)
SHORT_OUTPUT_FRAC = Number(
    value=0.1,
    unit="frac",
    source=OURS,
    where="output shorter than this share of a cycle smooths nothing: summed finer",
    known="ours",
)
PUFF_NODES_COUNT = Number(
    value=12.0,
    unit="count",
    source=OURS,
    where="limb volumes the age of a puff is averaged over where the spread is wide",
    known="ours",
)
HARMONICS_COUNT = Number(
    value=12.0,
    unit="count",
    source=OURS,
    where="terms of the series over the breath where nothing else is asked",
    known="ours",
)
WIDE_HARMONICS_COUNT = Number(
    value=10.0,
    unit="count",
    source=OURS,
    where="terms of the series where the spread is wide",
    known="ours",
)
WIDEST_HARMONICS_COUNT = Number(
    value=4.0,
    unit="count",
    source=OURS,
    where="terms of the series where the limb is all but mixed",
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
