"""A scenario changes facts or policy, and says clearly what it cannot change."""

import pytest

from engine.errors import ScenarioInvalid
from engine.policy import load_policy
from engine.replay import load_scenario, replay, scenario_from

from .conftest import treatments

POLICY = load_policy()


def scenario(**settings):
    return scenario_from({"name": "trial", "title": "Trial", **settings})


def test_a_changed_fact_is_what_the_rules_see(logged):
    log = logged(treatment=treatments(2, expiratory_filter=["absent", "absent"]))
    fitted = scenario(fact=[{"column": "expiratory_filter", "value": "present"}])
    before, after = replay(log, POLICY), replay(log, POLICY, fitted)
    ask = "SELECT count(*) AS n FROM finding WHERE rule_id = 'FI01'"
    assert before.frame(ask)["n"][0] == 2
    assert after.frame(ask)["n"][0] == 0
    assert after.stamp["scenario"] == "trial"
    assert log.frame("SELECT expiratory_filter FROM treatment").iloc[0, 0] == "absent"


def test_a_condition_limits_where_the_fact_changes(logged):
    rows = treatments(3, generator=["jet", "vibrating_mesh", None])
    moved = scenario(
        fact=[
            {
                "column": "site",
                "value": "wye",
                "where": {"generator": ["vibrating_mesh"]},
            }
        ]
    )
    after = replay(logged(treatment=rows), POLICY, moved)
    sites = after.frame("SELECT site::VARCHAR AS s FROM treatment ORDER BY ALL")["s"]
    assert sorted(sites) == ["humidifier_inlet", "humidifier_inlet", "wye"]


def test_a_fact_can_be_made_unknown(logged):
    hidden = scenario(fact=[{"column": "generator", "value": "unknown"}])
    after = replay(logged(treatment=treatments(1)), POLICY, hidden)
    assert after.frame("SELECT PL01 FROM answer").iloc[0, 0] == "cannot_tell"


def test_a_changed_limit_changes_the_policy_hash(logged):
    stricter = scenario(policy={"filters.limit_cmh2o_per_lps": 3.0})
    after = replay(logged(treatment=treatments(1)), POLICY, stricter)
    assert after.policy.filters.limit_cmh2o_per_lps == 3.0
    assert after.policy.hash != POLICY.hash


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        (
            {"fact": [{"column": "colour", "value": "red"}]},
            "scenario: colour is not a column of the treatment table",
        ),
        (
            {"fact": [{"column": "site", "value": "ceiling"}]},
            "scenario: site must be one of ventilator_outlet, humidifier_inlet, "
            "humidifier_outlet, inspiratory_limb, wye, airway_side, "
            "expiratory_limb, unknown; got ceiling",
        ),
        (
            {"fact": [{"column": "treatment_id", "value": "x"}]},
            "scenario: treatment_id is not part of the setup",
        ),
        (
            {"fact": [{"column": "bias_flow_lpm", "value": -2}]},
            "scenario: bias_flow_lpm must be from 0 to 60; got -2.0",
        ),
        (
            {"fact": [{"column": "heated_humidifier_on", "value": "off"}]},
            "scenario: heated_humidifier_on must be true or false",
        ),
    ],
)
def test_a_scenario_that_does_not_fit_says_what_and_where(settings, message):
    with pytest.raises(ScenarioInvalid) as problem:
        scenario(**settings)
    assert str(problem.value) == message


def test_an_unknown_policy_setting_is_named(logged):
    wrong = scenario(policy={"filters.colour": 1})
    with pytest.raises(ScenarioInvalid) as problem:
        replay(logged(treatment=treatments(1)), POLICY, wrong)
    assert str(problem.value) == (
        "scenario trial: the policy has no setting filters.colour"
    )


def test_a_file_that_is_not_toml_is_one_clear_line(tmp_path):
    path = tmp_path / "broken.toml"
    path.write_text("name = ")
    with pytest.raises(ScenarioInvalid, match=r"^broken.toml cannot be read: "):
        load_scenario(path)


def test_two_facts_on_one_column_keep_their_own_values(logged):
    rows = treatments(
        3,
        generator=["jet", "vibrating_mesh", None],
        circuit=["dual_limb", "dual_limb", "single_limb"],
    )
    moved = scenario(
        fact=[
            {
                "column": "site",
                "value": "airway_side",
                "where": {"generator": ["vibrating_mesh", "jet"]},
            },
            {
                "column": "site",
                "value": "wye",
                "where": {"circuit": ["single_limb"]},
            },
            {"column": "bias_flow_lpm", "value": 5.0},
            {
                "column": "bias_flow_lpm",
                "value": 9.0,
                "where": {"generator": ["unknown"]},
            },
            {"column": "peak_inspiratory_flow_lpm", "value": "unknown"},
        ]
    )
    after = replay(logged(treatment=rows), POLICY, moved)
    found = after.frame(
        "SELECT generator::VARCHAR AS generator, site::VARCHAR AS site,"
        " bias_flow_lpm, peak_inspiratory_flow_lpm AS peak FROM treatment"
    )
    by_generator = found.set_index(found["generator"].fillna("none"))
    assert by_generator["site"].to_dict() == {
        "jet": "airway_side",
        "vibrating_mesh": "airway_side",
        "none": "wye",
    }
    assert by_generator["bias_flow_lpm"].to_dict() == {
        "jet": 5.0,
        "vibrating_mesh": 5.0,
        "none": 9.0,
    }
    assert by_generator["peak"].isna().all()


@pytest.mark.parametrize(
    ("fact", "message"),
    [
        ({"column": "actuations_count", "value": 1.5}, "must be a whole number from"),
        (
            {"column": "site", "value": "wye", "where": {"bias_flow_lpm": ["2"]}},
            "must be a column of words or of yes and no",
        ),
        (
            {"column": "site", "value": "wye", "where": {"spontaneous_breaths": ["x"]}},
            "spontaneous_breaths must be one of yes, no; got x",
        ),
    ],
)
def test_a_fact_that_could_never_hold_is_refused(fact, message):
    with pytest.raises(ScenarioInvalid, match=message):
        scenario(fact=[fact])


def test_a_file_nested_too_deep_is_one_clear_line(tmp_path):
    path = tmp_path / "deep.toml"
    path.write_text("a = " + "[" * 5000 + "]" * 5000)
    with pytest.raises(ScenarioInvalid, match=r"^deep.toml cannot be read: "):
        load_scenario(path)
