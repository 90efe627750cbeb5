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
from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Field, ValidationError, field_validator

from engine.columns import CHOICE_SITES, DRUG_CLASSES, SITES, TREATMENT, words_of
from engine.errors import PolicyInvalid

Strength = Literal["unanimous", "majority", "contested", "department"]
BiasFlow = Literal["none", "present"]
SHIPPED = ("common_practice", "bench_2024")


class _Strict(BaseModel):
    model_config = ConfigDict(
        strict=True, extra="forbid", frozen=True, allow_inf_nan=False
    )


def _allowed(column: str) -> Any:
    words = words_of(column)

    def check(value: tuple[str, ...]) -> tuple[str, ...]:
        wrong = [word for word in value if word not in words]
        if wrong:
            raise ValueError(f"{wrong[0]!r} is not one of {', '.join(words)}")
        return value

    return check


class PlacementRow(_Strict):
    """One row of the placement table: a situation, and what its sites count as.

    An empty situation field matches everything. Rows are read from the top; the
    first that matches decides.
    """

    id: str
    generator: tuple[str, ...]
    synchrony: tuple[str, ...] = ()
    bias_flow: BiasFlow | None = None
    humidification: tuple[str, ...] = ()
    mode: tuple[str, ...] = ()
    circuit: tuple[str, ...] = ()
    preferred: tuple[str, ...] = Field(min_length=1)
    acceptable: tuple[str, ...] = ()
    discordant: tuple[str, ...] = ()
    distance_from_wye_cm: tuple[float, float] | None = None
    strength: Strength
    evidence: tuple[str, ...] = Field(min_length=1)
    note: str = ""

    @field_validator("generator", "synchrony", "humidification", "mode", "circuit")
    @classmethod
    def _known_words(cls, value: tuple[str, ...], info: Any) -> tuple[str, ...]:
        return _allowed(info.field_name)(value)

    @field_validator("preferred", "acceptable", "discordant")
    @classmethod
    def _known_sites(cls, value: tuple[str, ...]) -> tuple[str, ...]:
        return _allowed("site")(value)


class FilterLimits(_Strict):
    """When the department changes an expiratory filter; no published level exists."""

    limit_cmh2o_per_lps: float = Field(gt=0)
    near_limit_frac: float = Field(gt=0, le=1)
    reference_flow_lpm: float = Field(gt=0)
    same_flow_within_frac: float = Field(gt=0, lt=1)
    reading_window_h: float = Field(gt=0)
    readings_for_a_trend_count: int = Field(ge=5)
    rising_p: float = Field(gt=0, lt=1)
    unlogged_change_p: float = Field(gt=0, lt=1)
    hours_by_drug_class: dict[str, float]
    hours_by_drug: dict[str, float] = {}

    @field_validator("hours_by_drug_class")
    @classmethod
    def _every_class(cls, value: dict[str, float]) -> dict[str, float]:
        missing = set(DRUG_CLASSES.split()) - set(value)
        extra = set(value) - set(words_of("drug_class"))
        if missing or extra:
            allowed = ", ".join(DRUG_CLASSES.split())
            raise ValueError(f"needs hours for each of {allowed}")
        return value


class Exposure(_Strict):
    """What counts as a hazardous drug, and how much reaching the room is too much."""

    hazardous_drugs: tuple[str, ...]
    room_dose_limit_mg: float = Field(gt=0)


class Sensors(_Strict):
    """Limits for the expiratory sensors and the checks they are due."""

    unfiltered_since_check_count: int = Field(ge=1)
    check_interval_h: float = Field(gt=0)
    volume_ratio_tolerance_frac: float = Field(gt=0, lt=1)
    drift_weight: float = Field(gt=0, le=1)
    drift_limit_sd: float = Field(gt=0)
    fault_soon_after_h: float = Field(gt=0)
    clock_offset_limit_s: float = Field(gt=0)


class GeneratorUse(_Strict):
    """How each generator is expected to be run."""

    output_ml_min: dict[str, tuple[float, float]]
    jet_smallest_fill_ml: float = Field(gt=0)
    unsuited: tuple[UnsuitedPair, ...] = ()


