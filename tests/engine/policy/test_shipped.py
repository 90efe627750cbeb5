"""The two policies that ship, against the facts of the trade they are to hold.

Source   common practice, no source, unless a comment says otherwise.
"""

from importlib import resources

import pytest

from engine.columns import DRUG_CLASSES
from engine.policy import load_policy
from engine.units import CM_PER_IN

SHIPPED = ("common_practice", "bench_2024")


def row(policy, row_id):
    return {each.id: each for each in load_policy(policy).placement}[row_id]


@pytest.mark.parametrize("name", SHIPPED)
def test_a_shipped_policy_loads_under_its_own_name(name):
    assert load_policy(name).name == name


def test_the_two_policies_differ_and_their_hashes_say_so():
    first, second = (load_policy(name) for name in SHIPPED)
    assert first.hash != second.hash
    assert first.placement != second.placement


def test_a_hash_changes_with_any_setting_and_with_nothing_else():
    policy = load_policy()
    assert policy.hash == load_policy().hash
    louder = policy.exposure.model_copy(update={"room_dose_limit_mg": 2.0})
    assert policy.model_copy(update={"exposure": louder}).hash != policy.hash


def test_a_jet_without_bias_flow_goes_18_to_24_inches_from_the_patient():
    """Printed in whole inches; the table holds whole centimetres."""
    low, high = row("common_practice", "jet-no-bias").distance_from_wye_cm
    assert low == pytest.approx(18 * CM_PER_IN, abs=0.5)
    assert high == pytest.approx(24 * CM_PER_IN, abs=0.5)
    assert row("common_practice", "jet-no-bias").preferred == ("inspiratory_limb",)


@pytest.mark.parametrize("name", ["mesh-no-bias", "ultrasonic-no-bias", "inhaler"])
def test_without_bias_flow_the_others_go_near_the_y(name):
    assert "inspiratory_limb" in row("common_practice", name).preferred
    assert "ventilator_outlet" in row("common_practice", name).discordant


@pytest.mark.parametrize("name", ["mesh-bias", "ultrasonic-bias"])
def test_with_bias_flow_mesh_and_ultrasonic_go_towards_the_ventilator(name):
    assert "humidifier_inlet" in row("common_practice", name).preferred
    assert "wye" in row("common_practice", name).discordant


def test_in_pressure_control_and_aprv_a_mesh_goes_to_the_humidifier_inlet():
    held = row("common_practice", "mesh-pressure-control")
    assert held.preferred == ("humidifier_inlet",)
    assert held.mode == ("pcv", "aprv")
    assert held.bias_flow is None


def test_where_sources_differ_the_row_says_so_and_names_the_other_side():
    """HOU_2022, abstract: inlet the lowest mesh position at 2 L/min, limb the best."""
    held = row("common_practice", "mesh-bias")
    other = row("bench_2024", "mesh-bias")
    assert held.strength == other.strength == "contested"
    assert "HOU_2022" in held.against
    assert "HOU_2022" in other.evidence
    assert other.preferred == ("inspiratory_limb",)


@pytest.mark.parametrize("name", SHIPPED)
def test_the_expiratory_limb_is_discordant_in_every_row(name):
    for each in load_policy(name).placement:
        assert "expiratory_limb" in each.discordant, each.id


@pytest.mark.parametrize("name", SHIPPED)
def test_every_row_says_what_it_rests_on(name):
    for each in load_policy(name).placement:
        assert each.note, each.id
        assert bool(each.against) == bool(each.against_note), each.id


def test_anti_infectives_get_a_new_filter_each_time_and_vasodilators_within_4_h():
    """ESCMID_2017 and ANESTHESIOLOGY_2017, both read; the rest common practice."""
    hours = load_policy().filters.hours_by_drug_class
    assert hours["anti_infective"] <= 1.0
    assert 2.0 <= hours["pulmonary_vasodilator"] <= 4.0
    assert hours["bronchodilator"] == 24.0
    assert set(hours) == set(DRUG_CLASSES.split())


def test_a_department_can_copy_a_shipped_file_and_open_it_by_path(tmp_path):
    text = resources.files("engine.policy").joinpath("common_practice.toml")
    copy = tmp_path / "ours.toml"
    copy.write_text(
        text.read_text("utf-8").replace(
            "limit_cmh2o_per_lps = 5.0", "limit_cmh2o_per_lps = 4.0"
        ),
        "utf-8",
    )
    assert load_policy(copy).filters.limit_cmh2o_per_lps == 4.0
    assert load_policy(copy).hash != load_policy().hash
