"""Who was ventilated where, what was ordered, and when each treatment fell due."""

from __future__ import annotations

import numpy as np
import pandas as pd

from engine.simulate import prevalence
from engine.simulate.draws import hours, stream
from engine.simulate.places import Places

MEAN_STAY_H, MEAN_GAP_H, LONGEST_STAY_H = 130.0, 40.0, 400.0
FIRST_MONTH = 1.3
ORDER_DELAY_H, JITTER_H = 6.0, 0.35


def stays(places: Places, seed: int) -> pd.DataFrame:
    """One row a patient: ventilator, from, to; one patient at a time on each."""
    rng = stream(seed, "stays")
    span_h = places.span_h
    most = int(span_h / (MEAN_STAY_H + MEAN_GAP_H) * 2) + 6
    count = len(places.ventilator)
    stay = np.clip(rng.gamma(1.6, MEAN_STAY_H / 1.6, (count, most)), 12, LONGEST_STAY_H)
    gap = rng.exponential(MEAN_GAP_H, (count, most))
    begin = np.cumsum(stay + gap, axis=1) - stay - rng.uniform(0, 150, (count, 1))
    where = np.broadcast_to(np.arange(count)[:, None], begin.shape)
    keep = (begin < span_h) & (begin + stay > 0)
    table = pd.DataFrame(
        {
            "place": where[keep],
            "from_h": np.clip(begin[keep], 0, None),
            "to_h": np.clip((begin + stay)[keep], None, span_h),
        }
    ).sort_values(["from_h", "place"], ignore_index=True)
    table["patient_token"] = [f"P{n:05d}" for n in rng.permutation(len(table)) + 10000]
    return table


def due(
    places: Places, patients: pd.DataFrame, seed: int, treatments: int
) -> pd.DataFrame:
    """One row a treatment that fell due: patient, drug and when it began."""
    rng = stream(seed, "orders")
    drugs = prevalence.DRUGS
    share = np.array([drug.share for drug in drugs])
    every = np.array([drug.every_h for drug in drugs])
    orders = patients.loc[np.repeat(patients.index, 2)].reset_index(drop=True)
    orders["drug"] = rng.choice(len(drugs), len(orders), p=share / share.sum())
    continuous = next(n for n, d in enumerate(drugs) if d.name == "epoprostenol")
    orders["drug"] = _story_drugs(places, orders, continuous)
    orders["from_h"] += rng.uniform(0, ORDER_DELAY_H, len(orders))
    length = np.clip(orders["to_h"] - orders["from_h"], 0, None)
    step = every[orders["drug"]]
    count = np.floor(length / step).astype(int)
    first = np.arange(len(orders)) % 2 == 0
    always = first & _in_story(places, orders)
    always |= orders["drug"].to_numpy() == continuous
    ordered = always | _evenly(rng, places, orders, count, always, treatments)
    orders, count, step = orders[ordered], count[ordered], step[ordered]
    each = np.repeat(np.arange(len(orders)), count)
    nth = np.arange(len(each)) - np.repeat(np.cumsum(count) - count, count)
    begun = orders["from_h"].to_numpy()[each] + nth * step[each]
    begun = begun + rng.normal(0, JITTER_H, len(each))
    table = pd.DataFrame(
        {
            "place": orders["place"].to_numpy()[each],
            "patient_token": orders["patient_token"].to_numpy()[each],
            "drug": orders["drug"].to_numpy()[each],
            "started_at": places.begin.to_datetime64() + hours(begun),
        }
    )
    inside = (table["started_at"] >= places.begin) & (table["started_at"] < places.end)
    return table[inside].sort_values(["started_at", "place"], ignore_index=True)


def _evenly(
    rng: np.random.Generator,
    places: Places,
    orders: pd.DataFrame,
    count: np.ndarray,
    always: np.ndarray,
    treatments: int,
) -> np.ndarray:
    """Orders drawn at random until each thirty days hold their share."""
    parts = max(round(places.span_h / 720.0), 1)
    share = orders["from_h"].to_numpy() / places.span_h
    part = np.clip((share * parts).astype(int), 0, parts - 1)
    quota = treatments / parts - np.bincount(part[always], count[always], parts)
    quota[0] *= FIRST_MONTH  # nobody's orders run on from before the log
    order = np.lexsort((rng.random(len(orders)), part))
    order = order[~always[order]]
    begun = pd.Series(count[order]).groupby(part[order]).cumsum().to_numpy()
    drawn = np.zeros(len(orders), dtype=bool)
    drawn[order] = begun - count[order] / 2 <= quota[part[order]]
    return drawn


def _in_story(places: Places, orders: pd.DataFrame) -> np.ndarray:
    """Stays that must have treatments for the story to be told."""
    token = places.ventilator[orders["place"]].astype(str)
    inside = np.zeros(len(orders), dtype=bool)
    for name, (from_h, to_h) in places.story_h.items():
        overlaps = (orders["from_h"] < to_h) & (orders["to_h"] > from_h)
        inside |= (token == name) & overlaps.to_numpy()
    return inside


def _story_drugs(places: Places, orders: pd.DataFrame, continuous: int) -> np.ndarray:
    """Continuous prostacyclin for one long stay, and often nowhere else."""
    drug = orders["drug"].to_numpy().copy()
    here = places.ventilator[orders["place"]] == places.vasodilator
    length = np.where(here, orders["to_h"] - orders["from_h"], 0.0)
    drug[length == length.max()] = continuous
    return drug
