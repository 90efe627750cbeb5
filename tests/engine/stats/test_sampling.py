"""Charts drawn, and what a drawn chart says of the rest."""

import numpy as np
import pytest

from engine.stats.sampling import (
    allotted,
    charts_to_find_one,
    drawn,
    predictive,
    stratified_share,
)


def test_every_stratum_gives_some_and_none_more_than_it_has():
    given = allotted([100, 10, 3, 0], 20, 2)
    assert given.sum() == 20
    assert (given <= [100, 10, 3, 0]).all()
    assert (given[:3] >= 2).all()


def test_more_charts_than_there_are_takes_all():
    assert allotted([3, 4], 50, 2).tolist() == [3, 4]


def test_the_order_ids_arrive_in_does_not_matter():
    ids = [f"T{i}" for i in range(50)]
    assert drawn(ids, 10, 3).tolist() == drawn(ids[::-1], 10, 3).tolist()


def test_twelve_hundred_draws_take_each_chart_alike():
    ids = [f"T{i:02d}" for i in range(20)]
    seen = np.zeros(20)
    for seed in range(1200):
        seen += np.isin(ids, drawn(ids, 5, seed))
    assert seen / 1200 == pytest.approx(0.25, abs=4 * np.sqrt(0.25 * 0.75 / 1200))


def test_a_whole_read_leaves_no_doubt():
    assert stratified_share([20, 30], [20, 30], [5, 6]).se == pytest.approx(0)


def test_thirteen_of_two_hundred_find_one_in_five():
    """Exact hypergeometric; a common approximation says 15 (R epiR help)."""
    assert charts_to_find_one(200, 40) == 13


def test_without_unflagged_charts_sensitivity_is_not_known():
    found = predictive(100, 20, 15)
    assert found.confirmed_frac == 0.75
    assert found.sensitivity is None
