"""One treatment in words: its stages, and the picture of the split at the Y."""

import numpy as np
import pytest

from engine import evidence
from engine.columns import CHOICE_SITES, FRACTIONS, words_of
from engine.physics.balance import balance
from engine.physics.explain import explain
from engine.physics.picture import split_picture

SETUPS = [
    {"generator": g, "site": s}
    for g in ("jet", "vibrating_mesh", "pmdi_spacer")
    for s in ("humidifier_inlet", "inspiratory_limb", "wye", "airway_side")
] + [{"circuit": "single_limb", "bias_flow_lpm": 25.0}, {"hme_state": "in_line"}]


@pytest.mark.parametrize("columns", SETUPS)
def test_the_stages_hold_every_place_once_and_add_to_the_dose(changed, columns):
    stages = explain(changed(**columns))
    places = [p for stage in stages for p in stage.places if p in FRACTIONS]
    assert sorted(places) == sorted(FRACTIONS)
    whole = sum(s.frac for s in stages if s.places != ("swept_past_wye",))
    assert whole == pytest.approx(1.0, abs=1e-9)
    for stage in stages:
        assert 0 <= stage.low_frac <= stage.frac <= stage.high_frac <= 1


def test_a_stage_gives_the_figures_of_the_balance(changed):
    rows = changed()
    found = balance(rows)
    stages = {stage.name: stage for stage in explain(rows)}
    assert stages["Artificial airway"].frac == found["tube_frac"][0]
    assert stages["Artificial airway"].low_frac == found["tube_low_frac"][0]


def assumed_of(rows):
    return {label for s in explain(rows) for label, _, assumed in s.inputs if assumed}


@pytest.mark.parametrize(
    ("column", "label"),
    [
        ("bias_flow_lpm", "Bias flow"),
        ("mmad_um", "Droplet MMAD"),
        ("tube_id_mm", "Tube inner diameter"),
        ("inspiratory_time_s", "Inspiratory time"),
        ("distance_from_wye_cm", "Distance from the Y"),
        ("expiratory_filter", "Expiratory filter"),
        ("synchrony", "Output"),
    ],
)
def test_an_input_that_was_not_logged_is_marked_as_assumed(changed, column, label):
    assert label not in assumed_of(changed())
    assert label in assumed_of(changed(**{column: None}))


def test_every_stage_names_sources_that_exist_and_what_it_is_checked_by(changed):
    known = set(evidence.sources())
    for stage in explain(changed()):
        assert stage.sources
        assert set(stage.sources) <= known
        assert stage.checked_by
        assert stage.equation.endswith(".")


def test_an_input_carries_its_unit(changed):
    told = {label: text for s in explain(changed()) for label, text, _ in s.inputs}
    assert told["Tidal volume"] == "480 mL"
    assert told["Bias flow"] == "2 L/min"
    assert told["Droplet MMAD"] == "4.5 µm"


def test_a_refused_treatment_has_no_stages(changed):
    assert explain(changed(tidal_volume_ml=None)) == []


def test_one_treatment_is_explained_at_a_time(changed):
    with pytest.raises(ValueError, match="one treatment is explained at a time; got 2"):
        explain(changed(bias_flow_lpm=[0.0, 2.0]))
    with pytest.raises(ValueError, match="one treatment is explained at a time; got 2"):
        split_picture(changed(bias_flow_lpm=[0.0, 2.0]))


# --- the picture -----------------------------------------------------------------


def per_point_ml(picture):
    return picture.cycle_ml / len(picture.position_ml)


@pytest.mark.parametrize(
    "columns", [c for c in SETUPS if c.get("site") != "airway_side"]
)
def test_both_densities_of_the_picture_hold_the_whole_output(changed, columns):
    picture = split_picture(changed(**columns))
    for density in (picture.output_per_ml, picture.arriving_per_ml):
        assert np.all(density >= 0)
        assert np.sum(density) * per_point_ml(picture) == pytest.approx(1.0, abs=0.02)


