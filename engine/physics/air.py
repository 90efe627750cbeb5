"""The gas droplets move in: viscosity, mean free path, water vapour, density."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from engine.evidence import droplet
from engine.evidence.shape import Number
from engine.units import KELVIN_AT_0_C

STANDARD_PA = float(droplet.STANDARD_PA)


def coefficients(number: Number) -> tuple[float, ...]:
    """The figures of one equation, in the order its source gives them."""
    assert isinstance(number.value, tuple)
    return number.value


def air_viscosity_pa_s(temperature_k: ArrayLike) -> np.ndarray:
    """Dynamic viscosity of dry air.

    Shapes   any; returns the same.
    Holds    ordinary pressure; moist air at 37 C is some 2 % less, not followed.
    Source   KIM_2005 (Sutherland form used by ISO 15900).
    Checked  engine/evidence/published/physics_values.csv
    """
    reference, _, at_k, _, sutherland_k = coefficients(droplet.AIR_REFERENCE_COEF)
    return (
        reference
        * np.sqrt(_ratio(temperature_k, at_k))
        * _sutherland(temperature_k, at_k, sutherland_k)
    )


def mean_free_path_um(
    temperature_k: ArrayLike, pressure_pa: ArrayLike = STANDARD_PA
) -> np.ndarray:
    """Mean free path of air molecules.

    Shapes   arrays that broadcast; returns their common shape.
    Source   KIM_2005 (Sutherland form used by ISO 15900).
    Checked  engine/evidence/published/physics_values.csv
    """
    _, reference_um, at_k, at_pa, sutherland_k = coefficients(
        droplet.AIR_REFERENCE_COEF
    )
    return (
        reference_um
        * (at_pa / np.asarray(pressure_pa, float))
        * _ratio(temperature_k, at_k)
        * _sutherland(temperature_k, at_k, sutherland_k)
    )


def saturation_pressure_pa(temperature_k: ArrayLike) -> np.ndarray:
    """Vapour pressure of water over a flat surface.

    Holds    0 to 50 C.
    Source   ALDUCHOV_1996 (Magnus form).
    """
    scale_pa, slope, offset_c = coefficients(droplet.SATURATION_COEF)
    celsius = np.asarray(temperature_k, float) - KELVIN_AT_0_C
    return scale_pa * np.exp(slope * celsius / (celsius + offset_c))


def saturation_vapour_mg_per_l(temperature_k: ArrayLike) -> np.ndarray:
    """Water held by saturated gas.

    Source   ALDUCHOV_1996 and the ideal gas law.
    Checked  engine/evidence/published/physics_values.csv
    """
    mol_per_m3 = saturation_pressure_pa(temperature_k) / (
        float(droplet.GAS_CONSTANT_J_PER_MOL_K) * np.asarray(temperature_k, float)
    )
    grams_per_kg = 1000.0
    return mol_per_m3 * float(droplet.WATER_KG_PER_MOL) * grams_per_kg


def humid_air_density_kg_per_m3(
    temperature_k: ArrayLike,
    relative_humidity_frac: ArrayLike,
    pressure_pa: ArrayLike = STANDARD_PA,
) -> np.ndarray:
    """Density of moist air, both gases taken as ideal.

    Shapes   arrays that broadcast; returns their common shape.
    Checked  engine/evidence/published/physics_values.csv
    """
    vapour_pa = np.asarray(relative_humidity_frac) * saturation_pressure_pa(
        temperature_k
    )
    dry = (np.asarray(pressure_pa) - vapour_pa) * float(droplet.DRY_AIR_KG_PER_MOL)
    wet = vapour_pa * float(droplet.WATER_KG_PER_MOL)
    gas = float(droplet.GAS_CONSTANT_J_PER_MOL_K) * np.asarray(temperature_k, float)
    return (dry + wet) / gas


def _ratio(temperature_k: ArrayLike, at_k: float) -> np.ndarray:
    return np.asarray(temperature_k, float) / at_k


def _sutherland(
    temperature_k: ArrayLike, at_k: float, sutherland_k: float
) -> np.ndarray:
    return (1 + sutherland_k / at_k) / (1 + sutherland_k / np.asarray(temperature_k))
