"""The lives of many filters at once: those with few readings together, others alone.

Most filters are changed before they hold readings enough for a trend. Of those nothing
is asked but the last reading, so all of them are read off in one pass.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import fields
from typing import Any

import numpy as np

from engine.evidence.filter import CHANGE_READINGS_COUNT
from engine.stats.filter_life import (
    NEAR_LIMIT,
    OVER_LIMIT,
    TOO_FEW_READINGS,
    FilterLife,
    life_of,
    note_of,
)
from engine.stats.forecast import ALREADY_THERE, TOO_FEW

# What of a life is one word or figure; its segments stay with the one filter asked for.
KEPT = tuple(f.name for f in fields(FilterLife) if "tuple" not in str(f.type))
Columns = dict[str, np.ndarray]


def lives_of(
    codes: np.ndarray,
    filters_count: int,
    hours: np.ndarray,
    resistance_cmh2o_per_lps: np.ndarray,
    limit: float,
    near_frac: float,
    min_readings: int,
    rising_p: float,
    change_p: float,
) -> Columns:
    """The kept columns of every filter's life, as ``life_of`` would give them.

    Shapes   ``codes`` from 0 to ``filters_count`` - 1, one a reading, -1 for a reading
             of no filter; hours and resistance as ``life_of`` takes them. The columns
             have ``filters_count`` entries; None where a life has none.
    Checked  tests/engine/stats/test_filter_lives.py against ``life_of`` one by one
    """
    order = np.lexsort((hours, codes))
    order = order[np.asarray(codes)[order] >= 0]
    code = np.asarray(codes)[order]
    x = np.asarray(hours, float)[order]
    y = np.asarray(resistance_cmh2o_per_lps, float)[order]
    ends = np.searchsorted(code, np.arange(filters_count + 1))
    usable = np.isfinite(x) & ~np.isnan(y) & (x >= 0)
    n = _per_filter(usable, ends)
    few = n < min(min_readings, int(CHANGE_READINGS_COUNT))
    made = _of_few(x, y, usable, ends, limit, near_frac)
    for i in np.flatnonzero(~few).tolist():
        own = slice(ends[i], ends[i + 1])
        life = life_of(
            x[own],
            y[own],
            limit,
            near_frac,
            min_readings,
            rising_p,
            change_p,
        )
        for name in KEPT:
            made[name][i] = getattr(life, name)
    return made


def _of_few(
    x: np.ndarray,
    y: np.ndarray,
    usable: np.ndarray,
    ends: np.ndarray,
    limit: float,
    near_frac: float,
) -> Columns:
    """Every life as if its readings were too few for anything but the last of them."""
    n = _per_filter(usable, ends)
    given = np.diff(ends)
    some = n > 0
    kept_y, kept_x = y[usable], x[usable]
    after = np.cumsum(n)
    last = np.where(some, after - 1, 0)
    made = {name: _nothing(len(n)) for name in KEPT}
    last_y = _where(some, kept_y, last)
    over = some & (last_y > limit)
    near = some & ~over & (last_y >= near_frac * limit)
    made["state"] = np.select(
        [over, near], _words(OVER_LIMIT, NEAR_LIMIT), _words(TOO_FEW_READINGS)[0]
    )
    made["readings_count"] = n.astype(object)
    made["left_out_count"] = (given - n).astype(object)
    made["over_range_count"] = _per_filter(usable & np.isinf(y), ends).astype(object)
    made["last_h"] = _known(some, _where(some, kept_x, last))
    made["last_cmh2o_per_lps"] = _known(some, last_y)
    refusals = _words(ALREADY_THERE, TOO_FEW)
    made["forecast_refusal"] = np.where(over, refusals[0], refusals[1])
    made["seed"] = np.zeros(len(n), int).astype(object)
    made["note"] = _notes(kept_y, after - n, n)
    return made


def _notes(y: np.ndarray, starts: np.ndarray, n: np.ndarray) -> np.ndarray:
    some = n > 0
    level = np.zeros(len(n), bool)
    if some.any():
        low = np.minimum.reduceat(y, starts[some])
        level[some] = low == np.maximum.reduceat(y, starts[some])
    told = np.array(
        [
            note_of(k, same)
            for k in range(int(CHANGE_READINGS_COUNT) + 1)
            for same in (False, True)
        ],
        dtype=object,
    )
    return told[2 * np.minimum(n, int(CHANGE_READINGS_COUNT)) + level]


def _per_filter(marked: np.ndarray, ends: np.ndarray) -> np.ndarray:
    return np.diff(np.concatenate([[0], np.cumsum(marked)])[ends])


def _where(some: np.ndarray, values: np.ndarray, at: np.ndarray) -> np.ndarray:
    picked = np.full(len(some), np.nan)
    picked[some] = values[at[some]]
    return picked


def _known(some: np.ndarray, values: np.ndarray) -> np.ndarray:
    told = values.astype(object)
    told[~some] = None
    return told


def _nothing(n: int) -> np.ndarray:
    return np.full(n, None, dtype=object)


def _words(*words: str) -> Sequence[Any]:
    return [np.array(word, dtype=object) for word in words]