@pytest.mark.parametrize(
    "columns", [c for c in SETUPS if c.get("site") != "airway_side"]
)
def test_the_area_inhaled_is_the_share_inhaled(changed, columns):
    """Two ways to the same share: the picture's own, and the split of the balance."""
    picture = split_picture(changed(**columns))
    area = np.sum(picture.arriving_per_ml[picture.is_inhaled]) * per_point_ml(picture)
    area *= 1 - picture.leak_frac
    assert picture.inhaled_frac == pytest.approx(area, abs=0.02)
    assert picture.swept_frac == pytest.approx(1 - picture.inhaled_frac)


def test_what_is_put_out_in_expiration_is_parked(changed):
    continuous = split_picture(changed())
    kept = split_picture(changed(synchrony="inspiration_synchronised"))
    cycle_s = 60 / 16
    assert continuous.parked_frac == pytest.approx(1 - 1.0 / cycle_s)
    assert kept.parked_frac == 0
    parked = np.sum(continuous.output_per_ml[continuous.is_parked])
    assert parked * per_point_ml(continuous) == pytest.approx(
        continuous.parked_frac, abs=0.01
    )


def test_a_continuous_generator_at_the_y_delivers_about_its_duty_cycle(changed):
    picture = split_picture(changed(site="wye", bias_flow_lpm=5.0))
    assert picture.inhaled_frac == pytest.approx(1.0 / (60 / 16), abs=0.03)


def test_there_is_no_picture_where_there_is_no_way_to_the_y(changed):
    for site in ("airway_side", "expiratory_limb"):
        assert split_picture(changed(site=site)) is None
    assert split_picture(changed(generator=None)) is None


SENTENCES = [
    (
        {"site": "wye"},
        "73% of the output is put out while the patient breathes out; 92 mL of gas "
        "pass in that time, more than the 5 mL between generator and Y, and sweep past "
        "what was put out early: ",
    ),
    (
        {"distance_from_wye_cm": 60.0},
        "73% of the output is put out while the patient breathes out; 92 mL of gas "
        "pass in that time, less than the 233 mL between generator and Y, and most of "
        "it waits: ",
    ),
    (
        {"bias_flow_lpm": 0.0},
        "73% of the output is put out while the patient breathes out; nothing moves "
        "the 62 mL between generator and Y on until the next breath: ",
    ),
    (
        {"synchrony": "inspiration_synchronised"},
        "All output is put out while the patient breathes in; what waits in the 62 mL "
        "between generator and Y at the end of the breath is moved on by 92 mL of gas "
        "before the next: ",
    ),
    (
        {"site": "humidifier_inlet"},
        "73% of the output is put out while the patient breathes out; the 813 mL "
        "between generator and Y are more than one breath takes in, and output comes "
        "at any time of a later breath: ",
    ),
]


@pytest.mark.parametrize(("columns", "words"), SENTENCES)
def test_one_sentence_says_why(changed, columns, words):
    """Volumes worked by hand: 2 L/min for 2.75 s; 3.80 mL a cm of 22 mm tubing."""
    picture = split_picture(changed(**columns))
    end = f"{picture.inhaled_frac:.0%} would be inhaled if nothing settled."
    assert picture.sentence == words + end


def test_a_leak_is_told(changed):
    picture = split_picture(changed(circuit="single_limb", bias_flow_lpm=25.0))
    # 25 L/min for 1 s beside 480 mL inspired
    assert picture.leak_frac == pytest.approx(417 / (417 + 480), abs=0.005)
    assert "; the leak takes 46% of what arrives in a breath: " in picture.sentence


def test_every_choice_of_site_and_generator_can_be_explained(changed):
    for generator in words_of("generator")[:-1]:
        for site in CHOICE_SITES:
            assert explain(changed(generator=generator, site=site))
