"""Where a source goes: which table it holds, which of its columns are ours."""

from __future__ import annotations

import os
import re
from collections.abc import Mapping
from dataclasses import dataclass
from fnmatch import fnmatch
from pathlib import Path

from engine.columns import RECORD_TABLES, Table
from engine.errors import SourceUnreadable
from engine.intake.mapping import SiteMap
from engine.intake.normal import Normal, normal
from engine.intake.sources import Source, read_source


@dataclass(frozen=True)
class Taken:
    """One source with where it goes: the cell column of each of our columns."""

    place: int
    source: Source
    table: Table
    cells: Mapping[str, str]
    plan: Normal

    @property
    def untaken(self) -> list[str]:
        """Heads of the columns that do not reach the log."""
        return [
            head
            for i, head in enumerate(self.source.heads)
            if head and f"c{i}" not in self.cells.values()
        ]


def place_source(
    place: int, path: str | os.PathLike[str], site_map: SiteMap, zone: str
) -> Taken:
    """Read a source and say where each of its columns goes.

    Raises   SourceUnreadable if it cannot be read, if nothing tells its table, or if a
             column every row needs is missing.
    """
    source = read_source(path)
    ours = {head.lower(): ours for head, ours in site_map.columns.items()}
    named: dict[str, str] = {}
    for i, head in enumerate(source.heads):
        name = ours.get(head.lower(), head.lower())
        if name in named and head:
            raise SourceUnreadable(f"{source.name}: two columns give {name}")
        named[name] = f"c{i}"
    table = _table_of(source, set(named), site_map)
    cells = {c.name: named[c.name] for c in table.columns if c.name in named}
    for column in table.columns:
        given = column.name in cells or column.name in site_map.constants
        if column.required and not given:
            raise SourceUnreadable(
                f"{source.name} has no column {column.name}; every file of "
                f"{table.name} rows has one"
            )
    return Taken(place, source, table, cells, normal(table, cells, site_map, zone))


def _table_of(source: Source, heads: set[str], site_map: SiteMap) -> Table:
    by_name = {table.name: table for table in RECORD_TABLES}
    for pattern, name in site_map.files.items():
        if fnmatch(source.name.lower(), pattern.lower()):
            return by_name[name]
    stem = Path(source.name).stem.lower()
    for name in sorted(by_name, key=len, reverse=True):
        if re.match(rf"{name}s?(?![a-z])", stem):
            return by_name[name]
    shared = {
        table.name: len(heads & {c.name for c in table.columns})
        for table in RECORD_TABLES
        if {c.name for c in table.columns if c.required} <= heads
    }
    best = [name for name, n in shared.items() if n == max(shared.values())]
    if len(best) != 1:
        raise SourceUnreadable(
            f"{source.name}: its name and columns do not tell which table it holds; "
            f"begin its name with one of {', '.join(by_name)}"
        )
    return by_name[best[0]]


def taken_name(table: Table) -> str:
    """The working table that gathers the rows of this table from all sources."""
    return f"taken_{table.name}"


def cells_name(one: Taken) -> str:
    """The working view of a source's cells as they came."""
    return f"cells_{one.place}"
