"""What counts as agreement between the estimate and the benches."""

from engine.evidence.shape import Number
from engine.evidence.sources import OURS

OBSERVED_TIE_RATIO = Number(
    value=1.05,
    unit="ratio",
    source=OURS,
    where="two results closer than this, or than their spreads, have no order",
    known="ours",
)
ESTIMATED_TIE_RATIO = Number(
    value=1.01,
    unit="ratio",
    source=OURS,
    where="two estimates closer than this have no order",
    known="ours",
)
TARGET_COVERAGE_FRAC = Number(
    value=0.8,
    unit="frac",
    source=OURS,
    where="share of strict validation rows wanted inside their 80 % bands",
    known="ours",
)
TARGET_ORDER_RATIO = Number(
    value=0.7,
    unit="ratio",
    source=OURS,
    where="right less wrong orders over all, wanted",
    known="ours",
)
TARGET_ERROR_LOGIT = Number(
    value=0.45,
    unit="logit",
    source=OURS,
    where="root mean square error of strict validation rows wanted at most",
    known="ours",
)
BAND_TEST_FRAC = Number(
    value=0.05,
    unit="frac",
    source=OURS,
    where="so rarely would an honest band hold as many results: it is called wide",
    known="ours",
)
