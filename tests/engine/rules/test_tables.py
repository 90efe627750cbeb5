"""Every rule against its table of treatments a clinician can read and add to."""

import csv
from collections import Counter
from pathlib import Path

import pytest

from engine.batch import COLUMNS
from engine.columns import ANSWERS
from engine.policy import load_policy
from engine.rules import ALL_RULES, rule_of
from engine.rules.conditions import every_treatment
from engine.rules.wording import ESTIMATES

TABLES = sorted(Path(__file__).parent.glob("*.csv"))


def rows_of(path):
    return list(csv.DictReader(path.read_text("utf-8").splitlines()))


NOTES = ("rule", "expect", "why", "policy")
ROWS = [
    (path.stem, number, row)
    for path in TABLES
    for number, row in enumerate(rows_of(path), start=2)
]
SEEN = Counter((row["rule"], row["expect"]) for _, _, row in ROWS)
# They look at the entry itself, where a blank is an answer: they can always tell.
ALWAYS_TOLD = {"HU03", "RE01", "RE03", "RE05"}


@pytest.mark.parametrize(
    "row",
    [row for _, _, row in ROWS],
    ids=[
        f"{table}.csv:{line} {row['rule']} {row['expect']}" for table, line, row in ROWS
    ],
)
def test_the_rule_answers_as_the_table_says(row, batch):
    policy = load_policy(row.get("policy") or "common_practice")
    answer = rule_of(row["rule"]).answer(batch(row), policy)
    assert ANSWERS[answer[0]] == row["expect"], row["why"]


@pytest.mark.parametrize("row", [row for _, _, row in ROWS], ids=lambda row: row["why"])
def test_a_row_of_the_table_is_complete_and_uses_only_our_words(row):
    assert None not in row, "more cells than heads"
    assert None not in row.values(), "fewer cells than heads"
    assert row["why"].strip()
    assert row["expect"] in ANSWERS
    assert set(row) - set(NOTES) <= set(COLUMNS) | set(ESTIMATES)


@pytest.mark.parametrize("path", TABLES, ids=lambda path: path.name)
def test_a_table_holds_only_columns_its_rules_read(path):
    rows = rows_of(path)
    read = {column for row in rows for column in rule_of(row["rule"]).columns}
    assert set(rows[0]) - set(NOTES) <= read


@pytest.mark.parametrize("rule", ALL_RULES, ids=lambda rule: rule.id)
def test_every_rule_has_a_row_for_each_answer_it_can_give(rule):
    needed = {"fires", "silent"}
    if rule.id not in ALWAYS_TOLD:
        needed.add("cannot_tell")
    if rule.when is not every_treatment and rule.id not in {"PL05", "EX02"}:
        needed.add("not_asked")
    missing = {answer for answer in needed if not SEEN[rule.id, answer]}
    assert not missing


@pytest.mark.parametrize("rule_id", sorted(ALWAYS_TOLD))
def test_a_rule_on_the_entry_itself_can_always_tell(rule_id, batch):
    """Asked of an entry that holds nothing at all."""
    answer = rule_of(rule_id).answer(batch({}), load_policy())
    assert ANSWERS[answer[0]] != "cannot_tell"
