"""The split at the Y where the answer can be worked out by hand.

All hand-worked: a limb that does not disperse shifts the output by its volume, a limb
that mixes everything delivers the window's share of the gas of a breath.
"""

import numpy as np
import pytest

from engine.physics import wye

N = 7
VOLUMES_ML = np.array([5.0, 60.0, 150.0, 400.0, 600.0, 900.0, 2500.0])


def breath(**changes):
    plain = {
        "tidal_ml": np.full(N, 500.0),
        "inspiratory_s": np.full(N, 1.0),
        "expiratory_s": np.full(N, 2.0),
        "bias_ml_per_s": np.full(N, 50.0),
    }
    return wye.cycle_of(**(plain | changes))


@pytest.mark.parametrize("kind", wye.EMISSIONS)
def test_many_tanks_tend_to_plug_flow(kind):
    cycle = breath()
    output = wye.emission_of(cycle, kind)
    output = wye.Emission(np.broadcast_to(output.start_s, N), output.stop_s)
    plug = wye.plug_flow(VOLUMES_ML, cycle, output).share
    found = wye.dispersed([(VOLUMES_ML, 1e6)], cycle, output).share
    np.testing.assert_allclose(found, plug, atol=0.01)


@pytest.mark.parametrize("kind", wye.EMISSIONS)
def test_a_long_mixing_limb_tends_to_the_mixed_share(kind):
    """500 mL of each 600 mL are inhaled, whenever the output comes."""
    cycle = breath()
    output = wye.emission_of(cycle, kind)
    output = wye.Emission(np.broadcast_to(output.start_s, N), output.stop_s)
    long_ml = np.full(N, 50_000.0)
    found = wye.dispersed([(long_ml, 1.0)], cycle, output).share
    np.testing.assert_allclose(found, 500 / 600, atol=0.01)
    np.testing.assert_allclose(wye.mixed_frac(cycle), 500 / 600)


def test_plug_flow_at_the_y_delivers_what_is_put_out_while_inhaling():
    """No way to go: one second of three. With 50 mL dead space 450 of 500 mL of it."""
    for dead_ml, share in ((0.0, 1 / 3), (50.0, 0.9 / 3)):
        cycle = breath(dead_ml=np.full(N, dead_ml))
        output = wye.Emission(np.zeros(N), cycle.cycle_s)
        found = wye.plug_flow(np.zeros(N), cycle, output).share
        np.testing.assert_allclose(found, share)


def test_plug_flow_delivers_all_that_waits_where_the_way_holds_the_bias_flow():
    """100 mL are swept in an expiration. Behind 100 to 500 mL they hold output of the
    inspiration: a fifth of its second, of three."""
    cycle = breath()
    output = wye.Emission(np.zeros(N), cycle.cycle_s)
    for way_ml in (100.0, 300.0, 500.0):
        found = wye.plug_flow(np.full(N, way_ml), cycle, output).share
        np.testing.assert_allclose(found, 1 - 0.2 / 3)


def test_without_any_flow_between_breaths_nothing_is_lost():
    cycle = breath(bias_ml_per_s=np.zeros(N))
    output = wye.Emission(np.zeros(N), cycle.cycle_s)
    found = wye.dispersed([(VOLUMES_ML, 8.0)], cycle, output)
    np.testing.assert_allclose(found.share, 1.0, atol=0.01)


def test_a_leak_takes_its_share_of_what_arrives():
    """25 L/min for a second beside 500 mL: 917 mL pass, the patient gets 500."""
    leak = np.full(N, 25_000 / 60)
    cycle = breath(bias_ml_per_s=leak, bias_in_inspiration=True)
    np.testing.assert_allclose(cycle.patient_share, 500 / (500 + 25_000 / 60))


def test_what_settles_is_taken_off_by_age():
    """A gamma age of mean 2 s: with variance 0.5 the loss is (1 + k/4)^-8."""
    found = wye.Arrivals(np.array([0.6]), np.array([2.0]), np.array([0.5]))
    loss = np.array([0.1])
    np.testing.assert_allclose(
        found.airborne_frac(loss), 0.6 * (1 + 0.1 * 0.25) ** -8.0
    )


def test_time_and_position_of_a_breath_belong_together():
    cycle = breath(peak_ratio=np.full(N, 1.6))
    position_ml = np.linspace(0, 600, N)
    time_s = wye.time_s(cycle, position_ml)
    assert np.all(np.diff(time_s) > 0)
    assert time_s[0] == pytest.approx(0.0)
    assert time_s[-1] == pytest.approx(3.0)
    # At half of a falling flow more than half of the gas has passed.
    assert np.interp(0.5, time_s, position_ml) > 250


def test_an_unknown_kind_of_output_is_refused():
    with pytest.raises(
        ValueError,
        match="emission must be one of continuous, inspiration, expiration, puff; "
        "got always",
    ):
        wye.emission_of(breath(), "always")
