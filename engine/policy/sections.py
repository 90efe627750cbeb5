"""The sections of a policy: what each setting may hold."""

from __future__ import annotations

import re
from collections.abc import Iterable
from typing import Annotated, Any, Literal

from pydantic import (
    AfterValidator,
    BaseModel,
    ConfigDict,
    Field,
    field_validator,
    model_validator,
)

from engine.columns import DRUG_CLASSES, TREATMENT, words_of
from engine.evidence import sources

Strength = Literal["unanimous", "majority", "contested", "department"]
BiasFlow = Literal["none", "present"]


MOST_COUNT = 10_000_000  # beyond any department, and safely a whole number


class Strict(BaseModel):
    model_config = ConfigDict(
        strict=True, extra="forbid", frozen=True, allow_inf_nan=False
    )


def _only(column: str, given: Iterable[str]) -> None:
    """Raises ValueError unless every word is one the column allows."""
    words = words_of(column)[:-1]
    for word in given:
        if word not in words:
            raise ValueError(f"must be among {', '.join(words)}; got {word!r}")


def _cited(given: tuple[str, ...]) -> tuple[str, ...]:
    """Raises ValueError unless each entry is a known work or the department's own."""
    for entry in given:
        if entry not in sources() and not entry.startswith("local"):
            raise ValueError(
                "must name works by their key in engine/evidence/sources.py, or begin "
                f"with 'local'; got {entry!r}"
            )
    return given


Evidence = Annotated[tuple[str, ...], Field(min_length=1), AfterValidator(_cited)]
Against = Annotated[tuple[str, ...], AfterValidator(_cited)]


def _rising(pair: tuple[float, float]) -> tuple[float, float]:
    low, high = pair
    if not 0 <= low < high:
        raise ValueError(f"must rise from at least 0; got {low:g} to {high:g}")
    return pair


Hours = Annotated[float, Field(gt=0)]
Span = Annotated[tuple[float, float], AfterValidator(_rising)]


class PlacementRow(Strict):
    """One row of the placement table: a situation, and what its sites count as.

    An empty situation field matches everything. Rows are read from the top; the
    first that matches decides. A site in none of the three lists is one the table
    says nothing about. ``against`` names works that found otherwise.
    """

    id: str
    generator: tuple[str, ...] = Field(min_length=1)
    synchrony: tuple[str, ...] = ()
    bias_flow: BiasFlow | None = None
    humidification: tuple[str, ...] = ()
    mode: tuple[str, ...] = ()
    circuit: tuple[str, ...] = ()
    preferred: tuple[str, ...] = Field(min_length=1)
    acceptable: tuple[str, ...] = ()
    discordant: tuple[str, ...] = ()
    distance_from_wye_cm: Span | None = None
    strength: Strength
    evidence: Evidence
    note: str = ""
    against: Against = ()
    against_note: str = ""

    @field_validator("generator", "synchrony", "humidification", "mode", "circuit")
    @classmethod
    def _known_words(cls, value: tuple[str, ...], info: Any) -> tuple[str, ...]:
        _only(info.field_name, value)
        return value

    @field_validator("preferred", "acceptable", "discordant")
    @classmethod
    def _known_sites(cls, value: tuple[str, ...]) -> tuple[str, ...]:
        _only("site", value)
        return value

    @model_validator(mode="after")
    def _sound(self) -> PlacementRow:
        listed = (*self.preferred, *self.acceptable, *self.discordant)
        twice = sorted({site for site in listed if listed.count(site) > 1})
        if twice:
            raise ValueError(f"lists {twice[0]} more than once")
        allowed = {*self.preferred, *self.acceptable}
        if self.distance_from_wye_cm and "inspiratory_limb" not in allowed:
            raise ValueError(
                "gives distance_from_wye_cm, but the inspiratory_limb is neither "
                "preferred nor acceptable"
            )
        if self.strength == "contested" and not self.against:
            raise ValueError("is contested and must name works in against")
        return self


