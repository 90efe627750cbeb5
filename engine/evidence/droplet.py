"""Droplets and the gas around them: slip, viscosity, salt and water."""

from engine.evidence.shape import Number
from engine.evidence.sources import (
    ALDUCHOV_1996,
    ALLEN_RAABE_1985,
    CODATA,
    DAVIES_1945,
    HINDS_1999,
    HUTCHINS_1995,
    ICRP_66,
    KIM_2005,
    OURS,
    PITZER_1973,
)

# --- the gas ---------------------------------------------------------------------

AIR_REFERENCE_COEF = Number(
    value=(1.83245e-5, 0.0673, 296.15, 101330.0, 110.4),
    unit="coef",
    source=KIM_2005,
    where="viscosity in Pa s, mean free path in um, at K and Pa; Sutherland constant",
    known="read",
    note="as ISO 15900 uses them",
)
STANDARD_PA = Number(
    value=101325.0,
    unit="pa",
    source=CODATA,
    where="standard atmosphere",
    known="from memory",
)
ROOM_K = Number(
    value=293.15,
    unit="k",
    source=HINDS_1999,
    where="temperature of tables that name none",
    known="from memory",
)
GRAVITY_M_PER_S2 = Number(
    value=9.80665,
    unit="m_per_s2",
    source=CODATA,
    where="standard gravity",
    known="from memory",
)
BOLTZMANN_J_PER_K = Number(
    value=1.380649e-23,
    unit="j_per_k",
    source=CODATA,
    where="exact by definition",
    known="from memory",
)
GAS_CONSTANT_J_PER_MOL_K = Number(
    value=8.314462618,
    unit="j_per_mol_k",
    source=CODATA,
    where="exact by definition",
    known="from memory",
)
DRY_AIR_KG_PER_MOL = Number(
    value=0.0289652,
    unit="kg_per_mol",
    source=CODATA,
    where="molar mass of dry air",
    known="from memory",
)
WATER_KG_PER_MOL = Number(
    value=0.01801528,
    unit="kg_per_mol",
    source=CODATA,
    where="molar mass of water",
    known="from memory",
)
SATURATION_COEF = Number(
    value=(610.94, 17.625, 243.04),
    unit="coef",
    source=ALDUCHOV_1996,
    where="Magnus form: saturation pressure over water in Pa, temperature in C",
    known="from memory",
)

# --- slip ------------------------------------------------------------------------

DAVIES_1945_COEF = Number(
    value=(1.257, 0.400, 1.10),
    unit="coef",
    source=DAVIES_1945,
    where="A, B, C of 1 + Kn (A + B exp(-C / Kn))",
    known="read",
)
ALLEN_RAABE_1985_COEF = Number(
    value=(1.142, 0.558, 0.999),
    unit="coef",
    source=ALLEN_RAABE_1985,
    where="solid spheres; A, B, C as above",
    known="from memory",
)
KIM_2005_COEF = Number(
    value=(1.165, 0.483, 0.997),
    unit="coef",
    source=KIM_2005,
    where="A, B, C as above",
    known="read",
)
HUTCHINS_1995_COEF = Number(
    value=(1.2310, 0.4695, 1.1783),
    unit="coef",
    source=HUTCHINS_1995,
    where="A, B, C as above",
    known="read",
)
HINDS_1999_COEF = Number(
    value=(2.34, 1.05, 0.39),
    unit="coef",
    source=HINDS_1999,
    where="equation 3.20: 1 + (lambda / d) (a + b exp(-c d / lambda))",
    known="from memory",
)
ICRP_66_SLIP_COEF = Number(
    value=(2.514, 0.8, 0.55),
    unit="coef",
    source=ICRP_66,
    where="Annexe D; a, b, c as above",
    known="read",
)
ICRP_66_FREE_PATH_UM = Number(
    value=0.0683,
    unit="um",
    source=ICRP_66,
    where="Annexe D: the mean free path its fits were made with",
    known="read",
)

# --- droplets of the treatments --------------------------------------------------

WATER_KG_PER_M3 = Number(
    value=1000.0,
    unit="kg_per_m3",
    source=OURS,
    where="drug solutions are taken as water",
    known="ours",
)
SIZE_NODES_COUNT = Number(
    value=16.0,
    unit="count",
    source=OURS,
    where="sizes a lognormal aerosol is carried in: regional error below 1e-3",
    known="ours",
)

# --- salt ------------------------------------------------------------------------

PITZER_NACL_COEF = Number(
    value=(0.392, 1.2, 0.0765, 0.2664, 2.0, 0.00127),
    unit="coef",
    source=PITZER_1973,
    where="sodium chloride at 25 C: A, b, beta 0, beta 1, alpha, C",
    known="from memory",
)
NACL_KG_PER_MOL = Number(
    value=0.05844,
    unit="kg_per_mol",
    source=CODATA,
    where="molar mass of sodium chloride",
    known="from memory",
)
NACL_KG_PER_M3 = Number(
    value=2165.0,
    unit="kg_per_m3",
    source=CODATA,
    where="density of the crystal",
    known="from memory",
)
ISOTONIC_NACL_FRAC = Number(
    value=0.009,
    unit="frac",
    source=CODATA,
    where="isotonic saline, share of mass",
    known="from memory",
)
BRINE_MOL_PER_KG = Number(
    value=6.6,
    unit="mol_per_kg",
    source=OURS,
    where="a little above the solubility of salt; a droplet is dried no further",
    known="ours",
)
