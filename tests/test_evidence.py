"""A number lives once, with its unit in its name and its source beside it."""

import ast
import re
from pathlib import Path

import pytest

from engine import evidence
from engine.evidence.shape import Number

ROOT = Path(__file__).parent.parent
NUMBERS = evidence.numbers()
SOURCES = evidence.sources()
CODE = "\n".join(
    path.read_text("utf-8")
    for folder in ("engine", "reviewapp")
    for path in (ROOT / folder).rglob("*.py")
)


@pytest.mark.parametrize("name", NUMBERS)
def test_the_name_ends_in_the_unit(name):
    number = NUMBERS[name]
    assert name == name.upper()
    assert name.lower().endswith(f"_{number.unit}"), number.unit


@pytest.mark.parametrize("name", NUMBERS)
def test_the_number_says_where_it_stands_and_how_it_is_known(name):
    number = NUMBERS[name]
    assert number.where.strip()
    assert number.source in SOURCES.values()
    if number.source.key == "COMMON_PRACTICE":
        assert number.known == "common practice"
    if number.low is not None and number.high is not None:
        assert number.low <= number.high
        assert isinstance(number.value, tuple) or (
            number.low <= number.value <= number.high
        )


@pytest.mark.parametrize("name", NUMBERS)
def test_every_number_is_used(name):
    mentions = re.findall(rf"\b{name}\b", CODE)
    assert len(mentions) > 1, f"{name} is defined and never read"


def test_no_number_hides_outside_the_evidence():
    """A ``Number`` made elsewhere would be a second home."""
    for folder in ("engine", "reviewapp"):
        for path in (ROOT / folder).rglob("*.py"):
            if "evidence" in path.parts:
                continue
            tree = ast.parse(path.read_text("utf-8"))
            made = [
                node
                for node in ast.walk(tree)
                if isinstance(node, ast.Call)
                and isinstance(node.func, ast.Name)
                and node.func.id == Number.__name__
            ]
            assert not made, path


def test_every_source_is_complete():
    for source in SOURCES.values():
        assert source.title.strip()
        assert source.authors.strip()
        if source.known == "read":
            assert source.address or source.journal, source.key
