"""Many filters at once give what each would give alone."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine.stats.filter_life import life_of
from engine.stats.filter_lives import KEPT, lives_of

ASKED = (5.0, 0.8, 6, 0.05, 0.05)
READING = st.tuples(
    st.integers(-1, 5),
    st.sampled_from([np.nan, -1.0, 0.0, 2.0, 2.0, 7.5, 11.0, 30.0, 31.5, 60.0, 99.0]),
    st.sampled_from([np.nan, np.inf, 1.9, 2.0, 2.1, 2.6, 3.3, 4.0, 4.1, 5.0, 5.2]),
)


@settings(max_examples=150, deadline=None)
@given(st.lists(READING, max_size=45), st.sampled_from([3, 6]))
def test_many_filters_at_once_are_as_each_alone(readings, fewest):
    code, hours, resistance = (
        np.array([r[i] for r in readings], dtype=float) for i in range(3)
    )
    asked = (*ASKED[:2], fewest, *ASKED[3:])
    many = lives_of(code.astype(int), 6, hours, resistance, *asked)
    assert set(many) == set(KEPT)
    for number in range(6):
        own = code == number
        alone = life_of(hours[own], resistance[own], *asked)
        for name in KEPT:
            expected, found = getattr(alone, name), many[name][number]
            assert found == pytest.approx(expected, nan_ok=True), name
            assert (found is None) == (expected is None), name


def test_no_filters_and_no_readings_give_empty_columns():
    none = np.array([])
    assert all(len(v) == 0 for v in lives_of(none, 0, none, none, *ASKED).values())
    two = lives_of(none.astype(int), 2, none, none, *ASKED)
    assert list(two["readings_count"]) == [0, 0]
    assert list(two["note"]) == ["no readings that can be used"] * 2
