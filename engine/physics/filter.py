"""What passes a filter position, and where it goes then."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from engine.columns import words_of
from engine.evidence import filter_capture
from engine.evidence.shape import Number
from engine.physics.air import coefficients

_BY_KIND: dict[str, Number] = {
    "pleated": filter_capture.PLEATED_PENETRATION_FRAC,
    "electrostatic": filter_capture.ELECTROSTATIC_PENETRATION_FRAC,
    "hmef": filter_capture.HMEF_PENETRATION_FRAC,
}
FILTER_KINDS = words_of("filter_kind")[:-1]


def penetration_frac(
    kind: np.ndarray, flow_lpm: ArrayLike
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Share of the droplets a filter lets through: point, low, high.

    Kind     codes of ``filter_kind``; -1 unknown gives the figure of any filter.
    Flow     through the filter while the patient breathes out, mean.
    Holds    for particles of the most penetrating size, so high-sided for droplets;
             wetting, which raises it, is not followed.
    Source   WILKES_2002 by kind, WILKES_2004 for flow, ARI_2016 for any filter.
    """
    at_lpm, power = coefficients(filter_capture.PENETRATION_FLOW_COEF)
    rise = (np.maximum(flow_lpm, at_lpm) / at_lpm) ** power
    numbers = [*(_BY_KIND[word] for word in FILTER_KINDS)]
    numbers.append(filter_capture.ANY_FILTER_PENETRATION_FRAC)
    table = np.array([[float(n), n.low or 0.0, n.high or 1.0] for n in numbers])
    point, low, high = table[kind].T
    return np.minimum(point * rise, 1.0), low, np.minimum(high * rise, 1.0)


def hme_capture_frac(is_filter_hme: np.ndarray) -> np.ndarray:
    """Share of the aerosol passing an HME that stays in it."""
    return np.where(
        is_filter_hme,
        float(filter_capture.HMEF_CAPTURE_FRAC),
        float(filter_capture.HME_CAPTURE_FRAC),
    )
