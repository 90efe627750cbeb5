"""Aerosol or water: made filters whose rise has a known cause."""

import numpy as np
import pytest

from engine.stats.loading import loading_shares


def made(rate_per_dose, rate_per_humid_h, filters=30, seed=1, noise=0.05):
    """Filters with their own pace of aerosol and of humid hours, read ten times."""
    rng = np.random.default_rng(seed)
    hours = np.sort(rng.uniform(0, 120, (filters, 10)), axis=1)
    dose = hours * rng.gamma(1.0, 0.05, (filters, 1))
    humid = hours * rng.choice([0.0, 1.0], (filters, 1), p=[0.3, 0.7])
    y = 2.2 + rate_per_dose * dose + rate_per_humid_h * humid
    y = y + rng.normal(0, noise, y.shape)
    owner = np.repeat(np.arange(filters), 10)
    return owner, y.ravel(), dose.ravel(), humid.ravel()


def test_a_rise_from_aerosol_alone_points_to_aerosol():
    owner, y, dose, humid = made(0.3, 0.0)
    done = loading_shares(owner, owner, y, dose, humid)
    assert done.rate_per_dose == pytest.approx(0.3, rel=0.1)
    assert done.rate_per_humid_h_low <= 0 <= done.rate_per_humid_h_high
    assert set(done.verdict) <= {"aerosol", "cannot_tell"}
    assert (done.verdict == "aerosol").mean() > 0.8


def test_a_rise_from_water_alone_points_to_water():
    owner, y, dose, humid = made(0.0, 0.015)
    done = loading_shares(owner, owner, y, dose, humid)
    assert done.rate_per_humid_h == pytest.approx(0.015, rel=0.1)
    assert "aerosol" not in set(done.verdict)
    assert (done.verdict == "water").sum() > 15


def test_the_share_of_a_mixed_rise_lies_in_its_interval():
    """Truth by arithmetic from the rates the readings were made with."""
    owner, y, dose, humid = made(0.2, 0.01, filters=60)
    done = loading_shares(owner, owner, y, dose, humid)
    spans = [
        (np.ptp(dose[owner == f]) * 0.2, np.ptp(humid[owner == f]) * 0.01)
        for f in done.filters
    ]
    truth = np.array([a / (a + w) for a, w in spans])
    inside = (done.low - 1e-6 <= truth) & (truth <= done.high + 1e-6)
    assert inside.mean() > 0.85


def test_filters_that_do_not_load_cannot_tell():
    owner, y, dose, humid = made(0.0, 0.0)
    done = loading_shares(owner, owner, y, dose, humid)
    assert (done.verdict == "cannot_tell").all()


@pytest.mark.parametrize("count", [0, 1, 4])
def test_too_few_filters_cannot_tell(count):
    owner, y, dose, humid = made(0.3, 0.01, filters=max(count, 1))
    kept = owner < count
    done = loading_shares(owner[kept], owner[kept], y[kept], dose[kept], humid[kept])
    assert done.refusal
    assert (done.verdict == "cannot_tell").all()


def test_without_humid_hours_anywhere_they_cannot_be_told_apart():
    owner, y, dose, humid = made(0.3, 0.0)
    done = loading_shares(owner, owner, y, dose, humid * 0)
    assert done.refusal == "no aerosol or no humid hours to tell the two apart"


def test_the_same_seed_gives_the_same_shares():
    owner, y, dose, humid = made(0.2, 0.01)
    first = loading_shares(owner, owner, y, dose, humid, seed=4)
    second = loading_shares(owner, owner, y, dose, humid, seed=4)
    assert np.array_equal(first.share, second.share, equal_nan=True)


def test_readings_with_anything_missing_are_left_out():
    owner, y, dose, humid = made(0.2, 0.01)
    y[:3] = np.nan
    dose[5] = np.nan
    assert loading_shares(owner, owner, y, dose, humid).readings_count == len(y) - 4
