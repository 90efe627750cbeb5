"""The department's own rules and limits: what a policy file may say.

A policy is a TOML file. Two ship beside this module; a department copies one, edits
it and opens it by path. Its hash stands on every report, so that two months judged by
different policies are never mistaken for a change in practice.
"""

from __future__ import annotations

import hashlib
import tomllib
from importlib import resources
from pathlib import Path
from typing import Annotated, Any

from pydantic import Field, ValidationError, field_validator

from engine.errors import PolicyInvalid
from engine.policy.complaints import complaint
from engine.policy.sections import (
    Cells,
    Estimate,
    Exposure,
    FilterLimits,
    GeneratorUse,
    PlacementRow,
    Records,
    Sensors,
    Shifts,
    Strict,
)

SHIPPED = ("common_practice", "bench_2024")


class Policy(Strict):
    """Everything a department decides; nothing else in the engine has opinions."""

    name: str = Field(pattern=r"^[a-z0-9_]+$")
    title: str
    note: str = ""
    weights: dict[str, Annotated[float, Field(ge=0)]] = Field(default_factory=dict)
    shifts: Shifts
    cells: Cells
    records: Records
    estimate: Estimate
    filters: FilterLimits
    sensors: Sensors
    exposure: Exposure
    generator_use: GeneratorUse
    placement: tuple[PlacementRow, ...] = Field(min_length=1, max_length=60)

    @field_validator("placement")
    @classmethod
    def _ids_once(cls, value: tuple[PlacementRow, ...]) -> tuple[PlacementRow, ...]:
        ids = [row.id for row in value]
        twice = sorted({each for each in ids if ids.count(each) > 1})
        if twice:
            raise ValueError(f"must not hold two rows of one id; got {twice[0]!r}")
        return value

    @property
    def hash(self) -> str:
        """Twelve characters that change whenever any setting does."""
        text = self.model_dump_json()
        return hashlib.sha256(text.encode()).hexdigest()[:12]


def load_policy(name_or_path: str | Path = "common_practice") -> Policy:
    """A shipped policy by its name, or a department's own by its path.

    Raises   PolicyInvalid naming the file, the key and what it may hold.
    """
    where, text = _text_of(name_or_path)
    try:
        return policy_from(tomllib.loads(text), where)
    except RecursionError:
        raise PolicyInvalid(f"{where} is not valid TOML: nested too deep") from None
    except ValueError as problem:
        raise PolicyInvalid(f"{where} is not valid TOML: {problem}") from None


def policy_from(settings: dict[str, Any], where: str) -> Policy:
    """A policy from its settings; ``where`` is named in any complaint.

    Raises   PolicyInvalid, as ``load_policy``.
    """
    try:
        return Policy.model_validate(_tuples(settings))
    except ValidationError as problem:
        said = complaint(problem.errors(), settings, Policy)
        raise PolicyInvalid(f"{where}: {said}") from None


def _text_of(name_or_path: str | Path) -> tuple[str, str]:
    if str(name_or_path) in SHIPPED:
        name = f"{name_or_path}.toml"
        return name, resources.files(__package__).joinpath(name).read_text("utf-8")
    try:
        return Path(name_or_path).name, Path(name_or_path).read_text("utf-8-sig")
    except (OSError, ValueError):
        names = " or ".join(SHIPPED)
        raise PolicyInvalid(
            f"{name_or_path} is not a readable policy file; give a path, or {names}"
        ) from None


def _tuples(value: Any) -> Any:
    """TOML arrays as tuples: a policy is frozen all the way down."""
    if isinstance(value, list | tuple):
        return tuple(_tuples(item) for item in value)
    if isinstance(value, dict):
        return {key: _tuples(item) for key, item in value.items()}
    return value
