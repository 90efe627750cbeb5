"""The artificial airway: its size, and what droplets do in bends and on walls."""

from engine.evidence.shape import Number
from engine.evidence.sources import (
    ARI_2012,
    BLASIUS_1913,
    COMMON_PRACTICE,
    FRIEDLANDER_1957,
    LIU_AGARWAL_1974,
    OURS,
    PUI_1987,
)

ADULT_TUBE_MM = Number(
    value=6.0,
    unit="mm",
    source=COMMON_PRACTICE,
    where="inner diameter from which a tube is taken for an adult's",
    known="common practice",
)
ADULT_TUBE_CM = Number(
    value=30.0,
    unit="cm",
    source=COMMON_PRACTICE,
    where="length of an adult endotracheal tube in use",
    known="common practice",
)
CHILD_TUBE_CM = Number(
    value=20.0,
    unit="cm",
    source=COMMON_PRACTICE,
    where="length of a child's endotracheal tube in use",
    known="common practice",
)
TRACHEOSTOMY_CM = Number(
    value=12.0,
    unit="cm",
    source=COMMON_PRACTICE,
    where="length of a tracheostomy tube with its connector",
    known="common practice",
)
BEND_DEG = Number(
    value=90.0,
    unit="deg",
    source=OURS,
    where="total bend of a tube in place",
    known="ours",
)
TRACHEOSTOMY_OVER_ENDOTRACHEAL_RATIO = Number(
    value=1.52,
    low=1.0,
    high=1.68,
    unit="ratio",
    source=ARI_2012,
    where="abstract: 13.79 over 9.05 %, and 45.75 over 27.23 %; the smaller taken",
    known="read",
    holds_for="8 mm tubes, jet, spontaneous breathing",
    note="bend and wall alone give 1.01 to 1.04: the reason is not in the model",
)
TUBE_GAS_K = Number(
    value=308.15,
    unit="k",
    source=OURS,
    where="gas in tube and airways",
    known="ours",
)
TUBE_GAS_KG_PER_M3 = Number(
    value=1.13,
    unit="kg_per_m3",
    source=OURS,
    where="moist air at that temperature",
    known="ours",
)

# --- bends -----------------------------------------------------------------------

PUI_TURBULENT_COEF = Number(
    value=(0.963, 90.0),
    unit="coef",
    source=PUI_1987,
    where="turbulent bend: power of ten per Stokes number per 90 degrees",
    known="from memory",
    holds_for="Reynolds numbers 6000 to 10 000; its Stokes number is 2 tau U / D",
)
BROCKMANN_COEF = Number(
    value=(2.823,),
    unit="coef",
    source=PUI_1987,
    where="the same curve per radian with Stokes number tau U / D",
    known="read",
)
PUI_LAMINAR_COEF = Number(
    value=(0.171, 0.452, 2.242, 90.0),
    unit="coef",
    source=PUI_1987,
    where="laminar bend, Reynolds number 1000",
    known="read",
    note="Stokes number tau U / D here: settled by infant tube data",
)
LAMINAR_BELOW_RE = Number(
    value=2000.0,
    unit="re",
    source=OURS,
    where="laminar bend below, turbulent above the next; between them by ln Re",
    known="ours",
)
TURBULENT_ABOVE_RE = Number(
    value=6000.0,
    unit="re",
    source=OURS,
    where="lower end of the range of the turbulent bend data",
    known="ours",
)

# --- straight walls --------------------------------------------------------------

FRICTION_COEF = Number(
    value=(0.316, 0.25),
    unit="coef",
    source=BLASIUS_1913,
    where="friction factor of a smooth tube: scale, power of the Reynolds number",
    known="from memory",
)
LIU_AGARWAL_COEF = Number(
    value=(6e-4, 0.1),
    unit="coef",
    source=LIU_AGARWAL_1974,
    where="deposition velocity over square of relaxation time, and its plateau",
    known="read",
)
FRIEDLANDER_COEF = Number(
    value=(1525.0, 50.6, 13.73, 5.0, 5.04, 0.959, 5.0, 30.0, 0.9),
    unit="coef",
    source=FRIEDLANDER_1957,
    where="stopping-distance model of turbulent deposition",
    known="from memory",
)
