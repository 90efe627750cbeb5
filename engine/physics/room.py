"""Aerosol that reached the room: concentration, what a bystander inhales, clearance.

One well-mixed zone. Beside the ventilator the air holds several times more; the
figures here are no measure of what somebody standing there breathes.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from engine.evidence import room
from engine.physics.air import coefficients
from engine.units import MIN_PER_H, ML_PER_L, S_PER_H, UG_PER_MG

L_PER_M3 = ML_PER_L
NEAR_FIELD_CAUTION = (
    "The room is taken as mixed. Beside a ventilator without a filter about "
    f"{float(room.NEAR_FIELD_MG_PER_M3) * UG_PER_MG:.0f} µg/m³ was measured, several "
    "times what a mixed room gives: nothing here says what somebody there breathes."
)


def removal_per_h(
    air_changes_per_h: ArrayLike,
    settling_m_per_s: ArrayLike = 0.0,
    other_per_h: ArrayLike = 0.0,
    height_m: ArrayLike = room.CEILING_M.value,
) -> np.ndarray:
    """All ways out of the air together: ventilation, settling, anything else."""
    settling = np.asarray(settling_m_per_s) * S_PER_H / np.asarray(height_m)
    return np.asarray(air_changes_per_h) + settling + np.asarray(other_per_h)


def concentration_per_m3(
    emitted_per_min: ArrayLike,
    volume_m3: ArrayLike,
    removal: ArrayLike,
    emitting_min: ArrayLike,
    at_min: ArrayLike,
) -> np.ndarray:
    """Concentration in the air, in the unit emitted per cubic metre.

    Removal  per hour, from ``removal_per_h``; 0 lets the air fill up.
    At       minutes since the emission began, before or after it ended.
    Shapes   arrays that broadcast; returns their common shape.
    Checked  engine/evidence/published/physics_values.csv
    """
    k = np.asarray(removal, float) / MIN_PER_H
    lasted = np.minimum(at_min, emitting_min)
    since = np.maximum(np.asarray(at_min) - np.asarray(emitting_min), 0.0)
    filled = np.asarray(emitted_per_min) / np.asarray(volume_m3) * _risen(k, lasted)
    return filled * np.exp(-k * since)


def inhaled(
    emitted_per_min: ArrayLike,
    volume_m3: ArrayLike,
    removal: ArrayLike,
    emitting_min: ArrayLike,
    until_min: ArrayLike,
    breathed_lpm: ArrayLike = room.BYSTANDER_LPM.value,
) -> np.ndarray:
    """What a bystander breathes in from the start until ``until_min``.

    Checked  engine/evidence/published/physics_values.csv
    """
    k = np.asarray(removal, float) / MIN_PER_H
    lasted = np.minimum(until_min, emitting_min)
    since = np.maximum(np.asarray(until_min) - np.asarray(emitting_min), 0.0)
    per_m3 = np.asarray(emitted_per_min) / np.asarray(volume_m3)
    safe = np.where(k > 0, k, 1.0)
    during = np.where(
        k > 0, (lasted - _risen(k, lasted)) / safe, np.asarray(lasted, float) ** 2 / 2
    )
    after = _risen(k, lasted) * _risen(k, since)
    return np.asarray(breathed_lpm) / L_PER_M3 * per_m3 * (during + after)


def clearance_min(
    air_changes_per_h: ArrayLike,
    efficiency_frac: ArrayLike,
    mixing_factor: ArrayLike = 1.0,
) -> np.ndarray:
    """Minutes until this share of the aerosol is gone; the source has stopped.

    Mixing   1 where the air mixes perfectly; the table's caveat is up to 10.
    Source   CDC_2003 Appendix B.
    Checked  engine/evidence/published/physics_values.csv
    """
    decay = -np.log1p(-np.asarray(efficiency_frac, float))
    return MIN_PER_H * decay / np.asarray(air_changes_per_h) * mixing_factor


def clearance_range_min(
    air_changes_per_h: ArrayLike, efficiency_frac: ArrayLike
) -> tuple[np.ndarray, np.ndarray]:
    """The same for perfect and for very poor mixing: the real room lies between.

    Source   CDC_2003 Appendix B, note to the table.
    """
    perfect, poor = coefficients(room.MIXING_COEF)
    return (
        clearance_min(air_changes_per_h, efficiency_frac, perfect),
        clearance_min(air_changes_per_h, efficiency_frac, poor),
    )


def _risen(k_per_min: np.ndarray, time_min: ArrayLike) -> np.ndarray:
    """(1 - exp(-k t)) / k, and t where nothing is removed."""
    t = np.asarray(time_min, float)
    safe = np.where(k_per_min > 0, k_per_min, 1.0)
    return np.where(k_per_min > 0, -np.expm1(-safe * t) / safe, t)
