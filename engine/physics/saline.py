"""Salt droplets between dry gas and the airway: how far they shrink or grow.

An explanation, not a step of the balance: bench factors for humid circuits already
hold it, and the two are never multiplied.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike

from engine.evidence import droplet
from engine.physics.air import coefficients, saturation_vapour_mg_per_l

_HALVINGS = 60


def osmotic_coefficient(molality_mol_per_kg: ArrayLike) -> np.ndarray:
    """How far sodium chloride in water is from an ideal solution.

    Holds    25 C, up to 6 mol/kg.
    Source   PITZER_1973.
    Checked  engine/evidence/published/physics_values.csv
    """
    debye, b, beta_0, beta_1, alpha, c = coefficients(droplet.PITZER_NACL_COEF)
    m = np.asarray(molality_mol_per_kg, float)
    root = np.sqrt(m)
    short = m * (beta_0 + beta_1 * np.exp(-alpha * root)) + m**2 * c
    return 1 - debye * root / (1 + b * root) + short


def water_activity(mass_fraction: ArrayLike) -> np.ndarray:
    """Relative humidity a salt solution is in balance with.

    Mass fraction   salt in solution.
    Checked         engine/evidence/published/physics_values.csv
    """
    return _activity(molality_mol_per_kg(mass_fraction))


def molality_mol_per_kg(mass_fraction: ArrayLike) -> np.ndarray:
    """Salt per kg of water."""
    w = np.asarray(mass_fraction, float)
    return w / (1 - w) / float(droplet.NACL_KG_PER_MOL)


def mass_fraction_at(relative_humidity_frac: ArrayLike) -> np.ndarray:
    """Salt in a solution that is in balance with gas of this humidity.

    Drier gas than brine is in balance with leaves brine: the droplet is followed no
    further.
    """
    wanted = np.asarray(relative_humidity_frac, float)
    molal = _halved(
        lambda m: _activity(m) < wanted,
        np.zeros_like(wanted),
        np.full_like(wanted, float(droplet.BRINE_MOL_PER_KG)),
    )
    salt = molal * float(droplet.NACL_KG_PER_MOL)
    return salt / (1 + salt)


def diameter_ratio(
    mass_fraction: ArrayLike, relative_humidity_frac: ArrayLike
) -> np.ndarray:
    """Diameter in gas of this humidity over diameter as emitted.

    Mass fraction   salt in the solution nebulised.
    Holds           no Kelvin term: above some 0.2 um.
    Checked         engine/evidence/published/physics_values.csv
    """
    return _shrunk(mass_fraction, mass_fraction_at(relative_humidity_frac))


def airway_diameter_ratio(mass_fraction: ArrayLike) -> np.ndarray:
    """Diameter once the droplet has become isotonic in the airway, over as emitted."""
    return _shrunk(mass_fraction, float(droplet.ISOTONIC_NACL_FRAC))


def dry_growth_factor(relative_humidity_frac: ArrayLike) -> np.ndarray:
    """Diameter of the droplet a dry salt grain becomes, over the grain's.

    Checked  engine/evidence/published/physics_values.csv
    """
    w = mass_fraction_at(relative_humidity_frac)
    return np.cbrt(float(droplet.NACL_KG_PER_M3) / (w * solution_density_kg_per_m3(w)))


def solution_density_kg_per_m3(mass_fraction: ArrayLike) -> np.ndarray:
    """Density of salt water, volumes taken to add."""
    w = np.asarray(mass_fraction, float)
    salt = w / float(droplet.NACL_KG_PER_M3)
    return 1 / (salt + (1 - w) / float(droplet.WATER_KG_PER_M3))


def evaporated(
    liquid_mg_per_l: ArrayLike,
    temperature_k: ArrayLike,
    relative_humidity_frac: ArrayLike,
    mass_fraction: ArrayLike,
) -> tuple[np.ndarray, np.ndarray]:
    """Droplets and gas brought together: diameter ratio, and humidity in the end.

    Liquid   as emitted into each litre of gas.
    Holds    one temperature throughout: a bound, real circuits warm and cool.
    Checked  engine/evidence/published/physics_values.csv
    """
    liquid = np.asarray(liquid_mg_per_l, float)
    salt = liquid * mass_fraction
    full = saturation_vapour_mg_per_l(temperature_k)
    start = np.asarray(relative_humidity_frac, float)

    def takes_more(humidity: np.ndarray) -> np.ndarray:
        left = salt / mass_fraction_at(humidity)
        return full * (humidity - start) < liquid - left

    humidity = _halved(
        lambda h: ~takes_more(h), start + 0.0 * liquid, np.ones_like(liquid + start)
    )
    return diameter_ratio(mass_fraction, humidity), humidity


def _activity(molal: np.ndarray) -> np.ndarray:
    water = float(droplet.WATER_KG_PER_MOL)
    return np.exp(-2 * molal * osmotic_coefficient(molal) * water)


def _shrunk(before: ArrayLike, after: ArrayLike) -> np.ndarray:
    b, a = np.asarray(before, float), np.asarray(after, float)
    dense = solution_density_kg_per_m3(b) / solution_density_kg_per_m3(a)
    return np.cbrt(b / a * dense)


def _halved(
    is_past: Callable[[np.ndarray], np.ndarray], low: np.ndarray, high: np.ndarray
) -> np.ndarray:
    """The point where the answer turns from no to yes, by halving the interval."""
    for _ in range(_HALVINGS):
        middle = (low + high) / 2
        past = is_past(middle)
        low, high = np.where(past, low, middle), np.where(past, middle, high)
    return (low + high) / 2
