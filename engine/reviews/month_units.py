"""One indicator of one month, unit by unit: intervals, a funnel where there are enough
units, raw and shrunken rates together, in order of name."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from engine.errors import UnknownId
from engine.evidence.review import FUNNEL_UNITS_COUNT
from engine.replay import Replay
from engine.reviews import month_rows as rows
from engine.reviews.figures import percent, percent_range
from engine.reviews.indicators import BY_ID, OF_TREATMENTS, Indicator
from engine.reviews.wording import counted, listed
from engine.stats.cells import hidden_cells
from engine.stats.funnel import dispersion, funnel_limits, shrunken
from engine.stats.rates import design_effect, wilson

FUNNEL_COVERS = (0.95, 0.998)


@dataclass(frozen=True, kw_only=True)
class Units:
    """``table`` has one row a unit, by name: unit_token, count, known, unknown,
    patients, value, low, high, shrunk, shrunk_low, shrunk_high, hidden, outside.

    ``funnel``  n, low_95, high_95, low_998, high_998; empty with fewer units than a
                funnel needs
    """

    indicator: Indicator
    sentence: str
    target: float
    table: pd.DataFrame
    funnel: pd.DataFrame
    notes: tuple[str, ...]


def units_of(replay: Replay, month: str, indicator_id: str) -> Units:
    """The units of a month on one indicator of treatments.

    Raises   UnknownId if the indicator is not counted by unit.
    """
    indicator = BY_ID.get(indicator_id)
    if indicator is None or indicator.kind != "treatments":
        raise UnknownId(f"no indicator {indicator_id} that is counted by unit")
    rows.make_cells(replay)
    return _units(replay, indicator, rows.unit_counts(replay, month))


def every_units(replay: Replay, month: str) -> dict[str, Units]:
    """The units of a month on every indicator of treatments, by its id."""
    rows.make_cells(replay)
    found = rows.unit_counts(replay, month)
    return {each.id: _units(replay, each, found) for each in OF_TREATMENTS}


def _units(replay: Replay, indicator: Indicator, found: pd.DataFrame) -> Units:
    own = found[found["indicator"] == indicator.id].reset_index(drop=True)
    table = _table(replay, own)
    shown = table[~table["hidden"] & (table["known"] > 0)]
    known = shown["known"].sum()
    target = float(shown["count"].sum() / known) if known else float("nan")
    table, funnel, notes = _with_funnel(table, target)
    return Units(
        indicator=indicator,
        sentence=_sentence(indicator, table, target),
        target=target,
        table=table,
        funnel=funnel,
        notes=notes,
    )


def _table(replay: Replay, own: pd.DataFrame) -> pd.DataFrame:
    cells = replay.policy.cells
    effect = design_effect(
        own["clusters"], own["known"], own["count"], own["n2"], own["x2"]
    )
    low, high = wilson(own["count"], own["known"], None, effect)
    small = (own["known"] < cells.treatments_count) | (
        own["patients"] < cells.patients_count
    )
    # The department's figure stands beside: one hidden unit would give itself away.
    hidden = hidden_cells(
        own["known"].to_numpy(float)[None, :], small.to_numpy(bool)[None, :]
    )[0]
    share = own["count"] / own["known"].where(own["known"] > 0)
    table = own[["unit_token", "count", "known", "unknown", "patients"]].assign(
        value=share, low=low, high=high, design_effect=effect, hidden=hidden
    )
    figures = ["count", "known", "unknown", "patients", "value", "low", "high"]
    table[figures] = table[figures].astype(float)
    table.loc[hidden, figures] = np.nan
    return table.sort_values("unit_token", ignore_index=True)


def _with_funnel(
    table: pd.DataFrame, target: float
) -> tuple[pd.DataFrame, pd.DataFrame, tuple[str, ...]]:
    shown = (~table["hidden"] & (table["known"] > 0)).to_numpy()
    blank = dict.fromkeys(("shrunk", "shrunk_low", "shrunk_high"), np.nan)
    table = table.assign(**blank, outside=False)
    notes = []
    if table["hidden"].any():
        few = counted(int(table["hidden"].sum()), "unit")
        notes.append(f"{few} not shown: too few treatments or patients.")
    needed = int(FUNNEL_UNITS_COUNT)
    if shown.sum() < needed or not 0 < target < 1:
        notes.append(f"A funnel needs {needed} units; intervals only.")
        return table, _lines(target, np.array([]), 1.0), tuple(notes)
    own = table[shown]
    whole = np.floor((own["known"] / own["design_effect"]).to_numpy(float))
    effective = np.maximum(whole, 1.0)
    seen = own["value"].to_numpy() * effective
    drawn = shrunken(seen, effective)
    table.loc[shown, "shrunk"] = drawn.rate
    table.loc[shown, "shrunk_low"] = drawn.low
    table.loc[shown, "shrunk_high"] = drawn.high
    spread = dispersion(seen, effective, target)
    widen = float(np.sqrt(spread.phi))
    low, high = _widened(target, effective, FUNNEL_COVERS[1], widen)
    value = own["value"].to_numpy()
    table.loc[shown, "outside"] = (value < low) | (value > high)
    if spread.excess:
        notes.append(f"Units differ beyond chance: lines widened {widen:.1f} times.")
    if drawn.all_alike:
        notes.append("The units fit one common rate: none stands apart.")
    return table, _lines(target, effective, widen), tuple(notes)


def _lines(target: float, effective: np.ndarray, widen: float) -> pd.DataFrame:
    """The funnel's lines from half the smallest unit to just past the largest."""
    if not len(effective):
        return pd.DataFrame(columns=["n", "low_95", "high_95", "low_998", "high_998"])
    ends = max(effective.min() / 2, 3.0), effective.max() * 1.2
    n = np.unique(np.round(np.geomspace(*ends, 60)))
    inner = _widened(target, n, FUNNEL_COVERS[0], widen)
    outer = _widened(target, n, FUNNEL_COVERS[1], widen)
    return pd.DataFrame(
        {
            "n": n,
            "low_95": inner[0],
            "high_95": inner[1],
            "low_998": outer[0],
            "high_998": outer[1],
        }
    )


def _widened(
    target: float, n: np.ndarray, cover: float, widen: float
) -> tuple[np.ndarray, np.ndarray]:
    """Both lines; the upper one mirrors the lower, so that either tail is as rare."""
    low, _ = funnel_limits(target, n, cover)
    mirrored, _ = funnel_limits(1 - target, n, cover)
    high = 1 - mirrored
    return (
        np.clip(target - widen * (target - low), 0, 1),
        np.clip(target + widen * (high - target), 0, 1),
    )


def _sentence(indicator: Indicator, table: pd.DataFrame, target: float) -> str:
    shown = table[~table["hidden"] & (table["known"] > 0)]
    if shown.empty:
        return f"{indicator.title}: no unit has enough treatments to show."
    outside = shown[shown["outside"].astype(bool)]
    if len(outside):
        names = listed([f"unit {name}" for name in outside["unit_token"]])
        return (
            f"{indicator.title}: {names} outside the expected range around"
            f" {percent(target)}. Ask first what differs in patients, supplies and"
            " charting."
        )
    parts = [
        f"{row['unit_token']} {percent(row['value'])}"
        f" ({percent_range(row['low'], row['high'])})"
        for row in shown.head(6).to_dict("records")
    ]
    return f"{indicator.title} by unit: {listed(parts)}."
