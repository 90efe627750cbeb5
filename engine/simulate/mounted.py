"""Expiratory filters: when fitted, how they loaded, what was read off them."""

from __future__ import annotations

import numpy as np
import pandas as pd

from engine.simulate import prevalence
from engine.simulate.draws import hidden, hours, stream, unsaid, words
from engine.simulate.places import (
    FOULED_BARE_DAYS,
    UNLOGGED_AT,
    UNLOGGED_LIFE_H,
    Places,
)

KINDS: prevalence.Shares = {"pleated": 0.4, "electrostatic": 0.5, "hmef": 0.1}
NEW_RESISTANCE, NEW_SPREAD = 2.26, 0.12  # cmH2O/(L/s): a published new filter
BEND = 0.5  # K2 of every filter here, cmH2O/(L/s)^2
CAUGHT: dict[str, float] = {"jet": 0.45, "vibrating_mesh": 0.45, "ultrasonic": 0.4}
HUMID_PER_H = 0.0015  # rise by water alone, cmH2O/(L/s) an hour
READING_NOISE = 0.05  # cmH2O
READ_EVERY_H = 8.0
VASODILATOR_LIFE_H = 120.0


def fitted(places: Places, due: pd.DataFrame, seed: int) -> pd.DataFrame:
    """One row a filter use, by ventilator and time; story lives marked."""
    rng = stream(seed, "filter uses")
    span_h = places.span_h
    rows = []
    for place, token in enumerate(places.ventilator):
        planned = _planned(token, place, places, due, span_h)
        last_h = span_h
        if token == places.fouled:
            last_h = span_h - FOULED_BARE_DAYS * 24.0
        at_h = float(rng.uniform(0, 12))
        while at_h < last_h:
            life, story = _life(rng, at_h, planned)
            rows.append((place, at_h, min(at_h + life, last_h), story))
            at_h += life + float(rng.exponential(0.3))
    table = pd.DataFrame(rows, columns=["place", "from_h", "to_h", "story"])
    n = len(table)
    table["filter_id"] = [f"F{k:06d}" for k in range(1, n + 1)]
    table["ventilator_token"] = places.ventilator[table["place"]]
    table["filter_kind"] = words(rng, KINDS, n)
    new = rng.normal(NEW_RESISTANCE, NEW_SPREAD, n)
    table["new_so"] = new
    table["new_resistance_cmh2o_per_lps"] = hidden(rng, new.round(2), 0.4)
    begin = places.begin.to_datetime64()
    table["installed_at"] = begin + hours(table["from_h"])
    still = (table["to_h"] >= span_h - 1e-9).to_numpy()
    removed = begin + hours(table["to_h"])
    table["removed_at"] = np.where(still, np.datetime64("NaT"), removed)
    reason = np.array(["scheduled", "scheduled", "resistance", "soiled"], object)
    table["removal_reason"] = unsaid(still, rng.choice(reason, n))
    changed = (table["from_h"] + table["to_h"]) / 2 + 3.0
    table["changed_h"] = np.where(table["story"] == "unlogged", changed, np.nan)
    return table


def _planned(
    token: str, place: int, places: Places, due: pd.DataFrame, span_h: float
) -> tuple[float, str] | None:
    if token in places.unlogged:
        return span_h * UNLOGGED_AT[places.unlogged.index(token)], "unlogged"
    if token != places.vasodilator:
        return None
    here = due[(due["place"] == place) & (due["drug"] == "epoprostenol")]
    if here.empty:
        return None
    begin = (here["started_at"].min() - places.begin) / pd.Timedelta(hours=1)
    return float(begin), "runaway"


def _life(
    rng: np.random.Generator, at_h: float, planned: tuple[float, str] | None
) -> tuple[float, str]:
    usual = prevalence.REMOVED_BY_POLICY_H * rng.geometric(1 - prevalence.LAPSE)
    usual = float(np.clip(usual + rng.normal(0, 1.5), 8, 168))
    if planned is None or not at_h <= planned[0] < at_h + usual:
        return usual, ""
    story = planned[1]
    return (UNLOGGED_LIFE_H if story == "unlogged" else VASODILATOR_LIFE_H), story


