"""What the policy allows each treatment, worked out from its limits and the setup."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from engine.batch import Batch, is_missing, is_word, size
from engine.columns import words_of
from engine.evidence.practice import JET_RESIDUAL_ML, MESH_RESIDUAL_ML
from engine.evidence.shape import Number
from engine.policy import Policy
from engine.ternary import Ternary


def asked_for(rows: Batch, name: str) -> np.ndarray:
    """False where the field cannot be filled: no expiratory limb, no filter in it."""
    if name == "expiratory_filter":
        return ~is_word(rows, "circuit", "single_limb").yes
    return np.ones(size(rows), dtype=bool)


def drug_holds(rows: Batch, names: Sequence[str]) -> Ternary:
    """Whether the charted drug holds one of these names, capitals aside."""
    held = np.any(drugs_held(rows, names), axis=0)
    return Ternary.of(held, ~is_missing(rows, "drug"))


def drugs_held(rows: Batch, names: Sequence[str]) -> np.ndarray:
    """Names x treatments: whether the charted drug holds the name."""
    charted = np.char.lower(rows["drug"].astype(str))
    found = [np.char.find(charted, name.lower()) >= 0 for name in names]
    return np.array(found, dtype=bool).reshape(len(names), size(rows))


def run_time_min(rows: Batch, policy: Policy) -> tuple[np.ndarray, np.ndarray]:
    """Shortest and longest run the fill and the output of the generator allow."""
    slow, fast = (_by_generator(rows, policy, i) for i in (0, 1))
    fill = rows["fill_volume_ml"]
    jet = is_word(rows, "generator", "jet", "breath_enhanced_jet").yes
    kept = np.where(jet, _most(JET_RESIDUAL_ML), _most(MESH_RESIDUAL_ML))
    return np.maximum(fill - kept, 0.0) / fast, fill / slow


def filter_hours_h(rows: Batch, policy: Policy) -> tuple[np.ndarray, np.ndarray]:
    """Hours a filter may stay: the fewest and the most any drug it may be allows."""
    limits = policy.filters
    by_class = [limits.hours_by_drug_class.get(w) for w in words_of("drug_class")[:-1]]
    every = np.array([*by_class, *limits.hours_by_drug.values()], dtype=float)
    known = np.array([*by_class, np.nan], dtype=float)[rows["drug_class"]]
    fewest = np.where(np.isnan(known), every.min(), known)
    most = np.where(np.isnan(known), every.max(), known)
    if not limits.hours_by_drug:
        return fewest, most
    unsaid = is_missing(rows, "drug")
    named = np.array(list(limits.hours_by_drug.values()))
    fewest = np.where(unsaid, np.minimum(fewest, named.min()), fewest)
    most = np.where(unsaid, np.maximum(most, named.max()), most)
    for name, hours in limits.hours_by_drug.items():
        held = drug_holds(rows, [name]).yes
        fewest, most = np.where(held, hours, fewest), np.where(held, hours, most)
    return fewest, most


def _by_generator(rows: Batch, policy: Policy, end: int) -> np.ndarray:
    """One end of each generator's output range; missing where there is none."""
    ranges = policy.generator_use.output_ml_min
    ends = [
        ranges[word][end] if word in ranges else np.nan
        for word in words_of("generator")[:-1]
    ]
    return np.array([*ends, np.nan])[rows["generator"]]


def _most(number: Number) -> float:
    return float(number if number.high is None else number.high)
