"""The questions put to every treatment: the face of this room."""

from __future__ import annotations

from engine.errors import UnknownId
from engine.rules.families import (
    exposure,
    filter,
    generator,
    humidity,
    record,
    sensor,
    site,
)
from engine.rules.shape import FAMILIES, Rule

ALL_RULES: tuple[Rule, ...] = (
    *site.RULES,
    *humidity.RULES,
    *generator.RULES,
    *filter.RULES,
    *exposure.RULES,
    *sensor.RULES,
    *record.RULES,
)

# Ids are for life: one given up stays here with the reason and is never used again.
RETIRED: dict[str, str] = {}

_BY_ID = {rule.id: rule for rule in ALL_RULES}


def rule_of(rule_id: str) -> Rule:
    """The rule of that id.

    Raises   UnknownId naming the ids there are, or why the rule was given up.
    """
    if rule_id in RETIRED:
        raise UnknownId(f"rule {rule_id} was given up: {RETIRED[rule_id]}")
    if rule_id not in _BY_ID:
        raise UnknownId(f"no rule {rule_id}; there are {', '.join(_BY_ID)}")
    return _BY_ID[rule_id]


__all__ = ["ALL_RULES", "FAMILIES", "RETIRED", "Rule", "rule_of"]
