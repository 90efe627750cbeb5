"""Where the nominal dose of each treatment went, and what other sites would give."""

from __future__ import annotations

import numpy as np

from engine.batch import Batch, size
from engine.columns import FRACTIONS
from engine.physics.bands import Band, bands_of, joined
from engine.physics.chunks import in_chunks
from engine.physics.constants import FITTED, Constants
from engine.physics.estimate import Estimate, airways_of, estimate
from engine.physics.setup import ASSUMPTIONS, REFUSALS, Setup, setup_of
from engine.physics.sites import alternatives
from engine.physics.tries import humidity_ratio, other_setups, with_other_humidity

__all__ = ["ASSUMPTIONS", "REFUSALS", "alternatives", "balance", "estimated"]

# Shown beside the places a dose can end: parts of the way, not of the sum.
PASSAGES = ("delivered", "swept_past_wye", "reached_sensor")


def balance(rows: Batch) -> dict[str, np.ndarray]:
    """Where the nominal dose of each treatment went, with a band for every place.

    Returns  n values each: ``<place>_frac`` with ``_low_frac`` and ``_high_frac`` for
             the places of FRACTIONS, which add to 1, and for three passages:
             ``delivered`` (leaves the tube tip), ``swept_past_wye`` and
             ``reached_sensor`` (passes the filter position);
             ``refusal`` a code into REFUSALS; ``assumed`` bits into ASSUMPTIONS.
    Missing  a treatment that is refused has NaN everywhere; what is only not logged
             is assumed or tried, and says so.
    """
    return in_chunks(_balance, rows)


def _balance(rows: Batch) -> dict[str, np.ndarray]:
    setup = setup_of(rows)
    n = size(rows)
    index = np.flatnonzero(setup.refusal == 0)
    out = {
        f"{name}{end}_frac": np.full(n, np.nan)
        for name in (*FRACTIONS, *PASSAGES)
        for end in ("", "_low", "_high")
    }
    if len(index):
        found, bands = estimated(setup.pick(index))
        for name, frac in (*found.places.items(), *passages(found).items()):
            low, high = bands[name]
            out[f"{name}_frac"][index] = frac
            out[f"{name}_low_frac"][index] = np.minimum(low, frac)
            out[f"{name}_high_frac"][index] = np.maximum(high, frac)
    out["refusal"] = setup.refusal
    out["assumed"] = setup.assumed
    return out


def estimated(
    setup: Setup, constants: Constants = FITTED
) -> tuple[Estimate, dict[str, Band]]:
    """The estimate and its bands for treatments that are not refused."""
    airways = airways_of(setup, constants)
    found = estimate(setup, constants, airways)
    bands = _with_humidity(setup, found, constants)
    for index, other, same_airways in other_setups(setup):
        past_wye = airways.pick(index) if same_airways else None
        theirs = _with_humidity(other, estimate(other, constants, past_wye), constants)
        for name, (low, high) in theirs.items():
            mine = bands[name]
            np.minimum.at(mine[0], index, low)
            np.maximum.at(mine[1], index, high)
    return found, bands


def _with_humidity(
    setup: Setup, found: Estimate, constants: Constants
) -> dict[str, Band]:
    bands = bands_of(setup, found)
    ratio = humidity_ratio(setup, constants)
    open_ = ratio != 1
    if np.any(open_):
        other = bands_of(setup, with_other_humidity(found, ratio))
        bands = {name: joined(bands[name], other[name], open_) for name in bands}
    return bands


def passages(found: Estimate) -> dict[str, np.ndarray]:
    return {
        "delivered": found.delivered,
        "swept_past_wye": found.swept,
        "reached_sensor": found.passed,
    }
