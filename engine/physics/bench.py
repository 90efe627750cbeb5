"""Bench results as treatments: each row of the tables in engine/evidence becomes one.

What a study did not report is left missing where the engine has its own way of dealing
with it, and filled in, and named in ``assumed``, where it has none.
"""

from __future__ import annotations

import csv
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from importlib import resources

import numpy as np

from engine.batch import Batch, from_values
from engine.columns import TREATMENT
from engine.evidence.shape import Known

_DELIVERY = "bench_delivery.csv"
_CONTRASTS = "bench_contrasts.csv"
_WORDS = {"yes": True, "no": False}
_COLUMNS = {column.name: column for column in TREATMENT.columns}


@dataclass(frozen=True, eq=False, kw_only=True)
class BenchRow:
    """One published result and the treatments it may stand for."""

    study: str
    kind: str  # calibration or validation
    is_strict: bool  # conditions known well enough to be held to
    group: str
    condition: str
    outcome: str
    pooled: str  # point, lowest, highest, ...: what the printed value is of its kind
    observed_frac: float
    spread_frac: float  # standard deviation, NaN where none is given
    known: Known
    not_in_model: str  # why it cannot be estimated, or nothing
    assumed: str
    emission: str  # forced by the bench, or nothing
    treatments: tuple[Mapping[str, object], ...]

    @property
    def label(self) -> str:
        """Generator and condition in words."""
        generator = str(self.treatments[0].get("generator", "")).replace("_", " ")
        return f"{generator}, {self.condition}"


@dataclass(frozen=True, eq=False, kw_only=True)
class Contrast:
    """A published order: one treatment gave more than another."""

    study: str
    kind: str
    what: str
    known: Known
    more: Mapping[str, object]
    less: Mapping[str, object]


def table(name: str) -> list[dict[str, str]]:
    """The rows of a table shipped with the evidence."""
    text = (resources.files("engine.evidence") / name).read_text("utf-8")
    return list(csv.DictReader(text.splitlines()))


def bench_rows() -> list[BenchRow]:
    """Every numeric result of the bench table, in its order."""
    return [_bench_row(row) for row in table(_DELIVERY)]


def contrasts() -> list[Contrast]:
    """Every published order that comes without figures."""
    return [
        Contrast(
            study=row["study"],
            kind=row["kind"],
            what=row["what"],
            known=_known(row["known"]),
            more=_treatments(row, row["more"])[0],
            less=_treatments(row, row["less"])[0],
        )
        for row in table(_CONTRASTS)
    ]


def batch_of(treatments: Sequence[Mapping[str, object]]) -> Batch:
    """Treatments given as words and numbers, as one batch."""
    names = sorted({name for treatment in treatments for name in treatment})
    values = {name: [t.get(name) for t in treatments] for name in names}
    return from_values(**values)


def _bench_row(row: dict[str, str]) -> BenchRow:
    return BenchRow(
        study=row["study"],
        kind=row["kind"],
        is_strict=row["strict"] == "yes",
        group=row["group"],
        condition=row["condition"],
        outcome=row["outcome"],
        pooled=row["value_kind"],
        observed_frac=_percent(row["observed_percent"]),
        spread_frac=_percent(row["spread_percent"]),
        known=_known(row["known"]),
        not_in_model=row["not_in_model"],
        assumed=row["assumed"],
        emission=row["emission"],
        treatments=_treatments(row, ""),
    )


_POOLED = {"lowest": np.min, "highest": np.max}


def pool(row: BenchRow, values: np.ndarray) -> float:
    """Several sites as the one result that was published."""
    return float(_POOLED.get(row.pooled, np.mean)(values))


def _known(word: str) -> Known:
    return "read" if word == "read" else "from memory"


def _percent(text: str) -> float:
    return float(text) / 100 if text else float("nan")


def _treatments(row: dict[str, str], changed: str) -> tuple[dict[str, object], ...]:
    """One treatment for each site; ``changed`` reads ``column=value;column=value``."""
    merged = dict(row)
    for part in filter(None, changed.split(";")):
        name, _, value = part.partition("=")
        merged[name] = value
    values: dict[str, object] = {}
    for name, text in merged.items():
        column = _COLUMNS.get(name)
        if column is None or not text:
            continue
        if column.kind in {"number", "count"}:
            values[name] = float(text)
        elif column.kind in {"word", "yes_no"}:
            values[name] = _WORDS.get(text, text)
    found = []
    for site in merged["sites"].split("|"):
        word, _, distance = site.partition(":")
        place: dict[str, object] = {"site": word} if word else {}
        if distance:
            place["distance_from_wye_cm"] = float(distance)
        found.append(values | place)
    return tuple(found)
