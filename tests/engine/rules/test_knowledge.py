"""Knowing less never turns an answer round: it can only end in "cannot tell"."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine.batch import COLUMNS, from_values
from engine.columns import ANSWERS, words_of
from engine.policy import load_policy
from engine.rules import ALL_RULES

# They judge the entry itself, where a blank is what it is: see the tests below.
ON_THE_ENTRY = {"HU03", "RE01", "RE02", "RE03", "RE05"}
CANNOT_TELL = ANSWERS.index("cannot_tell")
DRUGS = ("albuterol", "Ribavirin", "budesonide", "epoprostenol", "zanamivir")
NEAR_LIMITS = (0.0, 0.5, 1.0, 3.0, 4.0, 5.0, 10.0, 24.0, 61.0, 300.0)
ESTIMATED = ("best_ratio", "room_low_frac", "room_high_frac")


def values_of(column):
    if column.kind == "word":
        return st.sampled_from(column.words[:-1])
    if column.kind == "yes_no":
        return st.booleans()
    if column.kind in {"number", "count"}:
        # Near the limits of policy and practice as well as anywhere.
        high = min(column.high, 2000.0)
        near = [x for x in NEAR_LIMITS if column.low <= x <= high]
        return st.sampled_from(near) | st.floats(column.low, high)
    if column.name == "drug":
        return st.sampled_from(DRUGS)
    return st.just("A1")


READ = sorted(
    {name for rule in ALL_RULES for name in rule.columns if name in COLUMNS}
    - {"started_at", "ended_at"}
)
TREATMENTS = st.fixed_dictionaries({name: values_of(COLUMNS[name]) for name in READ})
HIDDEN = st.sets(st.sampled_from([*READ, "estimate"]), min_size=1)
ESTIMATES = st.fixed_dictionaries(
    {
        "best_site": st.integers(0, len(words_of("site")) - 2),
        "difference_shown": st.integers(0, 1),
        "best_ratio": st.floats(0.5, 5),
        "room_low_frac": st.floats(0, 0.5),
        "room_high_frac": st.floats(0.5, 1),
    }
)


def batch_of(known, estimate):
    rows = from_values(
        **known, started_at="2026-03-04T08:00", ended_at="2026-03-04T08:12"
    )
    for name in ("best_site", "difference_shown"):
        rows[name] = np.array([estimate.get(name, -1)], dtype=np.int8)
    for name in ESTIMATED:
        rows[name] = np.array([estimate.get(name, np.nan)])
    rows["assumed"] = np.array([0], dtype=np.int32)
    return rows


@pytest.mark.parametrize("policy", ["common_practice", "bench_2024"])
@settings(max_examples=150, deadline=None)
@given(known=TREATMENTS, estimate=ESTIMATES, hidden=HIDDEN)
def test_hiding_values_never_turns_an_answer_into_another(
    policy, known, estimate, hidden
):
    policy = load_policy(policy)
    less = {name: value for name, value in known.items() if name not in hidden}
    full = batch_of(known, estimate)
    part = batch_of(less, {} if "estimate" in hidden else estimate)
    for rule in ALL_RULES:
        if rule.id in ON_THE_ENTRY:
            continue
        before, after = (rule.answer(rows, policy)[0] for rows in (full, part))
        assert after in (before, CANNOT_TELL), (
            f"{rule.id}: {ANSWERS[before]} became {ANSWERS[after]}"
        )


@settings(max_examples=100, deadline=None)
@given(known=TREATMENTS, estimate=ESTIMATES, hidden=HIDDEN)
def test_a_blank_can_only_add_a_missing_field_and_only_remove_a_contradiction(
    known, estimate, hidden
):
    policy = load_policy()
    less = {name: value for name, value in known.items() if name not in hidden}
    answers = {}
    for rule in ALL_RULES:
        if rule.id in {"HU03", "RE01", "RE05"}:
            full = rule.answer(batch_of(known, estimate), policy)[0]
            part = rule.answer(batch_of(less, estimate), policy)[0]
            answers[rule.id] = (ANSWERS[full], ANSWERS[part])
    if answers["RE01"][0] == "fires":
        assert answers["RE01"][1] == "fires"
    for rule_id in ("HU03", "RE05"):
        if answers[rule_id][0] == "silent":
            assert answers[rule_id][1] == "silent"


@settings(max_examples=20, deadline=None)
@given(rows=st.lists(st.tuples(TREATMENTS, ESTIMATES), min_size=2, max_size=6))
def test_a_treatment_is_judged_alone_whatever_stands_beside_it(rows):
    policy = load_policy()
    single = [batch_of(known, estimate) for known, estimate in rows]
    together = {
        name: np.concatenate([one[name] for one in single]) for name in single[0]
    }
    for rule in ALL_RULES:
        alone = [rule.answer(one, policy)[0] for one in single]
        assert rule.answer(together, policy).tolist() == alone, rule.id


def test_a_batch_of_no_treatments_gets_no_answers():
    rows = {
        name: values[:0] for name, values in batch_of({"drug": "albuterol"}, {}).items()
    }
    for rule in ALL_RULES:
        assert rule.answer(rows, load_policy()).shape == (0,), rule.id
