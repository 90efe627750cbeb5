"""A policy that cannot be used says where, what and what it may hold, in one line."""

import copy
import tomllib
from importlib import resources

import pytest

from engine.errors import PolicyInvalid
from engine.policy import load_policy, policy_from

GENERATORS = "jet, breath_enhanced_jet, vibrating_mesh, ultrasonic, pmdi_spacer"
SITES = (
    "ventilator_outlet, humidifier_inlet, humidifier_outlet, inspiratory_limb, wye, "
    "airway_side, expiratory_limb"
)
CLASSES = (
    "bronchodilator, steroid, anti_infective, mucoactive, pulmonary_vasodilator, other"
)
DROP = object()

BAD = {
    "exposure.room_dose_limit_mg": (0, "must be above 0; got 0"),
    "exposure.limit": (
        1.0,
        "is not a setting; allowed are hazardous_drugs, room_dose_limit_mg",
    ),
    "estimate": (
        DROP,
        "is missing",
    ),
    "filters": ("none", "must be a table; got 'none'"),
    "filters.near_limit_frac": (1.5, "must be at most 1; got 1.5"),
    "filters.readings_for_a_trend_count": (5.5, "must be a whole number; got 5.5"),
    "filters.limit_cmh2o_per_lps": ("five", "must be a number; got 'five'"),
    "filters.rising_p": (float("nan"), "must be a finite number; got nan"),
    "filters.hours_by_drug_class.steroid": (-1.0, "must be above 0; got -1.0"),
    "filters.hours_by_drug_class": (
        {"steroid": 24.0},
        f"must give hours for each of {CLASSES}; got steroid",
    ),
    "sensors.unfiltered_since_check_count": (0, "must be at least 1; got 0"),
    "sensors.volume_ratio_tolerance_frac": (1.0, "must be below 1; got 1.0"),
    "shifts.day": ("7 am", "must be a time of day as 07:00; got '7 am'"),
    "records.essential": (
        ["generator", "colour"],
        "must name columns of the treatment table; got 'colour'",
    ),
    "generator_use.output_ml_min.jet": (
        [0.5, 0.1],
        "must rise from at least 0; got 0.5 to 0.1",
    ),
    "generator_use.output_ml_min": (
        {"steam": [0.1, 0.5]},
        f"must be among {GENERATORS}; got 'steam'",
    ),
    "name": ("Our Policy", "must be written as ^[a-z0-9_]+$; got 'Our Policy'"),
    "placement": ([], "must hold at least 1; got ()"),
}
BAD_ROW = {
    "preferred": (["wye", "y"], f"must be among {SITES}; got 'y'"),
    "generator": (["unknown"], f"must be among {GENERATORS}; got 'unknown'"),
    "bias_flow": ("some", "must be 'none' or 'present'; got 'some'"),
    "strength": (
        "strong",
        "must be 'unanimous', 'majority', 'contested' or 'department'; got 'strong'",
    ),
    "evidence": (
        ["OUR_HABIT"],
        "must name works by their key in engine/evidence/sources.py, or begin with "
        "'local'; got 'OUR_HABIT'",
    ),
}
BAD_WHOLE_ROW = {
    "a site twice": ({"acceptable": ["wye"]}, "lists wye more than once"),
    "a band without its site": (
        {"preferred": ["humidifier_inlet"], "acceptable": []},
        "gives distance_from_wye_cm, but the inspiratory_limb is neither preferred nor "
        "acceptable",
    ),
    "contested by nobody": (
        {"strength": "contested"},
        "is contested and must name works in against",
    ),
}


@pytest.fixture
def settings():
    text = resources.files("engine.policy").joinpath("common_practice.toml")
    return tomllib.loads(text.read_text("utf-8"))


def put(settings, dotted, value):
    changed = copy.deepcopy(settings)
    *path, last = dotted.split(".")
    inside = changed
    for step in path:
        inside = inside[step]
    if value is DROP:
        del inside[last]
    else:
        inside[last] = value
    return changed


def row_of(settings, row_id):
    return next(row for row in settings["placement"] if row["id"] == row_id)


def said(settings):
    with pytest.raises(PolicyInvalid) as problem:
        policy_from(settings, "ours.toml")
    return str(problem.value)


@pytest.mark.parametrize("key", BAD)
def test_a_bad_setting_is_named_with_what_it_may_hold(settings, key):
    value, message = BAD[key]
    assert said(put(settings, key, value)) == f"ours.toml: {key} {message}"


@pytest.mark.parametrize("key", BAD_ROW)
def test_a_bad_entry_of_a_placement_row_is_named_by_the_id_of_its_row(settings, key):
    value, message = BAD_ROW[key]
    row_of(settings, "jet-no-bias")[key] = value
    expected = f"ours.toml: placement jet-no-bias.{key} {message}"
    assert said(settings) == expected


@pytest.mark.parametrize("fault", BAD_WHOLE_ROW)
def test_a_row_that_contradicts_itself_is_refused(settings, fault):
    changes, message = BAD_WHOLE_ROW[fault]
    row_of(settings, "jet-no-bias").update(changes)
    assert said(settings) == f"ours.toml: placement jet-no-bias {message}"


def test_two_rows_of_one_id_are_refused(settings):
    settings["placement"].append(copy.deepcopy(settings["placement"][0]))
    expected = "ours.toml: placement must not hold two rows of one id; got 'inhaler'"
    assert said(settings) == expected


def test_the_first_problem_is_told_in_full_and_the_rest_are_counted(settings):
    settings["exposure"]["room_dose_limit_mg"] = 0
    settings["sensors"]["check_interval_h"] = 0
    assert said(settings) == (
        "ours.toml: sensors.check_interval_h must be above 0; got 0 (and 1 more)"
    )


def test_a_department_may_cite_its_own_policy(settings):
    row_of(settings, "jet-no-bias")["evidence"] = ["local policy, section 4"]
    assert policy_from(settings, "ours.toml").placement


def test_a_file_that_is_no_toml_is_named(tmp_path):
    path = tmp_path / "ours.toml"
    path.write_text("name = \n", "utf-8")
    with pytest.raises(PolicyInvalid, match=r"^ours\.toml is not valid TOML: .+line 1"):
        load_policy(path)


@pytest.mark.parametrize("name", ["bench_2025", "no/such/file.toml", "."])
def test_a_policy_that_is_not_there_names_those_that_are(name):
    with pytest.raises(PolicyInvalid) as problem:
        load_policy(name)
    assert str(problem.value) == (
        f"{name} is not a readable policy file; "
        "give a path, or common_practice or bench_2024"
    )
