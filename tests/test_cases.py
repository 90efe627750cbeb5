"""Every case: what must be said is said, and what must not be said is not."""

import pytest

import cases
from engine import load_policy, open_log, replay
from engine.columns import ANSWERS
from engine.reviews.incident import review_incident
from engine.reviews.month import months_of
from engine.rules import ALL_RULES

CASES = [case.name for case in cases.all_cases()]
RULES = {rule.id for rule in ALL_RULES}


@pytest.fixture(scope="module")
def replays(tmp_path_factory):
    """Each case's log replayed once under common practice."""
    folder = tmp_path_factory.mktemp("cases")
    opened = {}

    def one(name):
        if name not in opened:
            path = cases.write_case(name, folder / f"{name}.duckdb")
            with open_log(path) as log:
                opened[name] = replay(log, load_policy())
        return opened[name]

    yield one
    for each in opened.values():
        each.close()


def said(done, about, what):
    """What the program says of one thing; for a rule, its answer."""
    if about.startswith("filter "):
        found = done.frame(
            "SELECT state FROM filter_life WHERE filter_id = $id",
            {"id": about.removeprefix("filter ")},
        )
        return found["state"].iloc[0]
    if about.startswith("incident "):
        review = review_incident(done, about.removeprefix("incident "))
        return {e.id: e.grade for e in review.explanations}[what].replace(" ", "_")
    if about.startswith("month "):
        months = months_of(done).set_index("local_month")
        return str(months.loc[about.removeprefix("month "), what])
    answers = done.frame(
        f'SELECT "{what}" AS a FROM answer WHERE treatment_id = $id', {"id": about}
    )
    assert len(answers) == 1, f"no treatment {about}"
    return answers["a"].iloc[0]


def statements():
    return [
        pytest.param(name, row, id=f"{name}-{row['about']}-{row['id']}-{row['say']}")
        for name in CASES
        for row in cases.expected(name).to_dict("records")
    ]


@pytest.mark.parametrize(("name", "row"), statements())
def test_what_the_case_asks_for(replays, name, row):
    found = said(replays(name), row["about"], row["id"])
    if row["say"] == "must":
        assert found == row["what"], row["why"]
    else:
        assert found != row["what"], row["why"]


def test_there_are_enough_cases_and_each_is_whole():
    assert len(CASES) >= 8
    for name in CASES:
        story = cases.case_of(name).story
        rows = cases.expected(name)
        assert "must not be said" in story, name
        assert set(rows["say"]) == {"must", "must_not"}, name
        assert (rows["why"] != "").all(), name


def test_every_statement_names_a_rule_and_an_answer_there_is():
    for name in CASES:
        for row in cases.expected(name).to_dict("records"):
            if " " not in row["about"]:
                assert row["id"] in RULES, (name, row)
                assert row["what"] in ANSWERS, (name, row)


def test_every_family_of_rules_has_a_case():
    named = {
        row["id"][:2]
        for name in CASES
        for row in cases.expected(name).to_dict("records")
        if row["id"] in RULES
    }
    assert named == {rule.family for rule in ALL_RULES}


def test_no_row_of_a_case_is_refused(replays):
    for name in CASES:
        accounts = replays(name).log.accounts()
        assert accounts["rows_refused"].sum() == 0, name
