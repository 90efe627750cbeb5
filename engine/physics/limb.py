"""Droplets settling in the tubing: moving gas, parked gas, and the rate of it."""

from __future__ import annotations

from typing import TypeAlias

import numpy as np

Values: TypeAlias = np.ndarray | float


def settled_laminar_frac(
    settling_m_per_s: Values,
    length_m: Values,
    velocity_m_per_s: Values,
    diameter_m: Values,
    slope_deg: Values = 0.0,
) -> np.ndarray:
    """Fraction settling out of laminar flow through a round tube; exact.

    Slope    0 for a horizontal tube.
    Source   THOMAS_1958, PICH_1972; inclined tubes HEYDER_1977.
    Checked  engine/evidence/published/physics_values.csv
    """
    k = (
        0.75
        * np.asarray(settling_m_per_s)
        * np.asarray(length_m)
        * np.cos(np.radians(slope_deg))
        / (np.asarray(velocity_m_per_s) * np.asarray(diameter_m))
    )
    k = np.clip(k, 0.0, 1.0)
    third = np.cbrt(k)
    root = np.sqrt(np.maximum(1 - third**2, 0.0))
    return 2 / np.pi * (2 * k * root - third * root + np.arcsin(third))


def settled_mixed_frac(
    settling_m_per_s: Values,
    length_m: Values,
    velocity_m_per_s: Values,
    diameter_m: Values,
    slope_deg: Values = 0.0,
) -> np.ndarray:
    """Fraction settling where the flow keeps the gas mixed across the tube.

    Source   SCHWENDIMAN_1975.
    Checked  engine/evidence/published/physics_values.csv
    """
    time_s = np.asarray(length_m) / np.asarray(velocity_m_per_s)
    across = np.cos(np.radians(slope_deg))
    return -np.expm1(
        -settling_rate_per_s(settling_m_per_s, diameter_m) * time_s * across
    )


def settled_still_frac(
    settling_m_per_s: Values, time_s: Values, diameter_m: Values
) -> np.ndarray:
    """Fraction settling out of gas that stands still in a horizontal tube.

    Source   the overlap of two discs; elementary.
    Checked  engine/evidence/published/physics_values.csv
    """
    fallen = np.asarray(settling_m_per_s) * np.asarray(time_s)
    x = np.clip(fallen / np.asarray(diameter_m), 0.0, 1.0)
    return 1 - 2 / np.pi * (np.arccos(x) - x * np.sqrt(1 - x**2))


def settling_rate_per_s(settling_m_per_s: Values, diameter_m: Values) -> np.ndarray:
    """Share of the airborne droplets lost each second in a mixed round tube."""
    return np.asarray(settling_m_per_s) * (4 / np.pi / diameter_m)
