"""Intervals against reference libraries, and the design effect against its meaning."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import binomtest
from statsmodels.stats.proportion import proportion_confint

from engine.stats.rates import (
    clopper_pearson,
    design_effect,
    newcombe,
    none_found_upper,
    poisson_ratio,
    wilson,
)

COUNTS = st.tuples(st.integers(1, 400), st.floats(0, 1)).map(
    lambda pair: (round(pair[0] * pair[1]), pair[0])
)


@given(COUNTS)
def test_wilson_agrees_with_statsmodels(pair):
    ends = proportion_confint(*pair, method="wilson")
    assert wilson(*pair) == pytest.approx(ends, abs=1e-9)


@given(COUNTS)
def test_clopper_pearson_agrees_with_scipy(pair):
    ends = binomtest(*pair).proportion_ci()
    assert clopper_pearson(*pair) == pytest.approx((ends.low, ends.high), abs=1e-9)


@given(COUNTS, COUNTS)
def test_a_difference_lies_inside_its_interval_and_turns_with_its_sign(a, b):
    d, low, high = newcombe(*a, *b)
    back = newcombe(*b, *a)
    assert low - 1e-12 <= d <= high + 1e-12
    assert (-back[0], -back[2], -back[1]) == pytest.approx((d, low, high))


def test_nothing_known_has_no_interval():
    assert np.isnan(wilson(0, 0)).all()
    assert np.isnan(clopper_pearson(0, 0)).all()


def test_none_of_59_leaves_five_percent():
    """The rule of 59 in sampling tables."""
    assert none_found_upper(59) <= 0.05 < none_found_upper(58)


def test_patients_alike_in_everything_tell_as_much_as_one_treatment_each():
    # Ten patients of ten treatments, five all yes, five all no: n tells as much as 10.
    effect = design_effect(10, 100, 50, 10 * 10**2, 5 * 10**2 / 10)
    assert effect == pytest.approx(10)


def test_one_treatment_each_leaves_n_as_it_is():
    assert design_effect(50, 50, 20, 50, 20) == pytest.approx(1)


def test_the_design_effect_covers_what_it_should():
    """Clustered data of rho 0.4: the widened interval covers near 95 %, the plain
    one far less."""
    draw = np.random.default_rng(2)
    a, b = 0.7 * (1 / 0.4 - 1), 0.3 * (1 / 0.4 - 1)
    plain = wide = 0
    for _ in range(600):
        rate = draw.beta(a, b, 40)
        x = draw.binomial(12, rate)
        n, total = 480, x.sum()
        effect = design_effect(40, n, total, 40 * 12**2, (x**2 / 12).sum())
        low, high = wilson(total, n)
        plain += low <= 0.7 <= high
        low, high = wilson(total, n, None, effect)
        wide += low <= 0.7 <= high
    assert plain / 600 < 0.75
    assert wide / 600 > 0.90


def test_no_events_on_either_side_is_no_difference():
    ratio = poisson_ratio(0, 100.0, 0, 100.0)
    assert ratio.p == 1.0
    assert (ratio.low, ratio.high) == (0.0, float("inf"))
