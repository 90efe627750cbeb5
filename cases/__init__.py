"""Cases a clinician can read and add: what happened, what must and must not be said.

``cases/<name>/`` holds ``story.md`` (its first line is the title), one CSV a table and
``expected.csv``. Times without an offset are in the site's zone, Europe/Dublin.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from pathlib import Path

import pandas as pd

from engine.columns import RECORD_TABLES
from engine.errors import UnknownId
from engine.intake import take_in

SITE_ZONE = "Europe/Dublin"
_HERE = Path(__file__).parent
_WRITTEN = datetime(2026, 11, 1)


@dataclass(frozen=True)
class Case:
    """One case: its name, its title and where it stands."""

    name: str
    title: str
    folder: Path

    @property
    def story(self) -> str:
        """What happened, in Markdown."""
        return (self.folder / "story.md").read_text("utf-8")


def all_cases() -> list[Case]:
    """Every case, by name."""
    folders = sorted(path.parent for path in _HERE.glob("*/story.md"))
    return [Case(folder.name, _title(folder), folder) for folder in folders]


def case_of(name: str) -> Case:
    """The case of that name.

    Raises   UnknownId naming the cases there are.
    """
    found = {case.name: case for case in all_cases()}
    if name not in found:
        raise UnknownId(f"no case {name}; there are {', '.join(found)}")
    return found[name]


def write_case(name: str, path: Path) -> Path:
    """Writes the case's log, as an intake would."""
    folder = case_of(name).folder
    files = [folder / f"{table.name}.csv" for table in RECORD_TABLES]
    sources = [file for file in files if file.exists()]
    take_in(sources, path, site_zone=SITE_ZONE, created_at=_WRITTEN)
    return Path(path)


def expected(name: str) -> pd.DataFrame:
    """say (must, must_not), about, id, what, why: one row a statement."""
    return pd.read_csv(
        case_of(name).folder / "expected.csv", dtype=str, keep_default_na=False
    )


def _title(folder: Path) -> str:
    first = (folder / "story.md").read_text("utf-8").splitlines()[0]
    return first.lstrip("# ").strip()
