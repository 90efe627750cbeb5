"""How many filters it takes when every change is made on time."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

_LOOK_AHEAD = 64  # treatments looked at together; doubled while no change is due


def filters_needed(started_h: ArrayLike, hours_allowed: ArrayLike) -> int:
    """Filters one ventilator needs for its treatments, in order of their start.

    A filter goes in with the first treatment that finds none, and is changed at the
    first treatment that would find it past the hours allowed for that treatment.
    Hours that are not known never call for a change.
    """
    at = np.asarray(started_h, float)
    allowed = np.nan_to_num(np.asarray(hours_allowed, float), nan=np.inf)
    due_after = at - allowed  # a filter fitted before this is past its hours
    count, place = 0, 0
    while place < len(at):
        count += 1
        place = _next_change(due_after, place, at[place])
    return count


def _next_change(due_after: np.ndarray, place: int, fitted: float) -> int:
    start, span = place + 1, _LOOK_AHEAD
    while start < len(due_after):
        block = due_after[start : start + span] > fitted
        if block.any():
            return start + int(block.argmax())
        start, span = start + span, 2 * span
    return len(due_after)
