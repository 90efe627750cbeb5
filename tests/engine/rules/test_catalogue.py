"""Every rule is whole: texts, evidence, columns; and a family file holds no sums."""

import ast
import re
from pathlib import Path

import pytest

import engine.rules
from engine.batch import COLUMNS
from engine.errors import UnknownId
from engine.evidence import numbers, sources
from engine.evidence.shape import Number, Source
from engine.policy import load_policy
from engine.rules import ALL_RULES, FAMILIES, RETIRED, rule_of
from engine.rules.contradictions import CONTRADICTIONS
from engine.rules.phrases import PHRASES, fields_of
from engine.rules.wording import ESTIMATES

ROOM = Path(engine.rules.__file__).parent
FAMILY_FILES = sorted(p for p in (ROOM / "families").glob("*.py") if p.stem[0] != "_")
IDS = [rule.id for rule in ALL_RULES]
rules = pytest.mark.parametrize("rule", ALL_RULES, ids=IDS)

# Issued for life: an id may move to RETIRED, never leave, never come back.
ISSUED = (
    *(f"PL0{i}" for i in range(1, 6)),
    *(f"HU0{i}" for i in range(1, 4)),
    *(f"GE0{i}" for i in range(1, 7)),
    *(f"FI0{i}" for i in range(1, 8)),
    *(f"EX0{i}" for i in range(1, 3)),
    *(f"SE0{i}" for i in range(1, 5)),
    *(f"RE0{i}" for i in range(1, 6)),
)
PERSONS = re.compile(
    r"\b(therapist|nurse|staff|operator|clinician|you|your|should|must|wrongly|"
    r"fail(ed|s) to|forgot|careless|mistake)\b",
    re.IGNORECASE,
)


def test_ids_are_unique_and_for_life():
    assert len(set(IDS)) == len(IDS)
    assert not set(IDS) & set(RETIRED)
    assert set(ISSUED) <= set(IDS) | set(RETIRED)
    assert all(reason.strip() for reason in RETIRED.values())


@rules
def test_an_id_is_its_family_and_two_digits(rule):
    assert re.fullmatch(r"[A-Z]{2}\d\d", rule.id)
    assert rule.family in FAMILIES


@rules
def test_every_text_is_there(rule):
    assert rule.question.endswith("?")
    assert not rule.title.endswith((".", "?"))
    assert rule.says.endswith(".")
    assert rule.would_change.endswith(".")
    assert rule.columns


@rules
def test_a_title_names_a_fault_of_the_setup_and_judges_nobody(rule):
    for text in (rule.title, rule.question, rule.says):
        assert not PERSONS.search(text), text
    assert not re.match(r"(use|place|move|change|check|put|fit)\b", rule.title.lower())


@rules
def test_no_figure_stands_in_a_sentence(rule):
    bare = re.sub(r"{[^}]*}", "", rule.says)
    for text in (bare, rule.title, rule.question):
        assert not re.search(r"\d", text), text


@rules
def test_what_a_rule_rests_on_is_on_record(rule):
    known = {*map(id, numbers().values()), *map(id, sources().values())}
    assert rule.evidence
    for item in (*rule.evidence, *rule.against):
        assert isinstance(item, Number | Source)
        assert id(item) in known


@rules
def test_a_contested_rule_names_the_other_side_and_says_so(rule):
    if rule.strength == "contested":
        assert rule.against
        assert "sources differ" in rule.says.lower()


@rules
def test_every_name_in_a_sentence_can_be_filled(rule):
    policy = load_policy()
    for name in fields_of(rule.says):
        if name.startswith("policy."):
            value = policy
            for part in name.split(".")[1:]:
                value = getattr(value, part)
        elif name.isupper():
            assert name in numbers()
            assert numbers()[name] in rule.evidence
        elif name not in PHRASES:
            assert name in rule.columns, name


def test_every_phrase_stands_in_a_sentence():
    used = {name for rule in ALL_RULES for name in fields_of(rule.says)}
    assert set(PHRASES) <= used


class Watched(dict):
    """A batch that remembers what was read."""

    def __init__(self, rows):
        super().__init__(rows)
        self.read = set()

    def __getitem__(self, name):
        self.read.add(name)
        return super().__getitem__(name)


@pytest.mark.parametrize("policy", ["common_practice", "bench_2024"])
@rules
def test_a_rule_names_every_column_it_reads(rule, policy, batch):
    rows = Watched(batch({}))
    rule.answer(rows, load_policy(policy))
    assert rows.read <= set(rule.columns)


@rules
def test_its_columns_are_declared(rule):
    assert set(rule.columns) <= set(COLUMNS) | set(ESTIMATES)


def test_rules_are_found_by_id():
    assert rule_of("FI01").title == "No filter in the expiratory limb"
    with pytest.raises(UnknownId) as problem:
        rule_of("XX99")
    assert str(problem.value) == f"no rule XX99; there are {', '.join(IDS)}"


@pytest.mark.parametrize("path", FAMILY_FILES, ids=lambda path: path.stem)
def test_a_family_file_holds_named_conditions_only(path):
    """No comparison, sum, number, membership test or function of its own."""
    tree = ast.parse(path.read_text("utf-8"))
    forbidden = (
        ast.Compare,
        ast.BinOp,
        ast.BoolOp,
        ast.UnaryOp,
        ast.Lambda,
        ast.FunctionDef,
        ast.Subscript,
        ast.IfExp,
    )
    for node in ast.walk(tree):
        assert not isinstance(node, forbidden), ast.dump(node)
        if isinstance(node, ast.Attribute):
            assert node.attr != "isin"
        if isinstance(node, ast.Constant):
            assert isinstance(node.value, str), node.value


@pytest.mark.parametrize("path", FAMILY_FILES, ids=lambda path: path.stem)
def test_a_rule_stands_in_its_tuple_and_under_its_own_name(path):
    tree = ast.parse(path.read_text("utf-8"))
    made = {}
    for node in tree.body:
        if isinstance(node, ast.Assign) and isinstance(node.value, ast.Call):
            made[node.targets[0].id] = next(
                word.value.value for word in node.value.keywords if word.arg == "id"
            )
    assert all(name == rule_id for name, rule_id in made.items())
    assert set(made) <= set(IDS)


@pytest.mark.parametrize("path", sorted(ROOM.rglob("*.py")), ids=lambda p: p.stem)
def test_no_figure_and_no_two_valued_membership_hides_in_the_room(path):
    tree = ast.parse(path.read_text("utf-8"))
    for node in ast.walk(tree):
        if isinstance(node, ast.Attribute):
            assert node.attr != "isin"
        is_float = isinstance(node, ast.Constant) and isinstance(node.value, float)
        if is_float and path.stem != "wording":  # it rounds what it shows
            assert node.value == 0.0


def test_each_contradiction_is_named_once_and_has_its_words():
    assert len({condition.__name__ for condition in CONTRADICTIONS}) == len(
        CONTRADICTIONS
    )
    assert len(set(CONTRADICTIONS.values())) == len(CONTRADICTIONS)