def on_filter(treated: pd.DataFrame, uses: pd.DataFrame) -> np.ndarray:
    """Row of ``uses`` each treatment's exhaled gas passed through; -1 for none."""
    at = treated["started_at"].to_numpy()
    key = _key(uses["place"].to_numpy(), uses["installed_at"].to_numpy())
    order = np.argsort(key, kind="stable")
    asked = _key(treated["place"].to_numpy(), at)
    row = order[np.maximum(np.searchsorted(key[order], asked, "right") - 1, 0)]
    same = uses["place"].to_numpy()[row] == treated["place"].to_numpy()
    removed = uses["removed_at"].to_numpy()[row]
    inside = (uses["installed_at"].to_numpy()[row] <= at) & (
        np.isnat(removed) | (removed > at)
    )
    return np.where(same & inside & treated["filter_so"].to_numpy(), row, -1)


def readings(
    treated: pd.DataFrame, uses: pd.DataFrame, places: Places, seed: int
) -> pd.DataFrame:
    """What was read off the filters: pressure drop, flow, when; some not written."""
    rng = stream(seed, "readings")
    life_h = (uses["to_h"] - uses["from_h"]).to_numpy()
    count = np.maximum(np.floor((life_h - 1.0) / READ_EVERY_H).astype(int) + 1, 0)
    use = np.repeat(np.arange(len(uses)), count)
    nth = np.arange(len(use)) - np.repeat(np.cumsum(count) - count, count)
    since_h = 1.0 + nth * READ_EVERY_H + rng.uniform(-0.4, 0.4, len(use))
    story = (uses["story"] != "").to_numpy()[use]
    kept = story | (rng.random(len(use)) > prevalence.MISSING_READING)
    use, since_h, story = use[kept], since_h[kept], story[kept]
    resistance = _resistance(treated, uses, use, since_h)
    n = len(use)
    flow = np.where(rng.random(n) < 0.8, 60.0, 30.0)
    flow = np.where(story, 60.0, flow) + rng.choice([-2.0, 0.0, 0.0, 2.0], n)
    speed = flow / 60.0
    k1 = resistance - BEND
    drop = (k1 + BEND * speed) * speed + rng.normal(0, READING_NOISE, n)
    flowless = ~story & (rng.random(n) < 0.06)
    at = uses["installed_at"].to_numpy()[use] + hours(since_h)
    named = rng.random(n) < 0.9
    table = pd.DataFrame(
        {
            "filter_id": unsaid(~named, uses["filter_id"].to_numpy()[use]),
            "ventilator_token": uses["ventilator_token"].to_numpy()[use],
            "read_at": at,
            "flow_lpm": np.where(flowless, np.nan, flow),
            "pressure_drop_cmh2o": np.maximum(drop, 0.05).round(2),
            "reading_source": rng.choice(
                np.array(["ventilator", "manometer", "bench"], object), n
            ),
        }
    ).sort_values(["read_at", "ventilator_token"], ignore_index=True)
    table.insert(0, "reading_id", [f"R{k:06d}" for k in range(1, n + 1)])
    return table


def _resistance(
    treated: pd.DataFrame, uses: pd.DataFrame, use: np.ndarray, since_h: np.ndarray
) -> np.ndarray:
    """Resistance at 60 L/min: new, and what treatments and water have added."""
    loads = {d.name: d.loads_filter_cmh2o_per_lps_per_ml for d in prevalence.DRUGS}
    per_ml = treated["drug"].map(loads).to_numpy(float)
    caught = treated["generator"].map(CAUGHT).fillna(0.1).to_numpy(float)
    volume = treated["fill_volume_ml"].fillna(3.0).to_numpy(float)
    volume = np.where(treated["generator"] == "pmdi_spacer", 0.0, volume)
    added = per_ml * caught * volume
    on = on_filter(treated, uses)
    held = on >= 0
    key = _key(on[held], treated["started_at"].to_numpy()[held])
    order = np.argsort(key, kind="stable")
    key, total = key[order], np.cumsum(added[held][order])
    total = np.concatenate([[0.0], total])
    begin = uses["installed_at"].to_numpy()[use]

    def upto(moment: np.ndarray) -> np.ndarray:
        return total[np.searchsorted(key, _key(use, moment), "right")]

    changed_h = (uses["changed_h"] - uses["from_h"]).to_numpy()[use]
    anew = since_h > changed_h
    start_h = np.where(anew, changed_h, 0.0)
    load = upto(begin + hours(since_h)) - upto(begin + hours(start_h))
    water = HUMID_PER_H * (since_h - start_h)
    return uses["new_so"].to_numpy()[use] + load + water


def _key(owner: np.ndarray, moment: np.ndarray) -> np.ndarray:
    """One sortable number for an owner and a moment."""
    seconds = moment.astype("datetime64[s]").astype(np.int64)
    return owner.astype(np.int64) * 10**11 + seconds
