"""The map: how one department's export says what our columns say. A TOML file.

site_zone = "Europe/Berlin"

[files]                      # file name, * and ? allowed -> our table
"neb_export*" = "treatment"
[columns]                    # their column -> our column
"TX_ID" = "treatment_id"
[words.generator]            # their word -> our word, one table a column
"VMN" = "vibrating_mesh"
[units]                      # our column -> the unit its bare figures are in
tidal_volume_ml = "L"
[times]                      # our column -> how its times are written (strftime)
started_at = "%m/%d/%Y %H:%M"
[constants]                  # our column -> what holds for every row of a file
circuit = "dual_limb"        #              that does not have the column
[modes]                      # a mode as charted here -> our word
"CMV" = "vcv"
"""

from __future__ import annotations

import os
import tomllib
from collections.abc import Mapping as Dict
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo

import duckdb
from pydantic import BaseModel, ConfigDict, Field, ValidationError

from engine.columns import RECORD_TABLES, Column, words_of
from engine.errors import SourceUnreadable
from engine.intake.identifiers import names_a_person
from engine.intake.spelling import factors

_COLUMNS: dict[str, Column] = {
    column.name: column for table in RECORD_TABLES for column in table.columns
}
_YES_NO = ("yes", "no")


class SiteMap(BaseModel):
    """A map that was read and holds; an empty one changes nothing."""

    model_config = ConfigDict(strict=True, extra="forbid", frozen=True)

    site_zone: str | None = None
    files: dict[str, str] = Field(default_factory=dict)
    columns: dict[str, str] = Field(default_factory=dict)
    words: dict[str, dict[str, str]] = Field(default_factory=dict)
    units: dict[str, str] = Field(default_factory=dict)
    times: dict[str, str] = Field(default_factory=dict)
    constants: dict[str, str] = Field(default_factory=dict)
    modes: dict[str, str] = Field(default_factory=dict)


def load_map(given: str | os.PathLike[str] | Dict[str, Any] | None) -> SiteMap:
    """The map from a TOML file, or from its content; None is the empty map.

    Raises   SourceUnreadable naming the file, the key and what is allowed there.
    """
    if given is None:
        return SiteMap()
    if isinstance(given, Dict):
        return _checked(dict(given), "map")
    name = str(given)
    try:
        content = tomllib.loads(Path(given).read_text("utf-8-sig"))
    except OSError as error:
        raise SourceUnreadable(f"{name} cannot be read: {error.strerror}") from None
    except ValueError as error:
        raise SourceUnreadable(f"{name} is not a TOML file: {error}") from None
    except RecursionError:
        raise SourceUnreadable(f"{name} is not a TOML file: nested too deep") from None
    return _checked(content, name)


def zone_of(zone: str | None, name: str) -> str:
    """The zone if there is one of that name.

    Raises   SourceUnreadable if none is given or known.
    """
    try:
        ZoneInfo(zone or "")
        duckdb.execute("SELECT timezone(?, TIMESTAMP '2000-01-01')", [zone])
    except Exception:
        raise SourceUnreadable(
            f"{name} must be a time zone such as Europe/Berlin; got {zone or 'nothing'}"
        ) from None
    return str(zone)


def _checked(content: dict[str, Any], name: str) -> SiteMap:
    try:
        found = SiteMap.model_validate(content)
    except ValidationError as error:
        first = error.errors()[0]
        key = ".".join(str(part) for part in first["loc"])
        if first["type"] == "extra_forbidden":
            keys = ", ".join(SiteMap.model_fields)
            raise SourceUnreadable(
                f"{name}: {key} is no key of a map; the keys are {keys}"
            ) from None
        raise SourceUnreadable(f"{name}: {key}: {first['msg']}") from None
    _check_files(found, name)
    _check_columns(found, name)
    _check_words(found, name)
    for column, unit in found.units.items():
        allowed = factors(_column(column, f"{name}: units", "number"))
        if unit.lower() not in allowed:
            raise SourceUnreadable(
                f"{name}: units.{column} must be one of {', '.join(allowed)}; "
                f"got {unit}"
            )
    for column, pattern in found.times.items():
        _column(column, f"{name}: times", "time")
        _check_pattern(pattern, f"{name}: times.{column}")
    if found.site_zone is not None:
        zone_of(found.site_zone, f"{name}: site_zone")
    return found


def _check_pattern(pattern: str, where: str) -> None:
    try:
        duckdb.execute("SELECT try_strptime('2026-01-01', ?)", [pattern])
    except duckdb.Error:
        raise SourceUnreadable(
            f"{where} must be a pattern such as %d.%m.%Y %H:%M; got {pattern}"
        ) from None


def _check_files(found: SiteMap, name: str) -> None:
    tables = [table.name for table in RECORD_TABLES]
    for pattern, table in found.files.items():
        if table not in tables:
            raise SourceUnreadable(
                f"{name}: files.{pattern} must be one of {', '.join(tables)}; "
                f"got {table}"
            )


def _check_columns(found: SiteMap, name: str) -> None:
    for theirs, ours in found.columns.items():
        if not theirs.strip():
            raise SourceUnreadable(f"{name}: columns holds an empty name")
        _column(ours, f"{name}: columns.{theirs}")
        if names_a_person(theirs):
            raise SourceUnreadable(
                f"{name}: columns.{theirs} names a person; put an opaque token "
                "in its place before intake"
            )
    for ours, value in found.constants.items():
        declared = _column(ours, f"{name}: constants")
        if declared.kind == "word":
            _one_of(value, declared.words, f"{name}: constants.{ours}")


def _check_words(found: SiteMap, name: str) -> None:
    for column, words in found.words.items():
        declared = _column(column, f"{name}: words", "word", "yes_no")
        allowed = declared.words or _YES_NO
        _refuse_two_of_one(words, f"{name}: words.{column}")
        for theirs, ours in words.items():
            _one_of(ours, allowed, f"{name}: words.{column}.{theirs}")
    for term, word in found.modes.items():
        _one_of(word, words_of("mode"), f"{name}: modes.{term}")


def _refuse_two_of_one(words: dict[str, str], where: str) -> None:
    """Capitals do not count in an export: one word may not mean two things."""
    meant: dict[str, str] = {}
    for theirs, ours in words.items():
        if meant.setdefault(theirs.strip().lower(), ours) != ours:
            raise SourceUnreadable(f"{where}: {theirs} is given two meanings")


def _one_of(word: str, allowed: tuple[str, ...], where: str) -> None:
    if word not in allowed:
        raise SourceUnreadable(
            f"{where} must be one of {', '.join(allowed)}; got {word}"
        )


def _column(name: str, where: str, *kinds: str) -> Column:
    if name not in _COLUMNS:
        raise SourceUnreadable(f"{where}: the log has no column {name}")
    if kinds and _COLUMNS[name].kind not in kinds:
        raise SourceUnreadable(f"{where}: {name} is not a {' or '.join(kinds)} column")
    return _COLUMNS[name]
