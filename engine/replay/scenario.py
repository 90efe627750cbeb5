"""The same log under changed facts or a changed policy.

A scenario is a small TOML file: ``[[fact]]`` entries set one treatment column to one
value, everywhere or where other columns hold given words; ``[policy]`` overrides
settings by their dotted key.
"""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

import duckdb
from pydantic import BaseModel, ConfigDict, Field, ValidationError

from engine.columns import TREATMENT, Column
from engine.errors import PolicyInvalid, ScenarioInvalid
from engine.policy import Policy, policy_from

# Columns that say which treatment it was, not how it was set up.
_FIXED_KINDS = ("id", "token", "time", "text")


class Fact(BaseModel):
    """One changed fact: ``column`` becomes ``value`` where every condition holds."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    column: str
    value: str | float | bool
    where: dict[str, tuple[str, ...]] = {}


class Scenario(BaseModel):
    """A named set of changed facts and policy settings."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    name: str = Field(pattern=r"^[a-z0-9_]+$")
    title: str
    note: str = ""
    fact: tuple[Fact, ...] = ()
    policy: dict[str, Any] = {}


def load_scenario(path: str | Path) -> Scenario:
    """A scenario from its TOML file.

    Raises   ScenarioInvalid naming the file, the entry and what it may hold.
    """
    try:
        settings = tomllib.loads(Path(path).read_text("utf-8"))
    except (OSError, UnicodeDecodeError, tomllib.TOMLDecodeError) as problem:
        raise ScenarioInvalid(f"{Path(path).name} cannot be read: {problem}") from None
    return scenario_from(settings, Path(path).name)


def scenario_from(settings: dict[str, Any], where: str = "scenario") -> Scenario:
    """A scenario from its settings, checked against the log's columns.

    Raises   ScenarioInvalid, as ``load_scenario``.
    """
    try:
        scenario = Scenario.model_validate(settings)
    except ValidationError as problem:
        first = problem.errors()[0]
        key = ".".join(str(part) for part in first["loc"])
        raise ScenarioInvalid(f"{where}: {key} {first['msg']}") from None
    for fact in scenario.fact:
        _check_fact(fact, where)
    return scenario


def changed_policy(policy: Policy, scenario: Scenario | None) -> Policy:
    """The policy with the scenario's settings put in.

    Raises   ScenarioInvalid if a key does not exist or its value does not fit.
    """
    if scenario is None or not scenario.policy:
        return policy
    settings = policy.model_dump(mode="python")
    for dotted, value in scenario.policy.items():
        _put(settings, dotted, value, scenario.name)
    try:
        return policy_from(settings, f"scenario {scenario.name}")
    except PolicyInvalid as problem:
        raise ScenarioInvalid(str(problem)) from None


def apply_facts(cursor: duckdb.DuckDBPyConnection, scenario: Scenario | None) -> None:
    """Puts a view ``treatment`` with the changed facts in front of the logged one."""
    if scenario is None or not scenario.fact:
        return
    parameters: list[Any] = []
    changed: dict[str, str] = {}
    for fact in scenario.fact:
        before = changed.get(fact.column, fact.column)
        changed[fact.column] = _case(fact, before, parameters)
    replaced = ", ".join(f"{sql} AS {column}" for column, sql in changed.items())
    cursor.execute(
        f"CREATE TABLE treatment_changed AS SELECT * REPLACE ({replaced})"
        " FROM treatment",
        parameters,
    )
    cursor.execute("CREATE OR REPLACE VIEW treatment AS FROM treatment_changed")


def _case(fact: Fact, before: str, parameters: list[Any]) -> str:
    column = TREATMENT.column(fact.column)
    clauses = ["true"]
    for name, words in fact.where.items():
        clauses.append(f"list_contains(?, {name}::VARCHAR)")
        parameters.append(list(words))
    parameters.append(None if fact.value == "unknown" else fact.value)
    kind = {
        "word": f"{column.name}_words",
        "yes_no": "BOOLEAN",
        "number": "DOUBLE",
        "count": "DOUBLE",
    }[column.kind]
    when = " AND ".join(clauses)
    return f"CASE WHEN {when} THEN CAST(? AS {kind}) ELSE {before} END"


def _check_fact(fact: Fact, where: str) -> None:
    column = _treatment_column(fact.column, where)
    if column.kind in _FIXED_KINDS:
        raise ScenarioInvalid(f"{where}: {fact.column} is not part of the setup")
    if column.kind == "word":
        _check_words(column, (str(fact.value),), where)
    elif column.kind == "yes_no" and not isinstance(fact.value, bool):
        raise ScenarioInvalid(f"{where}: {fact.column} must be true or false")
    elif column.kind in {"number", "count"}:
        _check_range(column, fact.value, where)
    for name, words in fact.where.items():
        limited = _treatment_column(name, where)
        if limited.kind == "word":
            _check_words(limited, words, where)


def _treatment_column(name: str, where: str) -> Column:
    try:
        return TREATMENT.column(name)
    except KeyError:
        raise ScenarioInvalid(
            f"{where}: {name} is not a column of the treatment table"
        ) from None


def _check_words(column: Column, words: tuple[str, ...], where: str) -> None:
    for word in words:
        if word not in column.words:
            raise ScenarioInvalid(
                f"{where}: {column.name} must be one of {', '.join(column.words)};"
                f" got {word}"
            )


def _check_range(column: Column, value: object, where: str) -> None:
    low, high = column.low, column.high
    is_number = isinstance(value, int | float) and not isinstance(value, bool)
    inside = is_number and low <= value <= high  # type: ignore[operator]
    if not inside:
        raise ScenarioInvalid(
            f"{where}: {column.name} must be from {low:g} to {high:g}; got {value}"
        )


def _put(settings: dict[str, Any], dotted: str, value: Any, name: str) -> None:
    *path, last = dotted.split(".")
    inside: Any = settings
    for part in path:
        inside = inside.get(part) if isinstance(inside, dict) else None
    if not isinstance(inside, dict) or last not in inside:
        raise ScenarioInvalid(f"scenario {name}: the policy has no setting {dotted}")
    inside[last] = value
