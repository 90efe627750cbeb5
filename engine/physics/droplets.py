"""Droplets in gas: slip, settling, inertia, diffusion, and a lognormal mass of them.

Sizes are in micrometres, everything else in SI units, as the names say. Arguments are
numbers or arrays that broadcast; results have their common shape.
"""

from __future__ import annotations

from functools import cache
from typing import TypeAlias

import numpy as np
from scipy.special import ndtr

from engine.evidence import droplet
from engine.physics.air import (
    air_viscosity_pa_s,
    coefficients,
    mean_free_path_um,
)

Values: TypeAlias = np.ndarray | float

M_PER_UM = 1e-6

# law -> its coefficients; the first four are written in Kn, the others in d / lambda
_BY_KNUDSEN = {
    "davies1945": droplet.DAVIES_1945_COEF,
    "allen_raabe1985_solid": droplet.ALLEN_RAABE_1985_COEF,
    "kim2005": droplet.KIM_2005_COEF,
    "hutchins1995": droplet.HUTCHINS_1995_COEF,
}
_BY_FREE_PATH = {
    "hinds1999": droplet.HINDS_1999_COEF,
    "icrp66": droplet.ICRP_66_SLIP_COEF,
}
SLIP_LAWS: tuple[str, ...] = (*_BY_KNUDSEN, *_BY_FREE_PATH)
DEFAULT_SLIP = "allen_raabe1985_solid"


def slip_correction(
    diameter_um: Values,
    free_path_um: Values,
    law: str = DEFAULT_SLIP,
) -> np.ndarray:
    """How much faster a small droplet moves than Stokes' law says (1 or more).

    Source   one of SLIP_LAWS; ALLEN_RAABE_1985 unless said otherwise. Inside the lung
             model only ICRP_66, whose fits were made with it.
    Raises   ValueError for a law nobody has written down.
    Checked  engine/evidence/published/physics_values.csv
    """
    d = np.asarray(diameter_um)
    if law in _BY_KNUDSEN:
        a, b, c = coefficients(_BY_KNUDSEN[law])
        knudsen = 2 * free_path_um / d
        return 1 + knudsen * (a + b * np.exp(-c / knudsen))
    if law in _BY_FREE_PATH:
        a, b, c = coefficients(_BY_FREE_PATH[law])
        ratio = d / free_path_um
        return 1 + (a + b * np.exp(-c * ratio)) / ratio
    raise ValueError(f"slip law must be one of {', '.join(SLIP_LAWS)}; got {law}")


def relaxation_time_s(
    diameter_um: Values,
    slip: Values,
    viscosity_pa_s: Values,
    density_kg_per_m3: Values = float(droplet.WATER_KG_PER_M3),
) -> np.ndarray:
    """Time a droplet takes to follow a change of the gas (Stokes drag)."""
    d_m = np.asarray(diameter_um) * M_PER_UM
    return density_kg_per_m3 * d_m**2 * slip / (18 * viscosity_pa_s)


def settling_velocity_m_per_s(
    diameter_um: Values,
    slip: Values,
    viscosity_pa_s: Values,
    density_kg_per_m3: Values = float(droplet.WATER_KG_PER_M3),
) -> np.ndarray:
    """Speed at which a droplet falls in still gas.

    Holds    below some 50 um, where Stokes drag is enough.
    Checked  engine/evidence/published/physics_values.csv
    """
    tau_s = relaxation_time_s(diameter_um, slip, viscosity_pa_s, density_kg_per_m3)
    return tau_s * float(droplet.GRAVITY_M_PER_S2)


def stopping_distance_m(relaxation_s: Values, velocity_m_per_s: Values) -> np.ndarray:
    """How far a droplet flies on when the gas around it stops."""
    return np.asarray(relaxation_s * velocity_m_per_s)


def stokes_number(
    relaxation_s: Values, velocity_m_per_s: Values, diameter_m: Values
) -> np.ndarray:
    """Relaxation time x velocity / tube diameter.

    Some authors (PUI_1987 in turbulent flow) use the tube's radius: twice this.
    """
    return stopping_distance_m(relaxation_s, velocity_m_per_s) / diameter_m


def diffusion_coefficient_m2_per_s(
    diameter_um: Values,
    slip: Values,
    viscosity_pa_s: Values,
    temperature_k: Values,
) -> np.ndarray:
    """How fast a droplet spreads by Brownian motion (Stokes and Einstein)."""
    thermal_j = float(droplet.BOLTZMANN_J_PER_K) * np.asarray(temperature_k)
    drag = 3 * np.pi * viscosity_pa_s * np.asarray(diameter_um) * M_PER_UM
    return thermal_j * slip / drag


