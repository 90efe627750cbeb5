"""Droplets lost in the artificial airway: the bend, the wall, the whole tube."""

from __future__ import annotations

import math
from typing import TypeAlias

import numpy as np

from engine.evidence import tube
from engine.physics.air import air_viscosity_pa_s, coefficients
from engine.physics.droplets import droplet_relaxation_s, stokes_number
from engine.units import ML_PER_L, S_PER_MIN

Values: TypeAlias = np.ndarray | float

M_PER_MM = 1e-3
M_PER_CM = 1e-2
M3_PER_ML = 1e-6


def bend_turbulent_frac(
    stokes: Values, angle_deg: Values = float(tube.BEND_DEG)
) -> np.ndarray:
    """Fraction lost in a bend in turbulent flow.

    Stokes   relaxation time x velocity / diameter; the source's own is twice this.
    Source   PUI_1987.
    Checked  engine/evidence/published/physics_values.csv
    """
    decades, per_deg = coefficients(tube.PUI_TURBULENT_COEF)
    per_stokes = 2 * decades * math.log(10) * (angle_deg / per_deg)
    return 1 - np.exp(-per_stokes * np.asarray(stokes))


def bend_brockmann_frac(
    stokes: Values, angle_deg: Values = float(tube.BEND_DEG)
) -> np.ndarray:
    """The same turbulent bend with natural exponent and radians; a check.

    Stokes   relaxation time x velocity / diameter.
    Source   PUI_1987, in the form that could be read.
    """
    (slope,) = coefficients(tube.BROCKMANN_COEF)
    return -np.expm1(-slope * np.asarray(stokes) * np.radians(angle_deg))


def bend_laminar_frac(
    stokes: Values, angle_deg: Values = float(tube.BEND_DEG)
) -> np.ndarray:
    """Fraction lost in a bend in laminar flow.

    Stokes   relaxation time x velocity / diameter.
    Source   PUI_1987, Reynolds number 1000.
    Checked  engine/evidence/published/physics_values.csv
    """
    scale, slope, base, per_deg = coefficients(tube.PUI_LAMINAR_COEF)
    x = np.maximum(np.asarray(stokes) / scale, 1e-30)
    steep = np.exp(np.minimum((slope * x + base) * np.log(x), 80.0))
    if np.ndim(angle_deg) == 0 and angle_deg == per_deg:
        return steep / (1 + steep)
    return 1 - (1 + steep) ** (-np.asarray(angle_deg) / per_deg)


def bend_crane_evans_frac(
    stokes: Values, angle_deg: Values = float(tube.BEND_DEG)
) -> np.ndarray:
    """An older laminar form, for comparison only.

    Source   CRANE_1977.
    """
    return np.clip(np.asarray(stokes) * np.radians(angle_deg), 0.0, 1.0)


def friction_velocity_m_per_s(velocity_m_per_s: Values, reynolds: Values) -> np.ndarray:
    """Velocity scale of the turbulence at a smooth wall (Blasius)."""
    scale, power = coefficients(tube.FRICTION_COEF)
    factor = scale * np.asarray(reynolds) ** -power
    return velocity_m_per_s * np.sqrt(factor / 8)


def wall_velocity_liu_agarwal(relaxation_plus: Values) -> np.ndarray:
    """Dimensionless velocity towards the wall; flat for large droplets.

    Source   LIU_AGARWAL_1974.
    Checked  engine/evidence/published/physics_values.csv
    """
    slope, plateau = coefficients(tube.LIU_AGARWAL_COEF)
    return np.minimum(slope * np.asarray(relaxation_plus) ** 2, plateau)


def wall_velocity_friedlander_johnstone(
    relaxation_plus: Values, velocity_ratio: Values
) -> np.ndarray:
    """The same by the older stopping-distance model; for comparison only.

    Velocity ratio   mean over friction velocity.
    Source   FRIEDLANDER_1957.
    """
    first, second, third, slope, top, bottom, near, far, start = coefficients(
        tube.FRIEDLANDER_COEF
    )
    reach = start * np.asarray(relaxation_plus, float)
    ratio = np.asarray(velocity_ratio, float)
    inner = ratio + first / reach**2 - second
    scaled = np.clip(reach, near, far) / near
    middle = ratio - third + slope * np.log(top / (scaled - bottom))
    return 1 / np.where(reach < near, inner, np.where(reach < far, middle, ratio))


