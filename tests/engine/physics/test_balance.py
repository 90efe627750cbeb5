"""What must hold for every balance, whatever was logged and whatever was not."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine.batch import from_values, one_row
from engine.columns import FRACTIONS, words_of
from engine.physics.balance import ASSUMPTIONS, PASSAGES, REFUSALS, balance
from engine.physics.constants import FITTED
from engine.physics.setup import setup_of

EVERYWHERE = (*FRACTIONS, *PASSAGES)


def word(column):
    return st.sampled_from([*words_of(column)[:-1], None])


def number(low, high):
    return st.one_of(st.none(), st.floats(low, high))


ANY = st.fixed_dictionaries(
    {
        "generator": word("generator"),
        "site": word("site"),
        "circuit": st.sampled_from(["dual_limb", "dual_limb", "single_limb", None]),
        "synchrony": word("synchrony"),
        "humidification": word("humidification"),
        "heated_humidifier_on": st.sampled_from([True, False, None]),
        "hme_state": word("hme_state"),
        "airway": word("airway"),
        "mode": word("mode"),
        "spontaneous_breaths": st.sampled_from([True, False, None]),
        "expiratory_filter": word("expiratory_filter"),
        "filter_kind": st.sampled_from(["pleated", "electrostatic", "hmef", None]),
        "distance_from_wye_cm": number(0, 400),
        "mmad_um": number(0.1, 20),
        "gsd": number(1, 5),
        "generator_gas_lpm": number(0, 20),
        "bias_flow_lpm": number(0, 60),
        "tidal_volume_ml": st.one_of(st.floats(90, 900), number(2, 3000)),
        "respiratory_rate_bpm": st.one_of(st.floats(8, 30), number(1, 150)),
        "inspiratory_time_s": st.one_of(st.floats(0.5, 2), number(0.1, 15)),
        "inspiratory_pause_s": number(0, 5),
        "peak_inspiratory_flow_lpm": number(1, 250),
        "tube_id_mm": number(2, 12),
    }
)


def batch(treatments):
    return from_values(**{k: [t[k] for t in treatments] for k in treatments[0]})


def point(found):
    return np.array([found[f"{place}_frac"] for place in FRACTIONS])


def falls(values, slack=1e-6):
    return bool(np.all(np.diff(values) <= slack))


# --- for any treatment -----------------------------------------------------------


@settings(deadline=None, max_examples=60)
@given(st.lists(ANY, min_size=1, max_size=8))
def test_the_places_of_every_treatment_add_to_the_nominal_dose(treatments):
    found = balance(batch(treatments))
    refused = found["refusal"] > 0
    total = point(found).sum(axis=0)
    np.testing.assert_allclose(total[~refused], 1.0, atol=1e-9)
    assert np.all(np.isnan(total[refused]))


@settings(deadline=None, max_examples=60)
@given(st.lists(ANY, min_size=1, max_size=8))
def test_every_fraction_lies_in_its_band_and_between_nothing_and_all(treatments):
    found = balance(batch(treatments))
    kept = found["refusal"] == 0
    for place in EVERYWHERE:
        frac, low, high = (
            found[f"{place}{end}_frac"][kept] for end in ("", "_low", "_high")
        )
        assert np.all(np.isfinite(frac) & np.isfinite(low) & np.isfinite(high)), place
        assert np.all((low >= 0) & (low <= frac) & (frac <= high)), place
        assert np.all(high <= 1 + 1e-9), place


@settings(deadline=None, max_examples=30)
@given(st.lists(ANY, min_size=2, max_size=6))
def test_a_single_row_gives_what_it_gives_in_a_batch(treatments):
    rows = batch(treatments)
    together = balance(rows)
    for i in range(len(treatments)):
        alone = balance(one_row(rows, i))
        for name, values in together.items():
            np.testing.assert_allclose(values[i], alone[name][0], atol=1e-6)


@settings(deadline=None, max_examples=60)
@given(st.lists(ANY, min_size=1, max_size=8))
def test_what_is_not_logged_is_assumed_or_refused(treatments):
    found = balance(batch(treatments))
    always = ("tidal_volume_ml", "generator", "site", "circuit")
    often = ("respiratory_rate_bpm", "tube_id_mm", "mmad_um", "expiratory_filter")
    for i, treatment in enumerate(treatments):
        if any(treatment[name] is None for name in always):
            assert found["refusal"][i] > 0
        elif any(treatment[name] is None for name in often):
            assert found["refusal"][i] > 0 or found["assumed"][i] > 0


NUMBERS = [
    "tidal_volume_ml",
    "respiratory_rate_bpm",
    "inspiratory_time_s",
    "inspiratory_pause_s",
    "peak_inspiratory_flow_lpm",
    "bias_flow_lpm",
    "generator_gas_lpm",
    "distance_from_wye_cm",
    "tube_id_mm",
    "mmad_um",
    "gsd",
]


@pytest.mark.parametrize("column", NUMBERS)
@pytest.mark.parametrize("value", [0.0, -1.0, np.inf, 1e300, 1e-300])
def test_impossible_values_raise_nothing_and_leave_no_half_answer(
    changed, column, value
):
    for generator, site in (("jet", "inspiratory_limb"), ("jet", "airway_side")):
        found = balance(changed(generator=generator, site=site, **{column: value}))
        fractions = np.array([found[f"{place}_frac"][0] for place in EVERYWHERE])
        refused = found["refusal"][0] > 0
        assert (
            np.all(np.isnan(fractions)) if refused else np.all(np.isfinite(fractions))
        )


# --- refusals and assumptions, each by its words ---------------------------------

REFUSED = [
    ({"generator": None}, "the generator is not logged"),
    ({"site": None}, "the site of the generator is not logged"),
    ({"circuit": None}, "the kind of circuit is not logged"),
    ({"tidal_volume_ml": None}, "the tidal volume is not logged"),
    ({"bias_flow_lpm": -2.0}, "a logged value is not possible"),
    ({"mmad_um": 0.0}, "a logged value is not possible"),
    (
        {"inspiratory_time_s": 4.0},
        "the inspiratory time leaves no time to breathe out at the rate",
    ),
    (
        {"tidal_volume_ml": 40.0},
        "the breath is too small: infants are outside the bench work this rests on",
    ),
    (
        {
            "tidal_volume_ml": 110.0,
            "site": "airway_side",
            "distance_from_wye_cm": 40.0,
        },
        "the tidal volume does not exceed the dead space of tube and connectors",
    ),
    (
        {"circuit": "single_limb", "site": "expiratory_limb"},
        "the site does not exist on a single-limb circuit",
    ),
    (
        {"inspiratory_time_s": 1.0, "inspiratory_pause_s": 1.0},
        "the inspiratory pause fills the inspiratory time",
    ),
    (
        {"tidal_volume_ml": 3000.0, "inspiratory_time_s": 0.2},
        "the breath would need more flow than a ventilator gives",
    ),
    (
        {"respiratory_rate_bpm": 150.0, "inspiratory_time_s": 0.13},
        "the rate is beyond tidal breathing: oscillation is outside the bench work",
    ),
]


@pytest.mark.parametrize(("columns", "words"), REFUSED)
def test_a_refusal_names_its_reason(changed, columns, words):
    assert REFUSALS[balance(changed(**columns))["refusal"][0]] == words


def test_every_refusal_can_happen():
    assert {words for _, words in REFUSED} | {""} == set(REFUSALS)


ASSUMED = [
    ({"mmad_um": None}, "droplet size not logged: usual for the generator"),
    (
        {"inspiratory_time_s": None},
        "inspiratory time not logged: a usual share of the cycle",
    ),
    (
        {"respiratory_rate_bpm": None},
        "respiratory rate not logged: a usual adult rate",
    ),
    ({"bias_flow_lpm": None}, "bias flow not logged: 0, 2 and 5 L/min tried"),
    (
        {"generator": "jet", "generator_gas_lpm": None},
        "driving gas not logged: usual flow of a jet",
    ),
    ({"distance_from_wye_cm": None}, "distance from the Y not logged: 15 cm"),
    ({"tube_id_mm": None}, "tube size not logged: usual size for the breath"),
    ({"airway": None}, "kind of airway not logged: endotracheal tube"),
    ({"humidification": None}, "humidification not logged: humid and dry gas tried"),
    (
        {"heated_humidifier_on": None},
        "heated humidifier on or off not logged: both tried",
    ),
    (
        {"heated_humidifier_on": False},
        "heated humidifier off: gas does not dry at once, both tried",
    ),
    (
        {"humidification": "hme", "hme_state": None},
        "HME in line or not is not logged: both tried",
    ),
    (
        {"expiratory_filter": None},
        "expiratory filter not logged: absent and present tried",
    ),
    ({"filter_kind": None}, "kind of filter not logged: all kinds tried"),
    ({"synchrony": None}, "output timing not logged: usual for the generator"),
    (
        {"spontaneous_breaths": True},
        "breaths the patient adds are not in the estimate",
    ),
    (
        {"circuit": "single_limb", "bias_flow_lpm": None},
        "leak flow not logged: 10, 25 and 40 L/min tried",
    ),
]


@pytest.mark.parametrize(("columns", "words"), ASSUMED)
def test_a_gap_is_named_and_nothing_else_is(changed, columns, words):
    assumed = int(balance(changed(**columns))["assumed"][0])
    assert [w for i, w in enumerate(ASSUMPTIONS) if assumed >> i & 1] == [words]


def test_every_assumption_can_be_made():
    assert {words for _, words in ASSUMED} == set(ASSUMPTIONS)


def test_a_whole_treatment_assumes_nothing(changed):
    found = balance(changed())
    assert found["assumed"][0] == 0
    assert found["refusal"][0] == 0


@pytest.mark.parametrize(
    ("column", "values"),
    [
        ("bias_flow_lpm", [0.0, 2.0, 5.0]),
        ("expiratory_filter", ["absent", "present"]),
        ("heated_humidifier_on", [True, False]),
    ],
)
def test_the_band_of_what_is_not_logged_holds_every_value_tried(
    changed, column, values
):
    unknown = balance(changed(**{column: None}))
    for value in values:
        known = balance(changed(**{column: value}))
        for place in EVERYWHERE:
            frac = known[f"{place}_frac"][0]
            assert unknown[f"{place}_low_frac"][0] <= frac + 1e-9, (place, value)
            assert unknown[f"{place}_high_frac"][0] >= frac - 1e-9, (place, value)


def test_an_unknown_filter_is_taken_as_absent_in_the_point(changed):
    unknown = balance(changed(expiratory_filter=None, filter_kind=None))
    absent = balance(changed(expiratory_filter="absent"))
    assert unknown["room_frac"][0] == pytest.approx(absent["room_frac"][0])
    assert unknown["filter_frac"][0] == 0


# --- which way it goes where physics says so -------------------------------------


@settings(deadline=None, max_examples=30)
@given(
    st.floats(250, 800),
    st.floats(0.7, 1.5),
    st.floats(10, 24),
    st.sampled_from(["vibrating_mesh", "ultrasonic"]),
)
def test_bias_flow_sweeps_away_what_a_generator_at_the_y_puts_out(
    changed, tidal_ml, inspiratory_s, rate_bpm, generator
):
    rows = changed(
        generator=generator,
        site="wye",
        tidal_volume_ml=tidal_ml,
        inspiratory_time_s=inspiratory_s,
        respiratory_rate_bpm=rate_bpm,
        bias_flow_lpm=[0.0, 0.25, 0.5, 1.0, 2.0, 5.0, 10.0],
    )
    found = balance(rows)
    assert falls(found["delivered_frac"], slack=1e-3)
    assert np.all(np.diff(found["swept_past_wye_frac"]) >= -1e-3)


@settings(deadline=None, max_examples=30)
@given(
    st.sampled_from(words_of("generator")[:-1]),
    st.sampled_from(["humidifier_inlet", "inspiratory_limb", "wye", "airway_side"]),
    st.floats(200, 800),
    st.floats(0, 10),
    st.floats(1.1, 2.6),
)
def test_larger_droplets_are_never_delivered_better(
    changed, generator, site, tidal_ml, bias_lpm, gsd
):
    rows = changed(
        generator=generator,
        site=site,
        tidal_volume_ml=tidal_ml,
        bias_flow_lpm=bias_lpm,
        gsd=gsd,
        mmad_um=list(np.linspace(1.0, 9.0, 9)),
    )
    assert falls(balance(rows)["delivered_frac"])


@settings(deadline=None, max_examples=30)
@given(st.floats(250, 800), st.floats(0.7, 1.5), st.floats(1, 10))
def test_output_kept_to_the_inspiration_is_delivered_better_at_the_y(
    changed, tidal_ml, inspiratory_s, bias_lpm
):
    """At the Y and with bias flow: else what is parked comes with the next breath."""
    rows = changed(
        site="wye",
        tidal_volume_ml=tidal_ml,
        inspiratory_time_s=inspiratory_s,
        bias_flow_lpm=bias_lpm,
        synchrony=["continuous", "inspiration_synchronised"],
    )
    setup = setup_of(rows)
    emitted = FITTED.emitted_frac(setup.generator, setup.is_synchronised)
    continuous, synchronised = balance(rows)["delivered_frac"] / emitted
    assert synchronised >= continuous - 0.01


@pytest.mark.parametrize("site", ["humidifier_inlet", "inspiratory_limb", "wye"])
def test_an_hme_on_the_way_takes_the_dose(changed, site):
    rows = changed(site=site, humidification="hme", hme_state=["removed", "in_line"])
    found = balance(rows)
    assert found["delivered_frac"][1] < 0.2 * found["delivered_frac"][0]
    assert found["hme_frac"][0] == 0
    assert found["hme_frac"][1] > 0.1


def test_an_hme_between_generator_and_y_leaves_the_breath_alone(changed):
    """A generator at the airway side: the HME meets only what comes back."""
    found = balance(
        changed(
            site="airway_side",
            distance_from_wye_cm=0.0,
            humidification="hme",
            hme_state=["removed", "in_line"],
        )
    )
    assert found["delivered_frac"][1] > 0.7 * found["delivered_frac"][0]
    assert found["hme_frac"][1] > 0
    assert found["room_frac"][1] < found["room_frac"][0]


def test_a_filter_keeps_from_the_room_what_it_holds(changed):
    """More than 160 times less at the outlet is published (ARI_2016)."""
    found = balance(
        changed(expiratory_filter=["absent", "present"], filter_kind="pleated")
    )
    assert found["filter_frac"][0] == 0
    assert found["room_frac"][1] * 160 < found["room_frac"][0]
    loads = [
        sum(found[f"{place}_frac"][i] for place in ("filter", "sensor_side", "room"))
        for i in (0, 1)
    ]
    assert loads[0] == pytest.approx(loads[1], abs=1e-9)


def test_a_pause_leaves_more_in_the_alveoli(changed):
    rows = changed(inspiratory_pause_s=[0.0, 0.2], inspiratory_time_s=[1.0, 1.2])
    # The same moving time and the same exhaled time as without the pause.
    rows["respiratory_rate_bpm"][:] = 60 / (2.75 + np.array([1.0, 1.2]))
    found = balance(rows)
    share = found["alveolar_frac"] / found["delivered_frac"]
    assert share[1] > share[0]


def test_nothing_is_inhaled_from_the_expiratory_limb(changed):
    found = balance(changed(site="expiratory_limb"))
    assert found["delivered_frac"][0] == 0
    assert found["swept_past_wye_frac"][0] > 0.5


def test_the_order_of_the_rows_changes_nothing(changed):
    distances = list(np.linspace(1, 140, 40))
    forth = balance(changed(distance_from_wye_cm=distances))
    back = balance(changed(distance_from_wye_cm=distances[::-1]))
    for name, values in forth.items():
        np.testing.assert_allclose(values, back[name][::-1], atol=1e-9, err_msg=name)


def test_long_batches_are_worked_in_pieces_that_change_nothing(changed):
    bias_lpm = list(np.linspace(0, 10, 17000))
    found = balance(changed(bias_flow_lpm=bias_lpm))
    tail = balance(changed(bias_flow_lpm=bias_lpm[-100:]))
    np.testing.assert_allclose(
        found["delivered_frac"][-100:], tail["delivered_frac"], atol=1e-9
    )


@pytest.mark.parametrize("mmad_um", [0.2, 0.9, 3.3, 7.0, 12.0, 20.0])
@pytest.mark.parametrize("site", ["expiratory_limb", "ventilator_outlet", "wye"])
def test_fractions_add_to_one_to_the_last_digit_at_every_size(changed, site, mmad_um):
    found = balance(changed(site=site, mmad_um=mmad_um, gsd=1.4))
    shares = np.array([found[f"{name}_frac"][0] for name in FRACTIONS])
    assert abs(shares.sum() - 1) < 1e-9
    assert (shares >= 0).all()


def test_a_spread_of_droplets_taken_as_usual_is_said(changed):
    logged = balance(changed(mmad_um=4.0, gsd=2.0))["assumed"][0]
    taken = balance(changed(mmad_um=4.0, gsd=None))["assumed"][0]
    assert "droplet size not logged: usual for the generator" in [
        words for bit, words in enumerate(ASSUMPTIONS) if taken >> bit & 1
    ]
    assert taken != logged


def test_bias_flow_passes_the_filter_as_well(changed):
    rows = {"tidal_volume_ml": 700.0, "bias_flow_lpm": 20.0}
    fast = balance(changed(expiratory_filter="present", **rows))
    open_ = balance(changed(expiratory_filter="absent", **rows))
    reached = open_["room_frac"][0] + open_["sensor_side_frac"][0]
    passed = fast["room_frac"][0] + fast["sensor_side_frac"][0]
    slow = balance(changed(expiratory_filter="present", bias_flow_lpm=0.0))
    slow_open = balance(changed(expiratory_filter="absent", bias_flow_lpm=0.0))
    share = passed / reached
    at_rest = (slow["room_frac"][0] + slow["sensor_side_frac"][0]) / (
        slow_open["room_frac"][0] + slow_open["sensor_side_frac"][0]
    )
    assert share > at_rest


@pytest.mark.parametrize("bias_flow_lpm", [0.0, 2.0, 5.0])
@pytest.mark.parametrize("generator", ["vibrating_mesh", "jet", "ultrasonic"])
def test_a_timing_nobody_logged_is_inside_the_band_either_way(
    changed, generator, bias_flow_lpm
):
    setup = {"generator": generator, "site": "wye", "bias_flow_lpm": bias_flow_lpm}
    unsaid = balance(changed(synchrony=None, **setup))
    for synchrony in ("continuous", "inspiration_synchronised"):
        said = balance(changed(synchrony=synchrony, **setup))
        for name in ("delivered", "unused_past_wye"):
            low, high = (unsaid[f"{name}_{end}_frac"][0] for end in ("low", "high"))
            assert low <= said[f"{name}_frac"][0] <= high
