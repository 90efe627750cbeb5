"""Room air and filters where the answer is elementary or published."""

import numpy as np
import pytest

from engine.columns import code_of
from engine.physics import room
from engine.physics.filter import hme_capture_frac, penetration_frac


def test_concentration_rises_to_what_comes_in_over_what_goes_out():
    """1 an minute into 50 m3 changed 6 times an hour: 60 / (6 x 50) = 0.2."""
    found = room.concentration_per_m3(1.0, 50.0, 6.0, 1e6, 1e6)
    assert found == pytest.approx(0.2)


def test_without_removal_the_air_fills_up():
    assert room.concentration_per_m3(2.0, 50.0, 0.0, 10.0, 30.0) == pytest.approx(0.4)


def test_settling_adds_to_the_air_changes():
    """1 mm/s over 2.4 m is 1.5 an hour."""
    assert room.removal_per_h(6.0, 1e-3, 0.0, 2.4) == pytest.approx(7.5)


def test_poor_mixing_takes_ten_times_as_long():
    """The note to the CDC table: factors of 1 to 10."""
    perfect, poor = room.clearance_range_min(12.0, 0.99)
    assert poor == pytest.approx(10 * perfect)


def test_intake_is_the_sum_of_what_is_breathed():
    """The same by adding up the concentration minute by minute."""
    minutes = np.linspace(0, 60, 6001)
    air = room.concentration_per_m3(1.0, 40.0, 4.0, 15.0, minutes)
    slowly = np.trapezoid(air, minutes) * 9.0 / 1000
    assert room.inhaled(1.0, 40.0, 4.0, 15.0, 60.0, 9.0) == pytest.approx(
        slowly, rel=1e-3
    )


def test_the_caution_says_what_was_measured_beside_a_ventilator():
    assert room.NEAR_FIELD_CAUTION == (
        "The room is taken as mixed. Beside a ventilator without a filter about 77 "
        "µg/m³ was measured, several times what a mixed room gives: nothing here says "
        "what somebody there breathes."
    )


def kind(word):
    return np.array([code_of("filter_kind", word)], np.int8)


def test_electrostatic_filters_let_more_through_than_pleated_ones():
    """WILKES_2002, abstract: 0.00002 to 0.0067 and 0.0025 to 0.35."""
    pleated, electrostatic = (
        penetration_frac(kind(word), 30.0)[0] for word in ("pleated", "electrostatic")
    )
    assert 0.00002 <= pleated <= 0.0067
    assert 0.0025 <= electrostatic <= 0.35


def test_more_flow_lets_more_through():
    """WILKES_2004, abstract: 2 to 40 times more at 75 than at 15 L/min."""
    low, high = (penetration_frac(kind("pleated"), q)[0] for q in (30.0, 75.0))
    assert 2 < (75 / 15) ** (np.log(high / low) / np.log(75 / 30)) < 40


def test_an_unknown_kind_of_filter_has_the_widest_range():
    unknown = penetration_frac(np.array([-1], np.int8), 30.0)
    assert unknown[1] < unknown[0] < unknown[2]


def test_a_filter_hme_takes_more_than_an_hme():
    plain, filtering = hme_capture_frac(np.array([False, True]))
    assert plain < filtering < 1