def reynolds_number(
    flow_lpm: Values,
    tube_mm: Values,
    temperature_k: float = float(tube.TUBE_GAS_K),
    density_kg_per_m3: float = float(tube.TUBE_GAS_KG_PER_M3),
) -> np.ndarray:
    """Reynolds number of gas in the tube; turbulent well above 2000."""
    viscosity_pa_s = float(air_viscosity_pa_s(temperature_k))
    diameter_m = np.asarray(tube_mm) * M_PER_MM
    velocity = mean_velocity_m_per_s(flow_lpm, tube_mm)
    return velocity * diameter_m * (density_kg_per_m3 / viscosity_pa_s)


def mean_velocity_m_per_s(flow_lpm: Values, tube_mm: Values) -> np.ndarray:
    """Mean speed of the gas in the tube."""
    area_m2 = np.pi / 4 * (np.asarray(tube_mm) * M_PER_MM) ** 2
    return np.asarray(flow_lpm) * (ML_PER_L / S_PER_MIN * M3_PER_ML) / area_m2


def lost_frac(
    diameter_um: Values,
    flow_lpm: Values,
    tube_mm: Values,
    length_cm: Values = float(tube.ADULT_TUBE_CM),
    angle_deg: Values = float(tube.BEND_DEG),
    temperature_k: float = float(tube.TUBE_GAS_K),
    density_kg_per_m3: float = float(tube.TUBE_GAS_KG_PER_M3),
) -> np.ndarray:
    """Fraction of droplets of this size left on the tube wall.

    Shapes   arrays that broadcast; returns their common shape.
    Holds    steady flow; bend data cover Reynolds numbers 1000 and 6000 to 10 000,
             between them penetration is taken linear in ln Re.
    Source   PUI_1987, LIU_AGARWAL_1974; the blend is ours.
    Checked  engine/evidence/published/physics_values.csv
    """
    tau_s = droplet_relaxation_s(diameter_um, temperature_k)
    return 1 - passed_frac(
        tau_s,
        flow_lpm,
        tube_mm,
        length_cm,
        angle_deg,
        temperature_k,
        density_kg_per_m3,
    )


def passed_frac(
    relaxation_s: Values,
    flow_lpm: Values,
    tube_mm: Values,
    length_cm: Values,
    angle_deg: Values = float(tube.BEND_DEG),
    temperature_k: float = float(tube.TUBE_GAS_K),
    density_kg_per_m3: float = float(tube.TUBE_GAS_KG_PER_M3),
) -> np.ndarray:
    """Fraction that leaves the tube tip, by relaxation time; see ``lost_frac``."""
    diameter_m = np.asarray(tube_mm) * M_PER_MM
    velocity = mean_velocity_m_per_s(flow_lpm, tube_mm)
    reynolds = reynolds_number(flow_lpm, tube_mm, temperature_k, density_kg_per_m3)
    turbulent = turbulent_share(reynolds)
    stokes = stokes_number(relaxation_s, velocity, diameter_m)
    friction = friction_velocity_m_per_s(velocity, reynolds)
    kinematic = float(air_viscosity_pa_s(temperature_k)) / density_kg_per_m3
    to_wall = friction * wall_velocity_liu_agarwal(
        np.asarray(relaxation_s) * (friction**2 / kinematic)
    )
    wall = np.exp(
        -4 * np.asarray(length_cm) * M_PER_CM * to_wall / (diameter_m * velocity)
    )
    bent_turbulent = 1 - bend_turbulent_frac(stokes, angle_deg)
    bent_laminar = 1 - bend_laminar_frac(stokes, angle_deg)
    return bent_laminar + turbulent * (bent_turbulent * wall - bent_laminar)


def turbulent_share(reynolds: Values) -> np.ndarray:
    """0 in laminar flow, 1 in turbulent flow, linear in ln Re between."""
    low, high = float(tube.LAMINAR_BELOW_RE), float(tube.TURBULENT_ABOVE_RE)
    share = np.log(np.maximum(reynolds, low) / low) / math.log(high / low)
    return np.clip(share, 0.0, 1.0)
