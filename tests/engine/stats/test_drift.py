"""Drift of the exhaled / inspired ratio against made ratios whose truth is known."""

import numpy as np
import pytest

from engine.stats.drift import (
    broken_line,
    drift_of,
    ewma,
    ewma_half_width,
    own_spread,
)

DAYS = np.arange(60) * 24.0
NOISE = np.random.default_rng(6).normal(0, 0.012, 60)


def test_the_average_of_the_handbook_example():
    """NIST/SEMATECH e-Handbook 6.3.2.4 (from memory): weight .3, start 50."""
    data = [52.0, 47.0, 53.0, 49.3, 50.1, 47.0, 51.0]
    printed = [50.60, 49.52, 50.56, 50.18, 50.16, 49.21, 49.75]
    assert ewma(data, 0.3, 50.0) == pytest.approx(printed, abs=0.006)


def test_the_limits_of_the_handbook_example():
    """The same: s = 2.0539, limits 52.5884 and 47.4115 far from the start."""
    half = ewma_half_width(60, 0.3, 2.0539, 3.0)[-1]
    assert 50 + half == pytest.approx(52.5884, abs=0.002)


def test_a_weight_outside_its_range_is_named():
    with pytest.raises(ValueError, match="weight must be above 0 and at most 1; got 0"):
        ewma([1.0], 0, 1.0)


def test_a_level_ventilator_does_not_drift_wherever_its_level_lies():
    for level in (0.93, 1.0, 1.06):
        assert drift_of(DAYS, level + NOISE, 0.2, 3.0).drifting is False


def test_a_slow_fall_is_found_with_its_start():
    true_start = 40 * 24.0
    fall = -0.15 * np.clip((DAYS - true_start) / (21 * 24), 0, 1)
    done = drift_of(DAYS, 0.97 + NOISE + fall, 0.2, 3.0)
    assert done.drifting
    assert done.falling
    assert done.sudden is False
    assert abs(done.started_h - true_start) <= 72
    assert done.started_low_h <= done.started_h <= done.started_high_h


def test_a_step_is_called_sudden():
    step = np.where(DAYS >= 40 * 24, 0.1, 0.0)
    done = drift_of(DAYS, 1 + NOISE + step, 0.2, 3.0)
    assert done.sudden
    assert not done.falling
    assert done.started_h == 40 * 24


def test_a_calibration_ends_a_drift():
    fall = np.where(DAYS < 40 * 24, -0.006 * np.clip(DAYS / 24 - 20, 0, None), 0.0)
    calibrated = DAYS == 40 * 24
    done = drift_of(DAYS, 1 + NOISE + fall, 0.2, 3.0, calibrated=calibrated)
    assert done.drifting
    assert done.ended_h == 40 * 24


def test_a_drift_that_goes_back_by_itself_has_an_end():
    away = np.where((DAYS >= 20 * 24) & (DAYS < 30 * 24), -0.08, 0.0)
    done = drift_of(DAYS, 1 + NOISE + away, 0.2, 3.0)
    assert done.drifting
    assert 30 * 24 <= done.ended_h <= 45 * 24


def test_an_early_excursion_does_not_hide_a_later_drift():
    early = np.where((DAYS >= 10 * 24) & (DAYS < 14 * 24), 0.06, 0.0)
    late = -0.15 * np.clip((DAYS - 40 * 24) / (20 * 24), 0, 1)
    done = drift_of(DAYS, 1 + NOISE + early + late, 0.2, 3.0)
    assert done.falling
    assert done.ended_h is None
    assert abs(done.started_h - 40 * 24) <= 72


def test_a_calibration_that_moves_the_level_is_no_drift():
    moved = np.where(DAYS > 30 * 24, 0.05, 0.0)
    calibrated = DAYS == 30 * 24
    done = drift_of(DAYS, 1 + NOISE + moved, 0.2, 3.0, calibrated=calibrated)
    assert done.drifting is False


def test_one_wild_check_is_no_drift():
    wild = np.where(DAYS == 30 * 24, -0.12, 0.0)
    assert drift_of(DAYS, 1 + NOISE + wild, 0.2, 3.0).drifting is False


def test_checks_with_external_gas_are_left_out_and_counted():
    gas = (DAYS >= 30 * 24) & (DAYS < 36 * 24)
    ratio = 1 + NOISE + np.where(gas, 0.2, 0.0)
    assert drift_of(DAYS, ratio, 0.2, 3.0).drifting
    done = drift_of(DAYS, ratio, 0.2, 3.0, left_out=gas)
    assert done.drifting is False
    assert done.left_out_count == 6
    assert np.isnan(done.ewma[gas]).all()


@pytest.mark.parametrize("count", [0, 1, 5])
def test_too_few_checks_cannot_tell(count):
    done = drift_of(DAYS[:count], 1 + NOISE[:count], 0.2, 3.0)
    assert done.drifting is None
    assert done.refusal == "too few checks with both volumes to tell"


def test_checks_without_volumes_are_not_used():
    ratio = 1 + NOISE
    ratio[::2] = np.nan
    assert drift_of(DAYS, ratio, 0.2, 3.0).used_count == 30


def test_the_spread_ignores_a_slow_drift():
    rng = np.random.default_rng(2)
    ratio = 1 + rng.normal(0, 0.02, 400) - 0.0005 * np.arange(400)
    assert own_spread(np.arange(400), ratio) == pytest.approx(0.02, rel=0.15)


def test_the_knee_of_a_clean_broken_line():
    hours = np.arange(20.0)
    knee, slope, misfit = broken_line(hours, -0.5 * np.maximum(hours - 8, 0))
    assert knee == pytest.approx(8)
    assert slope == pytest.approx(-0.5)
    assert misfit == pytest.approx(0, abs=1e-9)
