"""What was expected of the free constants before any bench result was fitted."""

from engine.evidence.shape import Number
from engine.evidence.sources import OURS


def _prior(median: float, width: float, scale: str, where: str) -> Number:
    return Number(
        value=(median, width),
        unit="coef",
        source=OURS,
        where=f"{where}; median, and standard deviation on the {scale} scale",
        known="ours",
    )


SETTLING_RATIO_PRIOR_COEF = _prior(1.5, 0.7, "log", "corrugated tubing settles more")
HUMID_FRAC_PRIOR_COEF = _prior(0.55, 0.7, "logit", "about half in humid circuits")
WYE_FRAC_PRIOR_COEF = _prior(0.90, 0.7, "logit", "a few per cent in connectors")
CHAMBER_FRAC_PRIOR_COEF = _prior(0.85, 1.0, "logit", "little is known")
VIBRATING_MESH_FRAC_PRIOR_COEF = _prior(0.90, 0.7, "logit", "small residual volume")
ULTRASONIC_FRAC_PRIOR_COEF = _prior(0.65, 0.7, "logit", "60 to 80 % of the fill")
PMDI_SPACER_FRAC_PRIOR_COEF = _prior(0.38, 0.7, "logit", "half is lost in the spacer")
JET_FRAC_PRIOR_COEF = _prior(0.45, 0.7, "logit", "about half of the fill")
PULSED_JET_FRAC_PRIOR_COEF = _prior(0.40, 0.7, "logit", "less than a steady jet")
BREATH_ENHANCED_JET_FRAC_PRIOR_COEF = _prior(0.45, 0.7, "logit", "as a jet")
BETWEEN_STUDY_LOGIT = Number(
    value=0.35,
    unit="logit",
    source=OURS,
    where="how far a whole study may lie off for what it did not report",
    known="ours",
)
WITHIN_ERROR_LOGIT = Number(
    value=0.15,
    unit="logit",
    source=OURS,
    where="error of a bench result beside its printed spread",
    known="ours",
)