def aerodynamic_diameter_um(
    diameter_um: Values,
    density_g_per_cm3: Values,
    shape_factor: Values,
    free_path_um: Values,
    law: str = DEFAULT_SLIP,
) -> np.ndarray:
    """Diameter of the water sphere that falls as fast as this particle.

    Shape    the dynamic shape factor, 1 for droplets.
    Checked  engine/evidence/published/physics_values.csv
    """
    d = np.asarray(diameter_um, float)
    ratio = np.asarray(density_g_per_cm3) / np.asarray(shape_factor)
    wanted = d**2 * slip_correction(d, free_path_um, law) * ratio
    return _diameter_falling_like(wanted, free_path_um, law)


def particle_diameter_um(
    aerodynamic_um: Values,
    density_g_per_cm3: Values,
    shape_factor: Values,
    free_path_um: Values,
    law: str = DEFAULT_SLIP,
) -> np.ndarray:
    """The other way round: the particle behind an aerodynamic diameter."""
    d = np.asarray(aerodynamic_um, float)
    ratio = np.asarray(shape_factor) / np.asarray(density_g_per_cm3)
    wanted = d**2 * slip_correction(d, free_path_um, law) * ratio
    return _diameter_falling_like(wanted, free_path_um, law)


def _diameter_falling_like(
    wanted: np.ndarray, free_path_um: Values, law: str
) -> np.ndarray:
    """Solves d^2 slip(d) = wanted; the fixed point contracts at every size."""
    d = np.sqrt(wanted)
    for _ in range(60):
        d = np.sqrt(wanted / slip_correction(d, free_path_um, law))
    return d


# --- a lognormal aerosol ---------------------------------------------------------


@cache
def _hermite(n: int) -> tuple[np.ndarray, np.ndarray]:
    points, weights = np.polynomial.hermite_e.hermegauss(n)
    return points, weights / weights.sum()


def size_weights(n: int = int(droplet.SIZE_NODES_COUNT)) -> np.ndarray:
    """Share of the mass each of the n sizes stands for; adds to 1."""
    return _hermite(n)[1]


def size_nodes_um(
    mmad_um: Values, gsd: Values, n: int = int(droplet.SIZE_NODES_COUNT)
) -> np.ndarray:
    """The n sizes that stand for a lognormal aerosol (Gauss-Hermite in ln d).

    Shapes   k medians and spreads -> (k, n); single numbers -> (n,).
    """
    points = _hermite(n)[0]
    median = np.asarray(mmad_um, float)[..., None]
    return median * np.exp(np.log(np.asarray(gsd, float))[..., None] * points)


def lognormal_between_frac(
    mmad_um: Values, gsd: Values, from_um: Values, to_um: Values
) -> np.ndarray:
    """Share of a lognormal mass between two sizes; from 0 and to infinity allowed."""
    with np.errstate(divide="ignore"):
        low = np.log(np.asarray(from_um, float) / mmad_um) / np.log(gsd)
        high = np.log(np.asarray(to_um, float) / mmad_um) / np.log(gsd)
    return ndtr(high) - ndtr(low)


def count_median_um(mass_median_um: Values, gsd: Values) -> np.ndarray:
    """Median by count of an aerosol whose median by mass is given (Hatch-Choate)."""
    return np.asarray(mass_median_um) * np.exp(-3 * np.log(gsd) ** 2)


def sauter_mean_um(mass_median_um: Values, gsd: Values) -> np.ndarray:
    """Volume over surface mean of a lognormal aerosol (Hatch-Choate)."""
    return np.asarray(mass_median_um) * np.exp(-0.5 * np.log(gsd) ** 2)


def mean_power_um(mass_median_um: Values, gsd: Values, power: Values) -> np.ndarray:
    """Mean over the mass of diameter to a power (Hatch-Choate)."""
    p = np.asarray(power, float)
    return np.asarray(mass_median_um) ** p * np.exp(p**2 * np.log(gsd) ** 2 / 2)


# --- droplets in the gas of the airway -------------------------------------------


def gas_state(temperature_k: float) -> tuple[float, float]:
    """Viscosity in Pa s and mean free path in um of gas at this temperature."""
    return (
        float(air_viscosity_pa_s(temperature_k)),
        float(mean_free_path_um(temperature_k)),
    )


def droplet_relaxation_s(diameter_um: Values, temperature_k: float) -> np.ndarray:
    """Relaxation time of water droplets in gas of this temperature."""
    viscosity_pa_s, free_path_um = gas_state(temperature_k)
    slip = slip_correction(diameter_um, free_path_um)
    return relaxation_time_s(diameter_um, slip, viscosity_pa_s)
