"""Hidden cells: none can be worked out from the totals beside the table."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from engine.stats.cells import hidden_cells


def test_one_small_cell_takes_a_partner_in_its_row_and_column():
    hidden = hidden_cells(
        [[5, 40, 50], [30, 60, 70], [20, 22, 90]], [[1, 0, 0], [0] * 3, [0] * 3]
    )
    assert hidden[0, 0]
    assert (hidden.sum(axis=1)[hidden.any(axis=1)] >= 2).all()
    assert (hidden.sum(axis=0)[hidden.any(axis=0)] >= 2).all()


def test_a_zero_may_be_shown():
    assert not hidden_cells([[0, 40], [30, 60]], [[1, 0], [0, 0]]).any()


@given(arrays(int, (3, 4), elements=st.integers(0, 60)))
def test_no_hidden_cell_is_alone_in_its_row_or_column(count):
    small = (count > 0) & (count < 11)
    hidden = hidden_cells(count, small)
    assert hidden[small].all()
    for axis, length in ((1, 4), (0, 3)):
        shut = hidden.sum(axis=axis)
        lonely = (shut == 1) & (shut < length)
        assert not lonely.any()


def test_a_table_of_one_row_hides_two():
    hidden = hidden_cells(np.array([[5, 40, 50]]), np.array([[True, False, False]]))
    assert hidden.sum() == pytest.approx(2)