class UnsuitedPair(_Strict):
    """A drug that should not go into a generator, and who says so."""

    drug: str
    generator: str
    evidence: tuple[str, ...] = Field(min_length=1)
    strength: Strength
    note: str = ""


class Estimate(_Strict):
    """How far apart two estimates must lie before a difference is shown."""

    no_difference_ratio: float = Field(gt=1)
    most_assumptions_count: int = Field(ge=0)


class Records(_Strict):
    """Which fields every treatment should have, and when a late start counts."""

    essential: tuple[str, ...] = Field(min_length=1)
    longest_run_min: float = Field(gt=0)
    unknown_share_caution_frac: float = Field(gt=0, lt=1)

    @field_validator("essential")
    @classmethod
    def _known_columns(cls, value: tuple[str, ...]) -> tuple[str, ...]:
        names = {column.name for column in TREATMENT.columns}
        wrong = [name for name in value if name not in names]
        if wrong:
            raise ValueError(f"{wrong[0]!r} is not a column of the treatment table")
        return value


class Cells(_Strict):
    """Smallest groups that may be shown, so that no one person can be read off."""

    treatments_count: int = Field(ge=1)
    patients_count: int = Field(ge=1)
    percent_needs_count: int = Field(ge=1)
    shared_smallest_count: int = Field(ge=1)


ClockTime = Annotated[str, Field(pattern=r"^([01]\d|2[0-3]):[0-5]\d$")]


class Shifts(_Strict):
    """When each shift begins, local time."""

    day: ClockTime
    evening: ClockTime
    night: ClockTime


class Policy(_Strict):
    """Everything a department decides; nothing else in the engine has opinions."""

    name: str = Field(pattern=r"^[a-z0-9_]+$")
    title: str
    note: str = ""
    weights: dict[str, float] = {}
    shifts: Shifts
    cells: Cells
    records: Records
    estimate: Estimate
    filters: FilterLimits
    sensors: Sensors
    exposure: Exposure
    generator_use: GeneratorUse
    placement: tuple[PlacementRow, ...] = Field(min_length=1)

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
        settings = tomllib.loads(text)
    except tomllib.TOMLDecodeError as problem:
        raise PolicyInvalid(f"{where} is not valid TOML: {problem}") from None
    return policy_from(settings, where)


def policy_from(settings: dict[str, Any], where: str) -> Policy:
    """A policy from its settings; ``where`` is named in any complaint.

    Raises   PolicyInvalid, as ``load_policy``.
    """
    try:
        return Policy.model_validate(_tuples(settings))
    except ValidationError as problem:
        raise PolicyInvalid(f"{where}: {_first(problem)}") from None


def _text_of(name_or_path: str | Path) -> tuple[str, str]:
    if str(name_or_path) in SHIPPED:
        name = f"{name_or_path}.toml"
        return name, resources.files(__package__).joinpath(name).read_text("utf-8")
    try:
        return Path(name_or_path).name, Path(name_or_path).read_text("utf-8")
    except (OSError, UnicodeDecodeError):
        names = " or ".join(SHIPPED)
        raise PolicyInvalid(
            f"{name_or_path} is not a readable policy file; give a path, or {names}"
        ) from None


def _tuples(value: Any) -> Any:
    """TOML arrays as tuples: a policy is frozen all the way down."""
    if isinstance(value, list):
        return tuple(_tuples(item) for item in value)
    if isinstance(value, dict):
        return {key: _tuples(item) for key, item in value.items()}
    if isinstance(value, int) and not isinstance(value, bool):
        return value
    return value


def _first(problem: ValidationError) -> str:
    error = problem.errors()[0]
    key = ".".join(str(part) for part in error["loc"])
    rest = len(problem.errors()) - 1
    more = f" (and {rest} more)" if rest else ""
    return f"{key} {error['msg']}; got {error['input']!r}{more}"


__all__ = ["CHOICE_SITES", "SITES", "Policy", "load_policy", "policy_from"]