class FilterLimits(Strict):
    """When the department changes an expiratory filter; no published level exists.

    ``hours_by_drug`` goes before ``hours_by_drug_class`` wherever the charted drug
    holds the name.
    """

    limit_cmh2o_per_lps: float = Field(gt=0)
    near_limit_frac: float = Field(gt=0, le=1)
    reference_flow_lpm: float = Field(gt=0)
    same_flow_within_frac: float = Field(gt=0, lt=1)
    reading_window_h: float = Field(gt=0)
    readings_for_a_trend_count: int = Field(ge=5, le=MOST_COUNT)
    rising_p: float = Field(gt=0, lt=1)
    unlogged_change_p: float = Field(gt=0, lt=1)
    hours_by_drug_class: dict[str, Hours]
    hours_by_drug: dict[str, Hours] = Field(default_factory=dict)

    @field_validator("hours_by_drug_class")
    @classmethod
    def _every_class(cls, value: dict[str, float]) -> dict[str, float]:
        if set(value) != set(DRUG_CLASSES.split()):
            allowed = ", ".join(DRUG_CLASSES.split())
            raise ValueError(
                f"must give hours for each of {allowed}; got {', '.join(value)}"
            )
        return value


class Exposure(Strict):
    """What counts as a hazardous drug, and how much reaching the room is too much."""

    hazardous_drugs: tuple[str, ...]
    room_dose_limit_mg: float = Field(gt=0)


class Sensors(Strict):
    """Limits for the expiratory sensors and the checks they are due."""

    unfiltered_since_check_count: int = Field(ge=1, le=MOST_COUNT)
    check_interval_h: float = Field(gt=0)
    volume_ratio_tolerance_frac: float = Field(gt=0, lt=1)
    drift_weight: float = Field(gt=0, le=1)
    drift_limit_sd: float = Field(gt=0)
    fault_soon_after_h: float = Field(gt=0)
    clock_offset_limit_s: float = Field(gt=0)


class UnsuitedPair(Strict):
    """A drug that should not go into these generators, and who says so."""

    drug: str = Field(min_length=3)
    generator: tuple[str, ...] = Field(min_length=1)
    evidence: Evidence
    strength: Strength
    note: str = ""

    @field_validator("generator")
    @classmethod
    def _known_words(cls, value: tuple[str, ...]) -> tuple[str, ...]:
        _only("generator", value)
        return value


class GeneratorUse(Strict):
    """How each generator is expected to be run; bias flow counts from a flow on."""

    bias_flow_runs_from_lpm: float = Field(gt=0)
    output_ml_min: dict[str, Span]
    jet_smallest_fill_ml: float = Field(gt=0)
    unsuited: tuple[UnsuitedPair, ...] = ()

    @field_validator("output_ml_min")
    @classmethod
    def _known_generators(cls, value: dict[str, Any]) -> dict[str, Any]:
        _only("generator", value)
        return value


class Estimate(Strict):
    """How far apart two estimates must lie before a difference is shown."""

    no_difference_ratio: float = Field(gt=1)
    most_assumptions_count: int = Field(ge=0, le=MOST_COUNT)


class Records(Strict):
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
            raise ValueError(
                f"must name columns of the treatment table; got {wrong[0]!r}"
            )
        return value


class Cells(Strict):
    """Smallest groups that may be shown, so that no one person can be read off."""

    treatments_count: int = Field(ge=1, le=MOST_COUNT)
    patients_count: int = Field(ge=1, le=MOST_COUNT)
    percent_needs_count: int = Field(ge=1, le=MOST_COUNT)
    shared_smallest_count: int = Field(ge=1, le=MOST_COUNT)


def _clock(value: str) -> str:
    if not re.fullmatch(r"([01]\d|2[0-3]):[0-5]\d", value):
        raise ValueError(f"must be a time of day as 07:00; got {value!r}")
    return value


ClockTime = Annotated[str, AfterValidator(_clock)]


class Shifts(Strict):
    """When each shift begins, local time."""

    day: ClockTime
    evening: ClockTime
    night: ClockTime
