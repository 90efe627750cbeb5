"""Sets of topics against brute force and a published bound."""

from itertools import combinations

import numpy as np
import pytest

from engine.stats.topics import best_topics, capped, greedy_topics


def value(worth, many, topics):
    return float(many @ worth[:, list(topics)].max(axis=1))


def test_a_set_that_covers_more_together_goes_before_two_large_ones():
    # Topics 0 and 1 touch the same treatments; 0 and 2 together touch all.
    worth = np.array([[1, 1, 0], [1, 1, 0], [1, 0, 0], [0, 0, 1.0]])
    found = best_topics(worth, [1, 1, 1, 1], 2)
    assert found.chosen == (0, 2)
    assert found.value == 4
    assert found.alone == (3, 2, 1)


def test_the_runner_up_is_the_second_of_all_sets():
    draw = np.random.default_rng(5)
    worth, many = draw.random((40, 7)), draw.random(40)
    found = best_topics(worth, many, 3)
    ranked = sorted(
        (value(worth, many, each) for each in combinations(range(7), 3)), reverse=True
    )
    assert (found.value, found.runner_up_value) == pytest.approx(tuple(ranked[:2]))


def test_greedy_keeps_the_published_bound():
    """1 - (1 - 1/k)^k of the best (Nemhauser, Wolsey and Fisher 1978, from memory)."""
    draw = np.random.default_rng(11)
    for _ in range(400):
        worth = (draw.random((12, 8)) < 0.3).astype(float)
        many = draw.integers(1, 10, 12).astype(float)
        best = best_topics(worth, many, 3).value
        got = value(worth, many, greedy_topics(worth, many, 3))
        assert got >= (1 - (1 - 1 / 3) ** 3) * best - 1e-9


def test_no_patient_carries_more_than_the_cap():
    weight = np.array([100, 10, 10, 10, *[5.0] * 20])
    factor = capped(weight, 0.05)
    after = weight * factor
    assert after.max() / after.sum() <= 0.05 + 1e-9
    assert (factor[after < after.max() - 1e-9] == 1).all()


def test_with_too_few_patients_for_the_cap_all_weigh_the_same():
    weight = np.array([100.0, 10.0, 5.0])
    after = weight * capped(weight, 0.05)
    assert np.ptp(after) == pytest.approx(0)


def test_nothing_flagged_gives_a_set_worth_nothing():
    found = best_topics(np.zeros((0, 4)), np.zeros(0), 2)
    assert found.value == 0
    assert found.loss_frac == 0
