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

from engine.columns import TREATMENT, UNKNOWN, Column
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
        settings = tomllib.loads(Path(path).read_text("utf-8-sig"))
    except (OSError, ValueError, RecursionError) as problem:
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
    except RecursionError:
        raise ScenarioInvalid(f"{where}: nested too deep") from None
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
    changed: dict[str, tuple[str, list[Any]]] = {}
    for fact in scenario.fact:
        before = changed.get(fact.column, (fact.column, []))
        changed[fact.column] = _case(fact, *before)
    replaced = ", ".join(f"{sql} AS {column}" for column, (sql, _) in changed.items())
    cursor.execute(
        f"CREATE TABLE treatment_changed AS SELECT * REPLACE ({replaced})"
        " FROM treatment",
        [value for _, values in changed.values() for value in values],
    )
    cursor.execute("CREATE OR REPLACE VIEW treatment AS FROM treatment_changed")


def _case(fact: Fact, before: str, of_before: list[Any]) -> tuple[str, list[Any]]:
    """SQL of the changed column and its values, in the order they stand in it."""
    column = TREATMENT.column(fact.column)
    clauses = ["true"]
    values: list[Any] = []
    for name, words in fact.where.items():
        clauses.append(f"list_contains(?, {in_words(TREATMENT.column(name))})")
        values.append(list(words))
    values.append(None if fact.value == UNKNOWN else fact.value)
    kind = {
        "word": f"{column.name}_words",
        "yes_no": "BOOLEAN",
        "number": "DOUBLE",
        "count": "DOUBLE",
    }[column.kind]
    when = " AND ".join(clauses)
    case = f"CASE WHEN {when} THEN CAST(? AS {kind}) ELSE {before} END"
    return case, [*values, *of_before]


def in_words(column: Column) -> str:
    """SQL of a column as its word, so that what was not logged can be asked for."""
    if column.kind == "yes_no":
        told = f"CASE {column.name} WHEN true THEN 'yes' WHEN false THEN 'no' END"
    else:
        told = f"{column.name}::VARCHAR"
    return f"coalesce({told}, '{UNKNOWN}')"


def _check_fact(fact: Fact, where: str) -> None:
    column = _treatment_column(fact.column, where)
    if column.kind in _FIXED_KINDS:
        raise ScenarioInvalid(f"{where}: {fact.column} is not part of the setup")
    if fact.value != UNKNOWN:
        _check_value(column, fact.value, where)
    for name, words in fact.where.items():
        limited = _treatment_column(name, where)
        if limited.kind not in {"word", "yes_no"}:
            raise ScenarioInvalid(
                f"{where}: where.{name} must be a column of words or of yes and no"
            )
        _check_words(limited, words, where)


def _check_value(column: Column, value: object, where: str) -> None:
    if column.kind == "word":
        _check_words(column, (str(value),), where)
    elif column.kind == "yes_no" and not isinstance(value, bool):
        raise ScenarioInvalid(f"{where}: {column.name} must be true or false")
    elif column.kind in {"number", "count"}:
        _check_range(column, value, where)


def _treatment_column(name: str, where: str) -> Column:
    try:
        return TREATMENT.column(name)
    except KeyError:
        raise ScenarioInvalid(
            f"{where}: {name} is not a column of the treatment table"
        ) from None


def _check_words(column: Column, words: tuple[str, ...], where: str) -> None:
    known = column.words or ("yes", "no")
    for word in words:
        if word not in known and word != UNKNOWN:
            raise ScenarioInvalid(
                f"{where}: {column.name} must be one of {', '.join(known)}; got {word}"
            )


def _check_range(column: Column, value: object, where: str) -> None:
    low, high = column.low, column.high
    is_number = isinstance(value, int | float) and not isinstance(value, bool)
    inside = is_number and low <= value <= high  # type: ignore[operator]
    whole = column.kind != "count" or (is_number and float(value) % 1 == 0)  # type: ignore[arg-type]
    if not inside or not whole:
        what = "a whole number from" if column.kind == "count" else "from"
        raise ScenarioInvalid(
            f"{where}: {column.name} must be {what} {low:g} to {high:g}; got {value}"
        )


def _put(settings: dict[str, Any], dotted: str, value: Any, name: str) -> None:
    *path, last = dotted.split(".")
    inside: Any = settings
    for part in path:
        inside = inside.get(part) if isinstance(inside, dict) else None
    if not isinstance(inside, dict) or last not in inside:
        raise ScenarioInvalid(f"scenario {name}: the policy has no setting {dotted}")
    inside[last] = value
