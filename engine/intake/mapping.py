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
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise SourceUnreadable(f"{name} is not a TOML file: {error}") from None
    return _checked(content, name)


def zone_of(zone: str | None, name: str) -> str:
    """The zone if there is one of that name.

    Raises   SourceUnreadable if none is given or known.
    """
    try:
        ZoneInfo(zone or "")
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
    for column in found.times:
        _column(column, f"{name}: times", "time")
    return found


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
        _column(ours, f"{name}: columns.{theirs}")
        if names_a_person(theirs):
            raise SourceUnreadable(
                f"{name}: columns.{theirs} names a person; put an opaque token "
                "in its place before intake"
            )
    for ours in found.constants:
        _column(ours, f"{name}: constants")


def _check_words(found: SiteMap, name: str) -> None:
    for column, words in found.words.items():
        declared = _column(column, f"{name}: words", "word", "yes_no")
        allowed = declared.words or _YES_NO
        for theirs, ours in words.items():
            _one_of(ours, allowed, f"{name}: words.{column}.{theirs}")
    for term, word in found.modes.items():
        _one_of(word, words_of("mode"), f"{name}: modes.{term}")


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
